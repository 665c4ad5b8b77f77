"""``rigbench demo``: the demo arms and experiments, to try and to copy from."""

from __future__ import annotations

import shlex
import shutil
from pathlib import Path

import rigbench
from rigbench.cli.output import print_json, show
from rigbench.errors import Fault, InputFaults, StoreError

__all__ = ["copy_demo"]

PARTS = ("robots_demo", "experiments")
ENDINGS = (".yaml", ".urdf", ".json", ".csv", ".py", ".stl")

FIRST = "experiments/first-look.yaml"


def copy_demo(folder: str, as_json: bool) -> None:
    """Copy the demo into ``folder`` and say what to do with it.

    InputFaults, with nothing copied, if any of its files is there already; StoreError if the disk refuses.
    """
    source, target = _source(), Path(folder)
    files = sorted(
        path.relative_to(source)
        for part in PARTS
        for path in (source / part).rglob("*")
        if path.suffix in ENDINGS and "results" not in path.parts
    )
    there = [target / file for file in files if (target / file).exists()]
    if target.exists() and not target.is_dir():
        there = [target]
    if there:
        expected = "a new folder, or one without them"
        raise InputFaults(Fault(str(path), None, "", "exists already", expected) for path in there)
    try:
        for file in files:
            (target / file).parent.mkdir(parents=True, exist_ok=True)
            shutil.copyfile(source / file, target / file)
    except OSError as error:
        raise StoreError(str(error.filename or target), f"can't be written: {error.strerror}") from error
    if as_json:
        print_json({"folder": folder, "files": [file.as_posix() for file in files]})
        return
    arms, experiments = (
        sum(file.parts[0] == part and file.suffix == ".yaml" for file in files) for part in PARTS
    )
    here = target.resolve() == Path.cwd()
    where, first_step = ("here", "") if here else (f"to {folder}", f"  cd {shlex.quote(folder)}\n")
    show(f"{arms} arm files and {experiments} experiments copied {where}. Try them:")
    show(f"{first_step}  rigbench check {FIRST}\n  rigbench run {FIRST}")
    show("Each experiment opens with its question and how to read the answer.")


def _source() -> Path:
    """Return where the demo is: in the package as installed, or beside it in a clone of the repository."""
    package = Path(rigbench.__file__).parent
    return next(place for place in (package / "demo", package.parent) if (place / PARTS[0]).is_dir())
