"""Replaying a stored run from what the store holds alone, and holding it against what was stored."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from rigbench.campaign.kept import Kept
from rigbench.campaign.reading import Reader, Record
from rigbench.campaign.work import PACKAGES, Host, this_host
from rigbench.errors import InputFaults, PluginError
from rigbench.scores.names import in_display_order, score_info
from rigbench.scores.row import MACHINE_OUTCOMES

if TYPE_CHECKING:
    from rigbench.rig.log import Log  # not at run time: it brings the engine and the compiler
    from rigbench.rig.run import Run

__all__ = ["Difference", "Replay", "replay"]

CHANGES = {
    "numerics": "this version of rigbench works runs out by other arithmetic",
    "law": "the source of the law '{law}' has changed since",
    "scene": "the source of the scene has changed since, or the shapes of the arm",
}
"""What it means that an input of a run has another mark than it had when it was planned."""


@dataclass(frozen=True)
class Difference:
    """What came out otherwise: a score's name, or outcome, reason or residual_rad_s; None: it isn't there."""

    name: str
    stored: float | str | None
    replayed: float | str | None


@dataclass(frozen=True, eq=False)
class Replay:
    """A stored run done again. ``scores`` are the reproducible ones: none that tells of the host.

    ``differences`` is empty if it is the same run to the last bit; ``reasons`` says in words what has
    changed since, as far as the store knows, if there are differences.
    """

    record: Record
    run: Run
    log: Log
    scores: Mapping[str, float]
    differences: tuple[Difference, ...] = ()
    reasons: tuple[str, ...] = ()

    def pairs(self) -> dict[str, tuple[float | None, float | None]]:
        """Return each reproducible score as stored and as replayed, None where it isn't there."""
        before = _reproducible(self.record.row.scores)
        names = in_display_order([*before, *self.scores])
        return {name: (before.get(name), self.scores.get(name)) for name in names}

    @property
    def identical(self) -> bool:
        """Whether outcome, reason, residual and all scores are the stored ones, to the last bit."""
        return not self.differences


def replay(store: Reader, record: Record) -> Replay:
    """Do a stored run again.

    InputFaults if there is nothing to replay, since the run came to no verdict of the machine (the stored
    traceback is in the fault), if its law or scene is not registered here, or if one of them fails now.
    StoreError if the store does not hold the run itself.
    """
    from rigbench.rig import simulate  # the engine and the compiler: a second of imports
    from rigbench.scores.of_run import score_run

    _check_verdict(store, record)
    kept, host = store.kept(record.key), store.host(record.key)
    _check_registered(store, record, kept.run, host)
    try:
        log = simulate(kept.run)
    except PluginError as error:
        reasons = "; ".join(_reasons(kept, host))
        problem = f"the replay fails, but the run had not when it was stored: {reasons}\n{error}"
        raise InputFaults.one(store.path, record.key, problem.rstrip()) from None
    scores = _reproducible(score_run(log, kept.run.motion, kept.run.settle_band_mm))
    again = Replay(record, kept.run, log, scores)
    differences = tuple(_differences(again))
    return replace(again, differences=differences, reasons=_reasons(kept, host) if differences else ())


def _check_verdict(store: Reader, record: Record) -> None:
    row = record.row
    if row.outcome not in MACHINE_OUTCOMES:
        problem = f"there is nothing to replay, for the run came to nothing ({row.outcome}): {row.reason}"
        raise InputFaults.one(store.path, record.key, f"{problem}\n{record.trace}".rstrip())


def _check_registered(store: Reader, record: Record, run: Run, host: Host | None) -> None:
    from rigbench.laws.registry import registered
    from rigbench.rig.scene import registered_scenes

    others = [f"{name} {version}" for name, version in _versions(host).items() if name not in PACKAGES]
    expected = f"the package that it came from: {', '.join(others)}" if others else ""
    for what, plugin, here in (
        ("law", run.law, registered().laws),
        ("scene", run.scene, registered_scenes().scenes),
    ):
        if plugin is not None and not plugin.files and plugin.plugin not in here:
            problem = f"the {what} '{plugin.plugin}' is not registered here"
            raise InputFaults.one(store.path, record.key, problem, expected)


def _versions(host: Host | None) -> dict[str, str]:
    """Return the versions of packages that a run was done with, Python's own left out."""
    versions = {} if host is None else dict(host.versions)
    versions.pop("python", None)
    return versions


def _reproducible(scores: Mapping[str, float]) -> dict[str, float]:
    infos = {name: score_info(name) for name in scores}
    return {name: value for name, value in scores.items() if (info := infos[name]) is None or not info.host}


def _differences(again: Replay) -> Iterator[Difference]:
    record, log = again.record, again.log
    pairs: dict[str, tuple[float | str | None, float | str | None]] = {
        "outcome": (record.row.outcome, log.outcome),
        "reason": (record.row.reason, log.reason),
        "residual_rad_s": (record.residual, float(log.residual)),
        **again.pairs(),
    }
    for name, (stored, replayed) in pairs.items():
        if stored != replayed:
            yield Difference(name, stored, replayed)


def _reasons(kept: Kept, host: Host | None) -> tuple[str, ...]:
    """Say what has changed since the run was done; if nothing that the store knows has, then that."""
    here, plugin = this_host(kept.run.law.plugin), kept.run.law.plugin
    reasons = [
        CHANGES.get(name, f"'{name}' means something else to this version of rigbench").format(law=plugin)
        for name in kept.changed()
    ]
    if host is not None and host.cpu != here.cpu:
        reasons.append(f"it was done on another type of CPU ({host.cpu}; here {here.cpu})")
    then, now = ({} if one is None else dict(one.versions) for one in (host, here))
    reasons += [
        f"it was done with {name} {then[name]} (here {now.get(name, 'none')})"
        for name in then
        if then[name] != now.get(name)
    ]
    if not reasons:
        reasons.append("nothing that the store knows of has changed: does the law use chance or the clock?")
    return tuple(reasons)
