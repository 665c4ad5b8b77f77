"""The scene of an experiment: its name looked up, or its function loaded from a file of the user's own."""

from __future__ import annotations

from pathlib import Path

from rigbench.arm.collision import collision
from rigbench.arm.files import ArmFiles
from rigbench.errors import InputFaults, SceneError, nearest
from rigbench.experiment.findings import Findings
from rigbench.rig.scene import SceneChoice, load_file_scene, registered_scenes

__all__ = ["scene_choice"]

PATH = ("scene",)


def scene_choice(
    plugin: str | None, arm: ArmFiles | None, findings: Findings, folder: Path
) -> SceneChoice | None:
    """Return the scene; None where there is none or it is at fault. What can't be touched is a note."""
    if plugin is None:
        return None
    found = _of_file(plugin, findings, folder) if ".py" in plugin else _registered(plugin, findings)
    if found is not None and arm is not None:
        for note in collision(arm).notes:
            findings.notes.append(note)
    return found


def _registered(plugin: str, findings: Findings) -> SceneChoice | None:
    scenes = registered_scenes()
    if plugin in scenes.scenes:
        return SceneChoice(plugin)
    broken = dict(scenes.broken)
    if plugin in broken:
        findings.fault(PATH, f"'{plugin}' is registered but can't be used: {broken[plugin]}")
        return None
    near = nearest(plugin, scenes.scenes)
    expected = "" if near else ", ".join(["FILE.py:FUNCTION", *scenes.scenes])
    findings.fault(PATH, f"'{plugin}' is not a registered scene", expected, near)
    return None


def _of_file(plugin: str, findings: Findings, folder: Path) -> SceneChoice | None:
    file, colon, name = plugin.rpartition(":")
    if not (colon and file.endswith(".py") and name.isidentifier()):
        findings.fault(PATH, f"'{plugin}' does not name a function in a file", "FILE.py:FUNCTION")
        return None
    try:
        return SceneChoice(plugin, load_file_scene(folder / file, name)[1])
    except SceneError as error:
        findings.fault(PATH, f"'{plugin}' raised {error.summary}\n{error.trace.rstrip()}")
    except InputFaults as error:
        for fault in error.faults:
            findings.fault(PATH, f"'{plugin}': {fault.problem}", fault.expected, fault.near)
    return None
