"""The identification file, read and checked, and the doing of it."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from os.path import normpath
from pathlib import Path

from rigbench.arm.case import Case
from rigbench.arm.files import ArmFiles
from rigbench.errors import InputFaults
from rigbench.experiment.expand import spreading
from rigbench.experiment.file_kind import IDENTIFICATION, check_kind
from rigbench.experiment.findings import Findings
from rigbench.experiment.identification_keys import ExcitationKeys, IdentificationKeys, SimulateKeys
from rigbench.experiment.mismatch import mismatch_of
from rigbench.experiment.motions import motions_of
from rigbench.identify.bounds import bounds_of
from rigbench.identify.excitation import Search, excite
from rigbench.identify.plausible import implausible
from rigbench.identify.procedure import Identification, Settings, Simulated, identify, record
from rigbench.identify.recording import Recording
from rigbench.identify.recording_file import read_recording
from rigbench.identify.regressor import Terms
from rigbench.identify.series import SeriesSpace
from rigbench.identify.tracking import tracked
from rigbench.motion.motion import Motion
from rigbench.rig.run import Rates
from rigbench.yamlfile import load, partial, read_text

__all__ = ["DeclaredIdentification", "load_identification"]

CHECK_SEED = 1
"""Added to the search's seed for the random motion on which a simulated identification is checked."""

Tell = Callable[[str], None]


@dataclass(frozen=True, eq=False)
class DeclaredIdentification:
    """An identification file that was found in order; ``simulated`` is None where there are recordings."""

    path: str
    files: ArmFiles
    settings: Settings
    recordings: tuple[Recording, ...]
    loaded: tuple[Recording, ...]
    check: Recording | None
    simulated: Simulated | None
    excitation: ExcitationKeys
    motions: Mapping[str, Motion]

    def carry_out(self, tell: Tell) -> Identification:
        """Do what is declared; ``tell`` is told, in a line each, what takes its time."""
        if self.simulated is None:
            return identify(self.files, self.settings, self.recordings, self.check, loaded=self.loaded)
        search = self._search()
        keys = self.excitation

        def after(done: int, _: float) -> None:
            if done % 10 == 0:
                tell(f"excitation: {done} of at most {keys.rounds} rounds")

        best = excite(
            search,
            criterion=keys.criterion,
            seed=keys.seed,
            rounds=keys.rounds,
            periods=keys.periods,
            tell=after,
        )
        random = f"{best.random_condition:.4g} along random ones"
        tell(f"excitation: condition number {best.condition:.4g} along the motion found, {random}")
        fitted, truth = record(self.files, self.settings, self.simulated, best.motion, "excitation", 0)
        other = search.random_motion(keys.seed + CHECK_SEED, keys.periods)
        check, _ = record(self.files, self.settings, self.simulated, other, "a random motion", 1)
        carrying, laden = [], None
        if self.simulated.loaded is not None:
            name = "excitation with the load"
            loaded, laden = record(
                self.files, self.settings, self.simulated, best.motion, name, 2, loaded=True
            )
            carrying = [loaded]
        done = identify(self.files, self.settings, [fitted], check, truth, carrying, laden)
        return replace(done, tracked=tracked(done, self.simulated, self.motions))

    def _search(self) -> Search:
        keys, arm = self.excitation, self.files.arm()
        least, most = (
            None if corner is None else tuple(corner) for corner in (keys.tool_least_m, keys.tool_most_m)
        )
        bounds = bounds_of(arm, keys.limit_percent / 100, least, most)  # type: ignore[arg-type]  # three numbers
        space = SeriesSpace(bounds, keys.harmonics, keys.period_s)
        return Search(arm, self.settings.gravity, self.settings.terms, bounds, space)


def load_identification(path: str | Path) -> DeclaredIdentification:
    """Read and check an identification file, its arm file and recordings; InputFaults with every fault."""
    file, folder = str(path), Path(path).parent
    document = load(file, read_text(Path(path), file, "the identification file"))
    check_kind(document, IDENTIFICATION)
    keys, faults = partial(document, IdentificationKeys)
    if keys is None:
        raise InputFaults(faults)
    findings = Findings(document, faults)
    if findings.clean("recordings") and findings.clean("simulate"):
        if (keys.recordings is None) == (keys.simulate is None):
            missing = keys.simulate is None
            problem = "needs recordings or simulate" if missing else "has no effect beside recordings"
            findings.fault(() if missing else ("simulate",), problem, "one of the two")
        if keys.check is not None and keys.simulate is not None:
            findings.fault(("check",), "simulate makes its own check", "no check beside simulate")
    if keys.excitation is not None and keys.simulate is None and findings.clean("excitation"):
        findings.fault(("excitation",), "has no effect beside recordings", "simulate")
    _check_loaded(keys, findings)
    _check_once(keys, findings)
    _check_motions(keys, findings)
    if findings.faults and not findings.clean("arm"):
        raise InputFaults(findings.faults)
    files = _arm(folder / keys.arm, findings)
    if files is None:
        raise InputFaults(findings.faults)
    settings = Settings(
        Terms(**{name: name in keys.terms for name in ("rotor", "viscous", "coulomb", "offset")}),
        (keys.gravity_m_s2[0], keys.gravity_m_s2[1], keys.gravity_m_s2[2]),
        keys.corner_hz,
        keys.declared_percent / 100,
    )
    recordings, loaded = (
        [_recording(folder / name, files, settings, findings) for name in names or ()]
        for names in (keys.recordings, keys.loaded)
    )
    check = None if keys.check is None else _recording(folder / keys.check, files, settings, findings)
    simulated = None
    if keys.simulate is not None:
        given = keys.simulate
        place = ("simulate", "mismatch")
        mismatch = mismatch_of(given.mismatch, files.arm(), findings, folder, place)
        simulated = Simulated(
            mismatch, spreading(mismatch), given.seed, given.noise_deg, given.torque_noise_nm, _case(given)
        )
    motions = motions_of(keys.motions or {}, findings, folder, files.arm(), Rates().control_hz)
    if findings.faults:
        raise InputFaults(findings.faults)
    kept, carrying = (tuple(each for each in read if each is not None) for read in (recordings, loaded))
    return DeclaredIdentification(
        file, files, settings, kept, carrying, check, simulated, keys.excitation or ExcitationKeys(), motions
    )


def _check_motions(keys: IdentificationKeys, findings: Findings) -> None:
    """Check that there is a hidden machine for the motions, and nothing that they can't have here."""
    if keys.motions is None:
        return
    if keys.simulate is None and findings.clean("simulate"):
        findings.fault(("motions",), "have no effect beside recordings", "simulate")
    for name, motion in keys.motions.items():
        if motion.tolerance is not None:
            problem = "is not judged in an identification"
            findings.fault(("motions", name, "tolerance"), problem, "no tolerance here")
    payload = None if keys.simulate is None else keys.simulate.mismatch.payload
    if payload is not None and payload.believed_kg > 0:
        place = ("simulate", "mismatch", "payload", "believed_kg")
        findings.fault(place, "an identified model has the payload in it and would carry it twice", "0")


def _check_loaded(keys: IdentificationKeys, findings: Findings) -> None:
    """Check that what is recorded with a load stands beside what is recorded without."""
    if keys.loaded is not None and findings.clean("loaded"):
        if keys.simulate is not None:
            problem = "simulate makes its own recordings with a load"
            findings.fault(("loaded",), problem, "simulate.loaded: {payload_kg: ...}")
        elif keys.recordings is None and findings.clean("recordings"):
            problem = "tells nothing without motions of the arm alone"
            findings.fault(("loaded",), problem, "recordings too, of the arm without the load")
    simulate = keys.simulate
    if simulate is not None and simulate.loaded is not None and simulate.mismatch.payload is not None:
        problem = "the hidden machine carries the mismatch's payload already"
        findings.fault(("simulate", "loaded"), problem, "no payload under mismatch")


def _check_once(keys: IdentificationKeys, findings: Findings) -> None:
    """Check that no recording is named twice: it would count twice, or be its own check."""
    seen = dict[str, str]()
    for key, names in (("recordings", keys.recordings), ("loaded", keys.loaded), ("check", keys.check)):
        listed = [names] if isinstance(names, str) else names or ()
        for i, name in enumerate(listed):
            if (path := normpath(name)) in seen:
                place = (key, i) if listed is names else (key,)
                findings.fault(place, f"'{name}' is among {seen[path]} already", "each recording once")
            seen.setdefault(path, key)


def _case(keys: SimulateKeys) -> Case | None:
    """Return what the hidden machine carries when it moves a second time; None where it does not."""
    if (given := keys.loaded) is None:
        return None
    x, y, z = given.payload_cog_mm or (0.0, 0.0, 0.0)
    return Case(payload_kg=given.payload_kg, payload_cog_mm=(x, y, z))


def _arm(path: Path, findings: Findings) -> ArmFiles | None:
    """Return the arm's files, or None with their faults among the findings."""
    try:
        files = ArmFiles.read(path)
        files.arm()
    except InputFaults as error:
        findings.take(error.faults)
        return None
    return files


def _recording(path: Path, files: ArmFiles, settings: Settings, findings: Findings) -> Recording | None:
    """Return a recording that is plausible, or None with its faults among the findings."""
    try:
        recording, table = read_recording(path, files.arm())
    except InputFaults as error:
        findings.take(error.faults)
        return None
    findings.take(implausible(files.arm(), settings.gravity, recording, table))
    return recording
