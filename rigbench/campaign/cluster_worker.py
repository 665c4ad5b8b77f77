"""On a machine of a cluster: what a campaign asks of a dask worker there.

The dask worker does no run itself. It keeps a crew of worker processes, one for each of its threads, as a
campaign on one machine does (:mod:`rigbench.campaign.workers`): a run that crashes, hangs or takes too much
memory costs its own process, with the same row, and the dask worker lives on.
"""

from __future__ import annotations

import multiprocessing
import pickle
import time
import weakref
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from rigbench.campaign.worker import answer
from rigbench.campaign.workers import BrokenCrew, Crew, Overdue, WorkerDied

if TYPE_CHECKING:
    from rigbench.campaign.work import Outcome
    from rigbench.rig.run import Run

__all__ = ["Broken", "Died", "Done", "Hand", "Late", "Reply", "do_chunk", "do_each", "open_hand", "stop_hand"]


@dataclass(frozen=True)
class Done:
    """A chunk was done; ``result`` is what :func:`do_each` returned, pickled."""

    result: bytes


@dataclass(frozen=True)
class Late:
    """A chunk did not end within its limit; ``words`` is the traceback of where it was."""

    words: str


@dataclass(frozen=True)
class Died:
    """The process of a chunk died; ``share`` is the memory [bytes] that it might take."""

    exitcode: int
    words: str
    share: int | None


@dataclass(frozen=True)
class Broken:
    """No worker processes can be had on this machine."""

    reason: str


Reply = Done | Late | Died | Broken


class Hand:
    """A campaign's crew on this machine. It ends when it is told to, or when dask forgets it.

    dask forgets it when the campaign's process is gone, however that ended. BrokenCrew if there can't be one.
    """

    def __init__(self, size: int) -> None:
        # dask starts its workers as daemons, which may have no children; these end with their parent anyway
        multiprocessing.current_process().daemon = False
        self._crew = Crew(size)
        self.stop = weakref.finalize(self, self._crew.stop)

    def do(self, payload: bytes, limit_s: float) -> Reply:
        """Do a chunk in whichever process is free."""
        try:
            return Done(self._crew.give(payload, limit_s).result())
        except Overdue as error:
            return Late(error.words)
        except WorkerDied as error:
            return Died(error.exitcode, error.words, self._crew.share)
        except (BrokenCrew, RuntimeError) as error:  # RuntimeError: it was told to stop meanwhile
            return Broken(str(error))


def open_hand(size: int) -> Hand | Broken:
    """Start a crew of so many processes here."""
    try:
        return Hand(size)
    except BrokenCrew as error:
        return Broken(str(error))


def do_chunk(hand: Hand | Broken, payload: bytes, limit_s: float) -> Reply:
    """Do a chunk of runs here; ``payload`` is for :func:`rigbench.campaign.worker.answer`."""
    return hand if isinstance(hand, Broken) else hand.do(payload, limit_s)


def stop_hand(keys: Sequence[str], dask_worker: Any) -> None:
    """End the crews that this dask worker holds under any of the keys, whatever they are doing."""
    for key in keys:
        hand = dask_worker.data.get(key)
        if isinstance(hand, Hand):
            hand.stop()


def do_each(chunk: tuple[Callable[[Run], Outcome], Sequence[Run]]) -> tuple[float, list[bytes]]:
    """Do a chunk's runs in turn, in a crew's process; return the time it took [s] and the answers."""
    work, runs = chunk
    began = time.perf_counter()
    answers = [answer(pickle.dumps((work, run))) for run in runs]
    return time.perf_counter() - began, answers
