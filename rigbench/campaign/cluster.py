"""Campaigns on many machines: an executor over the workers of a dask scheduler.

Runs go out in chunks of about a second of work, pinned to a worker, and no more than two for each of its
threads. A worker keeps processes of its own for them (:mod:`rigbench.campaign.cluster_worker`), so what goes
wrong in a run ends as the row that it ends as on one machine. Beyond that:

=====================================  =====================================================
what goes wrong                        what becomes of the runs
=====================================  =====================================================
a chunk dies or is late                its runs are done again one by one, under each one's own limit
a worker is lost                       what it had in hand is done again elsewhere, one by one
a run's worker is lost twice           'crashed'; a worker has one run at a time that is under suspicion
a worker joins                         compared with this machine first; unless it differs it gets runs
no worker is left                      ClusterLost if none has joined after five minutes
the scheduler goes away                ClusterLost at once; what came back is stored
=====================================  =====================================================
"""

from __future__ import annotations

import time
from collections.abc import Callable, Generator, Iterable, Iterator
from concurrent.futures import Future, wait
from contextlib import contextmanager
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from rigbench.campaign.alike import Plugins, differences, host_for, plugins_of
from rigbench.campaign.cluster_link import Link
from rigbench.campaign.cluster_shift import Shift, host_or_problem
from rigbench.campaign.executor import Work, given_up_after, time_limit_s
from rigbench.campaign.plan import Entry
from rigbench.campaign.work import Host, Outcome, do
from rigbench.errors import Fault, InputFaults

if TYPE_CHECKING:
    from rigbench.rig.run import Run

__all__ = ["Cluster", "cluster_executor"]

WORKERS_S = 10.0
"""How long to wait for a first worker before the campaign, and ..."""

ANSWER_S = 60.0
"""... for the workers' versions: rigbench is imported there first."""


def cluster_executor(
    address: str,
    entries: Iterable[Entry],
    tell: Callable[[str], None] = lambda _: None,
    limit_s: float | None = None,
) -> Cluster:
    """Return an executor on the cluster of a dask scheduler at ``tcp://HOST:PORT``, for these entries.

    Every worker that is there is compared with this machine first. ``tell`` takes notes, now and while the
    campaign runs: another type of CPU, a worker that joins, is lost or is refused. ``limit_s``: see
    :func:`given_up_after`. InputFaults if the address is none, if dask is missing or no scheduler answers,
    if there is no worker, and with every difference of versions that decides bits.
    """
    plugins = plugins_of(entries)
    with Link(address) as link:
        hosts = _asked(link, plugins)
    faults = [
        Fault(f"worker {worker}", None, "", problem, "a worker that rigbench is installed for")
        for worker, problem in hosts.items()
        if isinstance(problem, str)
    ]
    known = {worker: host for worker, host in hosts.items() if isinstance(host, Host)}
    faults += differences(host_for(plugins), known)
    if faults:
        raise InputFaults(faults)
    return Cluster(address, plugins, limit_s=given_up_after(limit_s), tell=tell)


def _asked(link: Link, plugins: Plugins) -> dict[str, Host | str]:
    """Return what decides bits at each worker, or what kept it from answering."""
    ends = time.monotonic() + WORKERS_S
    while not link.sizes:
        if time.monotonic() > ends or link.lost is not None:
            problem = f"no worker has joined the scheduler at {link.address} within {WORKERS_S:g} s"
            raise InputFaults.one("--cluster", "", problem, f"one or more: dask worker {link.address}")
        time.sleep(0.05)
    asked = {worker: link.ask_host(worker, plugins) for worker in link.sizes}
    ends = time.monotonic() + ANSWER_S
    return {worker: _answer(future, ends - time.monotonic()) for worker, future in asked.items()}


def _answer(future: Future[Host], timeout: float) -> Host | str:
    wait([future], max(0.0, timeout))
    return (
        host_or_problem(future) if future.done() else f"has not answered within {ANSWER_S:g} s; is it busy?"
    )


@dataclass(frozen=True)
class Cluster:
    """Does the runs on the workers of a dask scheduler; see :func:`cluster_executor`.

    ``patience_s``: how long a campaign waits when no worker is left.
    """

    address: str
    plugins: Plugins = field(default_factory=Plugins)
    work: Work = do
    limit_s: Callable[[Run], float] = field(default=time_limit_s)
    tell: Callable[[str], None] = field(default=lambda _: None)
    patience_s: float = 300.0

    def run_all(self, entries: Iterable[Entry]) -> Generator[Outcome]:
        """See :class:`rigbench.campaign.executor.Standing`. ClusterLost if scheduler or workers go away."""
        with self.standing() as shift:
            yield from shift.run_all(entries)

    @contextmanager
    def standing(self) -> Iterator[Shift]:
        """See :class:`rigbench.campaign.executor.Executor`: the link stays, and so do the crews."""
        with Link(self.address) as link:
            yield Shift(self, link)
