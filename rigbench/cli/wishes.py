"""What is wished for of a campaign on the command line, and whether it can be had."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass

from rigbench.campaign.part import Part
from rigbench.cli.spans import read_clock, read_span
from rigbench.errors import Fault, InputFaults, nearest
from rigbench.experiment import Experiment

__all__ = ["Wishes", "limit_of", "part_of"]


@dataclass(frozen=True)
class Wishes:
    """How a campaign is to be run: the options of the command, as they were given.

    ``span`` and ``clock`` are what --for and --until said; ``draws`` how many of every cell are wanted now;
    ``again`` the laws to be done anew; ``fresh`` whether all is to be done anew, and ``sure`` whether that
    was confirmed beforehand; ``cluster`` the address of a scheduler whose workers are to do the runs;
    ``limit`` after how long a run is to be given up.
    """

    jobs: int | None = None
    store: str | None = None
    again: tuple[str, ...] = ()
    span: str | None = None
    clock: str | None = None
    draws: int | None = None
    fresh: bool = False
    sure: bool = False
    cluster: str | None = None
    limit: str | None = None


def part_of(experiment: Experiment, wishes: Wishes, began: tuple[float, float]) -> Part:
    """Return the part of the campaign that is wished for; ``began``: monotonic and POSIX time [s].

    InputFaults for whatever the experiment can't fulfil.
    """
    file, faults = experiment.path, list(_law_faults(experiment, wishes.again))
    monotonic, now = began
    spans = [] if wishes.span is None else [read_span(file, wishes.span, "--for")]
    spans += [] if wishes.clock is None else [read_clock(file, wishes.clock, now)]
    faults += [span for span in spans if isinstance(span, Fault)]
    if wishes.draws is not None and not experiment.random:
        faults.append(Fault(file, None, "--draws", "nothing in it is random, so it has no draws"))
    elif wishes.draws is not None and wishes.draws > experiment.draws:
        problem, expected = f"{wishes.draws} draws are wished for", f"at most the {experiment.draws} declared"
        faults.append(Fault(file, None, "--draws", problem, expected))
    if wishes.sure and not wishes.fresh:
        faults.append(Fault(file, None, "--yes", "confirms --fresh, which is not given"))
    if wishes.cluster is not None and wishes.jobs is not None:
        problem = "counts worker processes of this machine, and --cluster has the runs done elsewhere"
        faults.append(Fault(file, None, "--jobs", problem, "one of the two"))
    limit = None if wishes.limit is None else read_span(file, wishes.limit, "--limit")
    if isinstance(limit, Fault):
        faults.append(limit)
    elif limit is not None and wishes.jobs == 0:
        problem = "is kept by worker processes, and --jobs 0 does without them"
        faults.append(Fault(file, None, "--limit", problem, "one of the two"))
    if faults:
        raise InputFaults(faults)
    shortest = min((span for span in spans if not isinstance(span, Fault)), default=None)
    return Part(wishes.draws, None if shortest is None else monotonic + shortest)


def limit_of(wishes: Wishes) -> float | None:
    """Return after how long [s] a run is to be given up, of wishes that can be had; None if none is said."""
    limit = None if wishes.limit is None else read_span("", wishes.limit, "--limit")
    return None if isinstance(limit, Fault) else limit


def _law_faults(experiment: Experiment, again: Iterable[str]) -> Iterator[Fault]:
    known = f"one of {', '.join(experiment.laws)}"
    for law in again:
        if law not in experiment.laws:
            near = nearest(law, experiment.laws)
            yield Fault(experiment.path, None, "--again", f"there is no law '{law}'", known, near)
