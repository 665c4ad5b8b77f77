"""An identification as one page of text."""

from __future__ import annotations

import textwrap

from rigbench.errors import counted
from rigbench.identify.procedure import Identification
from rigbench.report.cautions import BEFORE_A_REAL_ARM
from rigbench.report.identify_numbers import Shown
from rigbench.report.identify_verdict import noise_words, torque_words
from rigbench.report.load_text import load_text

__all__ = ["identify_text"]

NUMBER = 11


def identify_text(done: Identification) -> str:
    """Return torques before and after, every base parameter with its interval, the load, and tracking."""
    parts = [_head(done), _torques(done), _parameters(done)]
    if done.load is not None:
        parts.append(load_text(done.load))
    if done.tracked:
        parts.append(_tracked(done))
    parts.append(textwrap.wrap(BEFORE_A_REAL_ARM, 100))
    return "\n\n".join("\n".join(part) for part in parts)


def _head(done: Identification) -> list[str]:
    found = done.found
    load = "" if done.load is None else f" and {done.load.found.base.count} of a load"
    lines = [
        f"{done.files.arm().name}: {found.base.count} parameters{load} from {found.rows} samples, "
        f"condition number of the fit {found.condition:.3g}"
    ]
    if found.spikes:
        lines.append(f"{counted(found.spikes, 'recorded sample')} taken for spikes and left out")
    if outliers := int(found.outliers.sum()):
        lines.append(f"{counted(outliers, 'sample')} of a joint's torque left out as outliers")
    return lines


def _torques(done: Identification) -> list[str]:
    """One line a joint: how much its torque varies, and what is left of it; then what to make of that."""
    shown = Shown(done)
    errors = shown.errors
    of = "a motion that was not fitted" if done.checked else "the motion that was fitted"
    lines = [f"Error of predicted torques, rms [N m; N], on {of} ({done.rows.name})", ""]
    wide = max(16, *map(len, shown.joints))
    lines.append(
        f"  {'joint':<{wide}}"
        + "".join(f"{word:>{NUMBER}}" for word in ("varies by", "declared", "identified"))
    )
    for i, joint in enumerate(shown.joints):
        numbers = (
            errors["declared"].measured_nm[i],
            errors["declared"].rms_nm[i],
            errors["identified"].rms_nm[i],
        )
        lines.append(f"  {joint:<{wide}}" + "".join(f"{number:>{NUMBER}.3g}" for number in numbers))
    left = noise_words(shown) if done.checked else "That is no test; a check would be."
    return [*lines, "", *textwrap.wrap(f"{torque_words(shown)} {left}", 100)]


def _parameters(done: Identification) -> list[str]:
    """One line a base parameter: declared, estimated with its interval, identified and, if known, true."""
    found, true = done.found, done.true_values
    low, high = found.interval()
    words = ["declared", "estimate", "+-", "identified", *([] if true is None else ["true"])]
    lines = [
        "Base parameters [SI units], estimate with its 95 % interval; identified: of the arm that can exist",
        "",
    ]
    lines.append("  " + "".join(f"{word:>{NUMBER}}" for word in words))
    columns = [done.declared_values, found.values, (high - low) / 2, done.identified_values]
    columns += [] if true is None else [true]
    for name, *numbers in zip(found.base.names, *columns, strict=True):
        lines.append("  " + "".join(f"{number:>{NUMBER}.4g}" for number in numbers) + f"  {name}")
    return lines


def _tracked(done: Identification) -> list[str]:
    """One line a motion: the tool's error under computed torque, by the model that it believes."""
    words = ("declared", "identified", "itself")
    lines = [
        "Largest tool error of computed torque on the hidden machine, its sensors exact [mm], by what the",
        "law believes: the declared arm, the identified one, the machine itself",
        "",
        "  " + "".join(f"{word:>{NUMBER}}" for word in words),
    ]
    for one in done.tracked:
        errors = (one.declared_mm, one.identified_mm, one.exact_mm)
        told = ("did not end" if error is None else f"{error:.3g}" for error in errors)
        lines.append("  " + "".join(f"{text:>{NUMBER}}" for text in told) + f"  {one.motion}")
    return lines
