"""``rigbench identify``: from unknown parameters to an identified arm file."""

from __future__ import annotations

from dataclasses import asdict
from pathlib import Path

from rigbench.cli.output import print_json, say, show

__all__ = ["identify_arm"]


def identify_arm(path: str, output: str | None, as_json: bool) -> None:
    """Do what an identification file declares, write the arm into the folder ``output``, print the report."""
    from rigbench.experiment.identification import load_identification
    from rigbench.identify.covariance_file import covariance_document
    from rigbench.identify.identified import write_identified, write_loaded
    from rigbench.report.identify_numbers import Shown
    from rigbench.report.identify_picture import identify_picture
    from rigbench.report.identify_text import identify_text
    from rigbench.report.identify_verdict import unexplained_joints, worse_joints
    from rigbench.report.load_text import load_document

    declared = load_identification(path)
    done = declared.carry_out(say)
    folder, stem = Path(output or "results"), Path(path).stem
    name = f"{stem}-identified"
    terms = declared.settings.terms
    written = write_identified(folder, name, declared.files, terms, done.found, done.result)
    loaded: tuple[Path, ...] = ()
    if done.loaded_arm is not None:
        loaded = write_loaded(folder, f"{stem}-loaded", declared.files, terms, done.loaded_arm)
    picture = folder / f"{name}.png"
    identify_picture(done, picture)
    files = dict(zip(("arm", "urdf", "covariance"), map(str, written), strict=True))
    files |= dict(zip(("loaded arm", "loaded urdf"), map(str, loaded), strict=False))
    files["picture"] = str(picture)
    if as_json:
        shown = Shown(done)
        errors = {
            whose: dict(zip(shown.joints, error.rms_nm.tolist(), strict=True))
            for whose, error in shown.errors.items()
        }
        known = covariance_document(done.result, terms, done.found)
        condition, checked = done.found.condition, done.checked
        base = {"base": known["base"], "noise_nm": known["noise_nm"], "condition": condition}
        load = {} if done.load is None else {"load": load_document(done.load)}
        tracks = [asdict(one) for one in done.tracked]
        told = {"files": files, "torque_error_nm": errors, "checked": checked, "tool_peak": tracks}
        told |= {"worse_at": worse_joints(shown), "unexplained_at": unexplained_joints(shown)}
        print_json(told | base | load)
    else:
        show(identify_text(done))
        for what, file in files.items():
            say(f"{what}: {file}")
