"""``rigbench gears``: what each gear ratio does to an arm, and what it costs."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from pathlib import Path

from rigbench.arm.files import ArmFiles
from rigbench.cli.output import print_json, say, show, tell_notes, width
from rigbench.errors import Fault, InputFaults, nearest

__all__ = ["tell_gears"]

COMMAND = "rigbench gears"
LEAST, MOST, COUNT = 1e-3, 1e6, 40
LONGEST_S = 60.0


def tell_gears(
    path: str,
    ratios: str | None,
    joints: Sequence[str],
    leg_s: float | None,
    output: str | None,
    as_json: bool,
) -> None:
    """Print what each ratio does to the joints, all of them where none is named; draw it where asked."""
    files = ArmFiles.read(path)
    arm = files.arm()
    given, faults = _ratios(ratios)
    faults += [*_unknown(joints, arm.joints), *_leg(leg_s)]
    if faults:
        raise InputFaults(faults)
    if output is not None:
        from rigbench.report.picture import check_format

        check_format(Path(output))
    from rigbench.campaign.gears import RATIOS, gears
    from rigbench.report.gears_text import gears_text
    from rigbench.report.gears_words import notes
    from rigbench.rig import warm_up

    tell_notes(arm.notes)
    warm_up()
    named = [joint for joint in arm.joints if joint in joints or not joints]
    found = gears(files, named, given or RATIOS, leg_s)
    if output is not None:
        from rigbench.report.gears_picture import gears_picture

        gears_picture(found, Path(output))
    if as_json:
        print_json(found.document() | {"picture": output, "notes": notes(found)})
        return
    show(gears_text(found, width()))
    for noted in notes(found):
        say(f"note: {noted}")
    if output is not None:
        say(f"picture: {output}")


def _ratios(text: str | None) -> tuple[tuple[float, ...], list[Fault]]:
    """Return the ratios in rising order, each once, and what is wrong with them."""
    if text is None:
        return (), []
    found: set[float] = set()
    faults = []
    for part in text.split(","):
        try:
            ratio = float(part)
        except ValueError:
            ratio = math.nan
        if LEAST <= ratio <= MOST:
            found.add(ratio)
        else:
            faults.append(
                _fault(
                    "--ratios", f"'{part.strip()}' is no gear ratio", f"a number from {LEAST:g} to {MOST:g}"
                )
            )
    if len(found) > COUNT:
        faults.append(_fault("--ratios", f"{len(found)} ratios", f"at most {COUNT}"))
    return tuple(sorted(found)), faults


def _unknown(joints: Sequence[str], valid: Sequence[str]) -> Iterator[Fault]:
    for joint in dict.fromkeys(joints):
        if joint not in valid:
            near = nearest(joint, valid)
            expected = "" if near else f"one of {', '.join(valid)}"
            yield Fault(COMMAND, None, "--joint", f"the arm has no joint '{joint}'", expected, near)


def _leg(leg_s: float | None) -> Iterator[Fault]:
    if leg_s is not None and not 0.01 <= leg_s <= LONGEST_S:
        yield _fault("--leg", f"{leg_s:g} s", f"0.01 to {LONGEST_S:g} s")


def _fault(key: str, problem: str, expected: str) -> Fault:
    return Fault(COMMAND, None, key, problem, expected)
