"""Whether another machine does a campaign's runs to the same bits: what decides it, compared.

Versions of Python, of the packages that compute and of those that register the plug-ins used, the digest
of rigbench's own sources, and NUMERICS must be equal. Another type of CPU may round otherwise in the last
digit; that is worth a note, and the store says which type did each run.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from functools import cache

from rigbench.campaign.plan import Entry
from rigbench.campaign.work import Host, this_host
from rigbench.errors import Fault

__all__ = ["Plugins", "differences", "host_for", "plugins_of"]

ROOMS = tuple(f"rigbench.{room}" for room in ("arm", "motion", "laws", "rig", "scores"))
"""What a run goes through: working copies of one version may differ there."""

DIGITS = 12
"""Hex digits shown of the digest of their sources."""

NOT_THERE = "not installed"


@dataclass(frozen=True)
class Plugins:
    """The registered laws and scenes that a campaign uses, by name; those in files travel with the runs."""

    laws: tuple[str, ...] = ()
    scenes: tuple[str, ...] = ()


def plugins_of(entries: Iterable[Entry]) -> Plugins:
    """Return the registered plug-ins of the entries' runs."""
    laws, scenes = set[str](), set[str]()
    for entry in entries:
        run = entry.run
        if not run.law.files:
            laws.add(run.law.plugin)
        if run.scene is not None and not run.scene.files:
            scenes.add(run.scene.plugin)
    return Plugins(tuple(sorted(laws)), tuple(sorted(scenes)))


@cache
def host_for(plugins: Plugins) -> Host:
    """Return this machine's CPU type, and all that decides the bits of runs with these plug-ins."""
    from rigbench.laws.plugins import digest_of, package_digest
    from rigbench.rig.run import NUMERICS
    from rigbench.rig.scene import registered_scenes

    host = this_host("")
    found = dict(host.versions)
    for law in plugins.laws:
        found |= dict(this_host(law).versions)
    for name in plugins.scenes:
        scene = registered_scenes().scenes.get(name)
        if scene is not None:
            found[scene.package] = scene.version
    found["rigbench's sources"] = digest_of(tuple((room, package_digest(room)) for room in ROOMS))[:DIGITS]
    found["NUMERICS"] = str(NUMERICS)
    return Host(host.cpu, tuple(found.items()))


def differences(here: Host, there: Mapping[str, Host]) -> list[Fault]:
    """Return what decides bits and is not ``here`` as it is ``there``, by the addresses of the workers.

    Workers that differ in the same are told of once, so a cluster of equal machines is one line a package.
    """
    known = dict(here.versions)
    told: dict[tuple[str, str], list[str]] = {}
    for worker, host in there.items():
        theirs = dict(host.versions)
        for package in known | theirs:
            if theirs.get(package) != known.get(package):
                told.setdefault((package, theirs.get(package, NOT_THERE)), []).append(worker)
    return [
        Fault(_these(workers), None, package, found, f"{known.get(package, NOT_THERE)}, as here")
        for (package, found), workers in told.items()
    ]


def _these(workers: list[str]) -> str:
    more = len(workers) - 1
    return f"worker {workers[0]} and {more} more" if more else f"worker {workers[0]}"
