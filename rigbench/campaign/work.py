"""The work: one run done, whatever happens in it, as an outcome to store."""

from __future__ import annotations

import math
import os
import platform
import sys
import time
import traceback
from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cache
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import TYPE_CHECKING

from rigbench.errors import InputFaults, PluginError, SceneError
from rigbench.scores.names import SCORES

if TYPE_CHECKING:
    from rigbench.rig.run import Run  # not at run time: it brings the engine and the compiler

__all__ = ["Host", "Outcome", "do", "failed", "this_host"]

PACKAGES = ("rigbench", "numpy", "scipy", "numba", "pybullet")
"""The packages whose versions may change the last digits of a run."""


@dataclass(frozen=True)
class Host:
    """The machine that did a run: its type of CPU, and the versions of what the run was done with."""

    cpu: str
    versions: tuple[tuple[str, str], ...]


@dataclass(frozen=True)
class Outcome:
    """What a run leaves behind, in the form that crosses from worker to store.

    ``outcome`` is one of the machine's or the host's (see :mod:`rigbench.scores.row`); ``scores`` is
    empty unless it is 'finished'. ``trace`` is a traceback as text: the law's own after a 'law-error',
    ours or the crashed worker's after a 'crashed'. ``residual`` [rad/s] is the largest disagreement of
    engine and drive. ``host_scores`` (law_us ...) and ``wall_s`` [s] tell of the host: they are not
    reproducible, as all else is.
    """

    key: str
    outcome: str
    reason: str = ""
    scores: Mapping[str, float] = field(default_factory=dict)
    trace: str = ""
    host_scores: Mapping[str, float] = field(default_factory=dict)
    residual: float | None = None
    wall_s: float | None = None
    host: Host | None = None


def do(run: Run) -> Outcome:
    """Do a run and score it. Whatever is raised in it ends as its outcome, but for two things.

    An exception of the law is a 'law-error'; so is one of the scene, whose reason says so: it would come
    again likewise. So would 'no-plant', of a draw or case that makes a machine that can't exist, and
    'disagrees', of a run on which engine and drive disagree about the machine: its outcome and scores
    are no verdict. Any other exception is the host's, whoever's it is (the engine's, the disk's, a
    mistake of ours): the run is 'crashed' and carries the traceback. KeyboardInterrupt is raised on, and
    so is MemoryError, in a law too: what to do about either is for whoever does the runs to say.
    """
    key, begin = run.key(), time.perf_counter()
    try:
        return _simulated(run, key, begin)
    except PluginError as error:
        if isinstance(error.__context__, MemoryError):
            raise MemoryError(f"in '{error.name}'") from error
        who = f"scene '{error.name}': " if isinstance(error, SceneError) else ""
        host = this_host(run.law.plugin)
        return failed(key, "law-error", f"{who}{error.summary}", error.trace, host)
    except InputFaults as error:  # all else that is declared was checked before: it is the plant
        reason = "; ".join(map(str, error.faults))
        return failed(key, "no-plant", reason, host=this_host(run.law.plugin))
    except (KeyboardInterrupt, MemoryError):
        raise
    except BaseException as error:
        return failed(key, "crashed", summary(error), traceback.format_exc(), this_host(run.law.plugin))


def failed(key: str, outcome: str, reason: str, trace: str = "", host: Host | None = None) -> Outcome:
    """Return the outcome of a run that the host could not bring to a verdict."""
    return Outcome(key, outcome, reason, trace=trace, host=host)


def summary(error: BaseException) -> str:
    """Return an exception as the last line of its traceback shows it, on one line."""
    try:
        text = " ".join(str(error).split())
    except Exception:  # a user's exception may be at fault itself
        text = "its message can't be had"
    return f"{type(error).__name__}: {text}" if text else type(error).__name__


def _simulated(run: Run, key: str, begin: float) -> Outcome:
    from rigbench.rig import simulate  # the engine and the compiler: a second of imports
    from rigbench.rig.log import RESIDUAL_LIMIT
    from rigbench.scores.of_run import score_run

    log = simulate(run)
    if log.in_doubt and log.outcome != "diverged":  # at the speeds of a runaway, rounding alone is as much
        return Outcome(
            key,
            "disagrees",
            f"engine and drive disagree by {log.residual:.2g} rad/s (limit {RESIDUAL_LIMIT:g})",
            residual=float(log.residual),
            wall_s=time.perf_counter() - begin,
            host=this_host(run.law.plugin),
        )
    scores = score_run(log, run.motion, run.settle_band_mm)
    for name, value in scores.items():
        if math.isnan(value) or value == -math.inf:
            raise ArithmeticError(f"the score {name} came out as {value}")
    of_host = {name for name in scores if name in SCORES and SCORES[name].host}
    return Outcome(
        key,
        log.outcome,
        log.reason,
        {name: float(value) for name, value in scores.items() if name not in of_host},
        host_scores={name: float(scores[name]) for name in scores if name in of_host},
        residual=float(log.residual),
        wall_s=time.perf_counter() - begin,
        host=this_host(run.law.plugin),
    )


@cache
def this_host(plugin: str) -> Host:
    """Return this machine's CPU type and the versions a run under the law ``plugin`` was done with."""
    from rigbench.laws.registry import registered

    versions = {"python": platform.python_version()}
    for package in PACKAGES:
        try:
            versions[package] = version(package)
        except PackageNotFoundError:
            versions[package] = "unknown"
    law = registered().laws.get(plugin)
    if law is not None:
        versions[law.package] = law.version
    return Host(_cpu(), tuple(versions.items()))


def _cpu() -> str:
    if sys.platform == "linux":
        for line in Path("/proc/cpuinfo").read_text("utf-8", "replace").splitlines():
            if line.startswith("model name"):
                return line.partition(":")[2].strip()
    return platform.processor() or os.uname().machine
