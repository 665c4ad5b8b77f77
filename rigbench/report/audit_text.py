"""An audit as one page of text."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

from rigbench.campaign.audit.result import Audit, Convergence, Slide
from rigbench.report.wrapping import wrap
from rigbench.rig.log import RESIDUAL_LIMIT

__all__ = ["audit_text", "number", "rest_words"]

WHAT, LABEL, COLUMN = 13, 11, 8
NARROWEST = 80
INDENT = "  "


def audit_text(audit: Audit, width: int = 100) -> str:
    """Return what an audit found as lines of at most ``width`` columns (80 at least)."""
    width = max(width, NARROWEST)
    parts = [
        [*_wrap(f"{audit.name} ({audit.path})", width, ""), *_wrap(_sentence(audit.verdict), width, "")],
        ["1. Engine against model", *_wrap(_accelerations(audit), width)],
        [*_wrap(_swing_words(audit), width, ""), *_swing(audit)],
        ["3. Momentum", *_wrap(_momentum(audit), width)],
        ["4. Step size", *_wrap(_step_size(audit), width), *_convergences(audit, width)],
        ["5. Dry friction", *_wrap(rest_words(audit), width), *_slides(audit, width)],
        ["6. Residual", *_wrap(_residual(audit), width)],
    ]
    return "\n\n".join("\n".join(part) for part in parts)


def _sentence(words: str) -> str:
    return f"{words[0].upper()}{words[1:]}."


def _wrap(text: str, width: int, indent: str = INDENT) -> list[str]:
    return [indent + line for line in wrap(text, width - len(indent), len)]


def number(value: float) -> str:
    """Return a small number with two digits, such as 1.4e-09; 0 as such."""
    return "0" if value == 0 else f"{value:.1e}"


def share_words(share: float) -> str:
    """Return a share as percent, with two digits where it is small."""
    if not math.isfinite(share):
        return "-"
    percent = 100 * share
    return f"{percent:.0f} %" if percent >= 10 else f"{percent:.2g} %" if percent >= 0.01 else "<0.01 %"


def _row(what: str, label: str, values: Sequence[str], end: str = "") -> str:
    cells = "".join(f"{value:>{COLUMN}}" for value in values)
    return f"{INDENT}{what:<{WHAT}}{label:<{LABEL}}{cells}  {end}".rstrip()


def _rates(rates: Sequence[float]) -> str:
    return _row("", "physics_hz", [f"{hz:g}" for hz in rates])


def _order(order: float | None) -> str:
    return "" if order is None else f"order {order:.2f}"


def _accelerations(audit: Audit) -> str:
    found = audit.accelerations
    return (
        f"In {found.states} random states the engine's accelerations differ from the model's by at most "
        f"{number(found.worst)} of their size (joint {found.worst_joint})."
    )


def _swing_words(audit: Audit) -> str:
    swing = audit.swing
    peak = f"{swing.peak_kinetic_j:.3g} J"
    return (
        f"2. Free swing of {swing.seconds:g} s without friction: energy's drift over its kinetic peak, {peak}"
    )


def _swing(audit: Audit) -> Iterator[str]:
    swing = audit.swing
    yield _rates(swing.physics_hz)
    yield _row("", "drift", [number(drift) for drift in swing.drifts], _order(swing.order))


def _momentum(audit: Audit) -> str:
    found = audit.momentum
    if not found.applies:
        return _sentence(found.why)
    drifts = ", ".join(
        f"{number(drift)} at {hz:g} Hz" for hz, drift in zip(found.physics_hz, found.drifts, strict=True)
    )
    return f"{_sentence(found.why)} In that swing its momentum drifts by {drifts}, of its largest size."


def _step_size(audit: Audit) -> str:
    exact = any(convergence.against == "ode" for convergence in audit.convergences)
    target = "an ODE solution of the same sampled loop" if exact else "the engine's own finest run"
    return (
        "A motion there and back at control_hz 1000 (500 where physics_hz is 500). Smooth: without dry "
        f"friction and limits, against {target}. Declared: the arm as it is, against the engine's own finest "
        f"run. Error: the largest of any joint [{audit.unit}]. Of allowed: the worst score's error over what "
        "is allowed, which is 1 % of the score, or 0.001 mm or 0.0001 deg where that is more."
    )


def _convergences(audit: Audit, width: int) -> Iterator[str]:
    law = ""
    for convergence in audit.convergences:
        if convergence.law != law:
            law = convergence.law
            yield ""
            yield _rates(convergence.physics_hz)
            yield f"{INDENT}{law}, natural_hz {convergence.natural_hz:g}"
        yield from _course(convergence, width)


def _course(convergence: Convergence, width: int) -> Iterator[str]:
    what = "  declared" if convergence.dry else "  smooth"
    if convergence.note:
        yield from _wrap(f"{what.strip()}: not judged, {convergence.note}", width, INDENT + "  ")
        return
    errors = [number(error) if math.isfinite(error) else "-" for error in convergence.errors]
    yield _row(what, "error", errors, _order(convergence.order))
    needed = convergence.needed_hz
    said = "none will do" if needed is None else f"needs {needed:g}"
    yield _row("", "of allowed", [share_words(used) for used in convergence.used], said)


def rest_words(audit: Audit) -> str:
    """Say what dry friction holds."""
    rest = audit.rest
    if rest.drift is None:
        return f"At rest: {rest.how}."
    moved = "does not move" if rest.drift == 0 else f"moves by {number(rest.drift)} {audit.unit}"
    return f"At rest for {rest.seconds:g} s, {rest.how}: {moved}."


def _slides(audit: Audit, width: int) -> Iterator[str]:
    if not audit.slides:
        return
    about = "Sliding to a stop, one joint at a time, at 1 kHz, against J dv/dt = -F - B v in closed form:"
    yield from _wrap(about, width)
    heads = ("speed", "stop [s]", "exact", "off", "way", "exact", "off")
    label = max(WHAT, *(len(slide.joint) + 1 for slide in audit.slides))
    if label + (COLUMN + 1) * len(heads) + len(INDENT) > width:
        yield from (line for slide in audit.slides for line in _wrap(_slide_words(slide), width))
        return
    yield _line("joint", heads, label)
    for slide in audit.slides:
        numbers = [f"{slide.speed:.3g}", f"{slide.stop_s:.4f}", f"{slide.exact_stop_s:.4f}"]
        numbers += [share_words(slide.stop_off), f"{slide.travel:.4f}", f"{slide.exact_travel:.4f}"]
        yield _line(slide.joint, [*numbers, share_words(slide.travel_off)], label)


def _line(name: str, cells: Sequence[str], label: int) -> str:
    return f"{INDENT}{name:<{label}}" + "".join(f"{cell:>{COLUMN + 1}}" for cell in cells)


def _slide_words(slide: Slide) -> str:
    return (
        f"{slide.joint}: stops after {slide.stop_s:.4f} s (off by {share_words(slide.stop_off)}) and "
        f"{slide.travel:.4f} (off by {share_words(slide.travel_off)})."
    )


def _residual(audit: Audit) -> str:
    return (
        f"In all of this the engine missed the velocity that the drive foresaw by at most "
        f"{number(audit.residual)} rad/s; runs are marked above {number(RESIDUAL_LIMIT)}."
    )
