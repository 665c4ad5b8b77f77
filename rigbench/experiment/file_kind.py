"""What a YAML file declares, so that one in the place of another is told as that."""

from __future__ import annotations

from pathlib import Path

from rigbench.errors import InputFaults
from rigbench.yamlfile import Document, load, read_text

__all__ = ["EXPERIMENT", "IDENTIFICATION", "check_kind", "kind_of_file"]

EXPERIMENT, IDENTIFICATION, ARM = "an experiment", "an identification", "an arm"
COMMANDS = {EXPERIMENT: "`rigbench run`", IDENTIFICATION: "`rigbench identify`", ARM: "`rigbench audit`"}


def check_kind(document: Document, wanted: str) -> None:
    """Raise InputFaults if a file has the keys of another kind and none of the ``wanted`` one's."""
    kind = _kind_of(document)
    if kind not in (None, wanted):
        expected = f"{wanted} (for this one see {COMMANDS[kind]})"
        raise InputFaults.one(document.file, "", f"declares {kind}", expected)


def kind_of_file(file: str) -> str | None:
    """Return what a file declares; None where its keys don't tell. InputFaults if it is no YAML."""
    return _kind_of(load(file, read_text(Path(file), file, "the experiment file")))


def _kind_of(document: Document) -> str | None:
    """Return what a file declares; None where its keys don't tell."""
    experiment = document.holds("laws")
    identification = document.holds("recordings") or document.holds("simulate")
    if experiment or identification:
        return None if experiment and identification else EXPERIMENT if experiment else IDENTIFICATION
    return ARM if document.holds("urdf") and document.holds("drives") else None
