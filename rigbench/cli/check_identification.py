"""``rigbench check`` of an identification file: what it declares, if all of it is in order."""

from __future__ import annotations

from collections.abc import Iterator

from rigbench.cli.output import print_json, show
from rigbench.errors import counted
from rigbench.experiment.expand import NAMES
from rigbench.experiment.identification import DeclaredIdentification, load_identification
from rigbench.identify.base import base_of
from rigbench.identify.recording import Recording

__all__ = ["check_identification"]


def check_identification(file: str, as_json: bool) -> None:
    """Print what an identification takes, recordings read and held against the arm; nothing is searched."""
    declared = load_identification(file)
    settings, arm = declared.settings, declared.files.arm()
    count = base_of(arm, settings.gravity, settings.terms).count
    if as_json:
        print_json(_document(declared, count))
        return
    terms = f"links and {', '.join(settings.terms.names)}" if settings.terms.names else "links"
    lines = [f"{file}: in order", f"arm: {arm.name}, {counted(count, 'base parameter')} of {terms}"]
    show("\n".join([*lines, *_practice(declared), *_recorded(declared)]))


def _practice(declared: DeclaredIdentification) -> Iterator[str]:
    if (hidden := declared.simulated) is None:
        return
    keys, sources = declared.excitation, ", ".join(NAMES[source] for source in hidden.sources) or "none"
    load = "" if hidden.loaded is None else f"; then once more with a load of {hidden.loaded.payload_kg:g} kg"
    yield f"practice: on a hidden machine, mismatch: {sources}"
    yield (
        f"excitation: {keys.harmonics} harmonics, {keys.periods} times {keys.period_s:g} s, from at most "
        f"{counted(keys.rounds, 'round')} of search{load}"
    )
    if declared.motions:
        yield f"tracked: {', '.join(declared.motions)}"


def _recorded(declared: DeclaredIdentification) -> Iterator[str]:
    groups = {"recordings": declared.recordings, "with the load": declared.loaded}
    check = () if declared.check is None else (declared.check,)
    for what, recordings in (groups | {"check": check}).items():
        for recording in recordings:
            rows = counted(len(recording.t), "row")
            yield f"{what}: {recording.name}, {rows} in {recording.duration_s:.4g} s"


def _document(declared: DeclaredIdentification, count: int) -> dict[str, object]:
    def told(recordings: tuple[Recording, ...]) -> list[dict[str, object]]:
        return [{"file": r.name, "rows": len(r.t), "seconds": r.duration_s} for r in recordings]

    return {
        "file": declared.path,
        "arm": declared.files.arm().name,
        "base_parameters": count,
        "terms": list(declared.settings.terms.names),
        "practice": declared.simulated is not None,
        "recordings": told(declared.recordings),
        "loaded": told(declared.loaded),
        "check": told(() if declared.check is None else (declared.check,)),
        "motions": list(declared.motions),
    }
