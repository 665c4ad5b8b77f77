"""The link between a campaign and a dask scheduler: who is there, and handing chunks to one of them.

All that waits on the network is done on the dask client's own event loop; nothing here blocks for longer
than its stated time, whatever becomes of the scheduler.
"""

from __future__ import annotations

import asyncio
import contextlib
import logging
import socket
from collections.abc import Callable, Coroutine, Iterator, Mapping
from concurrent.futures import Future
from typing import Any, TypeVar
from urllib.parse import urlsplit

from rigbench.campaign.alike import Plugins, host_for
from rigbench.campaign.closable import Closable
from rigbench.campaign.cluster_worker import Reply, do_chunk, open_hand, stop_hand
from rigbench.campaign.work import Host
from rigbench.errors import ClusterLost, InputFaults

__all__ = ["Link", "check_address"]

CONNECT_S = 5.0
"""How long a scheduler may take to answer."""

ASK_EVERY_S = 0.5
"""How often the scheduler is asked who is there."""

SILENCE_S = 30.0
"""A scheduler that has not answered for so long is gone."""

CLOSE_S = 5.0

LONGEST_GREETING = 2**20
"""Bytes; a scheduler's has some hundred."""

Answer = TypeVar("Answer")


def check_address(address: str) -> None:
    """InputFaults unless the address is ``tcp://HOST:PORT``."""
    expected = "tcp://HOST:PORT, as 'dask scheduler' prints it"
    try:
        parts = urlsplit(address)
        good = parts.scheme == "tcp" and parts.hostname and parts.port and not (parts.path or parts.query)
    except ValueError:  # a port that is no number or beyond 65535
        good = False
    if not good:
        raise InputFaults.one("--cluster", "", f"{address!r} is no address of a scheduler", expected)


class Link(Closable):
    """A connection to a scheduler; use it in a ``with``.

    ``sizes`` maps the address of each worker to its number of threads, as of half a second ago. InputFaults
    if there is no scheduler at the address, or if dask is not installed.
    """

    def __init__(self, address: str) -> None:
        check_address(address)
        self.address = address
        self._lost: str | None = None
        self._hands: dict[str, Any] = {}
        self._quiet = contextlib.ExitStack()
        self._client = _connected(address)
        self._quiet.enter_context(_quiet())
        self.sizes: Mapping[str, int] = {}
        self._watching = self._start(self._watch())

    def close(self) -> None:
        """End the crews that were opened, and the connection."""
        self._watching.cancel()
        with contextlib.suppress(Exception):  # there is nobody left to tidy up for
            self._start(self._close()).result(2 * CLOSE_S)
        with contextlib.suppress(Exception):
            self._client.close(timeout=CLOSE_S)
        self._quiet.close()

    @property
    def lost(self) -> str | None:
        """How the scheduler went away; None while it is there."""
        if self._lost is None and self._client.status != "running":
            return "the connection broke off"
        return self._lost

    def ask_host(self, worker: str, plugins: Plugins) -> Future[Host]:
        """Ask a worker for what decides bits there; an exception if rigbench can't be imported there."""
        return self._start(_result(self._submitted(worker, host_for, plugins)))

    def open(self, worker: str, threads: int) -> None:
        """Let a worker start a crew, a process for each of its threads."""
        self._hands[worker] = self._submitted(worker, open_hand, threads)

    def give(self, worker: str, payload: bytes, limit_s: float) -> Future[Reply]:
        """Give a chunk to a worker whose crew was opened.

        The future raises whatever dask does where it can't be done, and never ends if the worker is lost.
        To cancel it lets dask drop the chunk.
        """
        return self._start(_result(self._submitted(worker, do_chunk, self._hands[worker], payload, limit_s)))

    def forget(self, worker: str) -> None:
        """Take note that a worker is lost."""
        self._hands.pop(worker, None)

    def _submitted(self, worker: str, function: Callable[..., Any], *given: Any) -> Any:
        try:
            return self._client.submit(
                function, *given, workers=[worker], pure=False, allow_other_workers=False
            )
        except Exception as error:
            raise ClusterLost(self.address, f"the scheduler went away ({error})") from error

    def _start(self, coroutine: Coroutine[Any, Any, Answer]) -> Future[Answer]:
        future: Future[Answer] = asyncio.run_coroutine_threadsafe(coroutine, self._client.loop.asyncio_loop)
        return future

    async def _watch(self) -> None:
        while True:
            try:
                self.sizes = dict(await asyncio.wait_for(self._client.scheduler.ncores(), SILENCE_S))
            except TimeoutError:
                self._lost = f"it has not answered for {SILENCE_S:g} s"
                return
            except Exception as error:
                self._lost = " ".join(str(error).split()) or type(error).__name__
                return
            await asyncio.sleep(ASK_EVERY_S)

    async def _close(self) -> None:
        if self.lost is not None:
            return
        keys = [hand.key for hand in self._hands.values()]
        workers = [worker for worker in self._hands if worker in self.sizes]
        if workers:
            stopping = self._client.run(stop_hand, keys, workers=workers, on_error="ignore")
            await asyncio.wait_for(stopping, CLOSE_S)


@contextlib.contextmanager
def _quiet() -> Iterator[None]:
    """Keep dask from logging what is dealt with here: a worker that is lost, a scheduler that is gone."""
    loggers = [logging.getLogger(name) for name in ("distributed", "distributed.client")]
    before = [logger.level for logger in loggers]
    for logger in loggers:
        logger.setLevel(logging.CRITICAL)
    try:
        yield
    finally:
        for logger, level in zip(loggers, before, strict=True):
            logger.setLevel(level)


async def _result(task: Any) -> Any:
    return await task


def _connected(address: str) -> Any:
    try:
        from distributed import Client
    except ImportError:
        raise InputFaults.one(
            "--cluster", "", "needs dask, which is not installed", "pip install 'rigbench[cluster]'"
        ) from None
    try:
        _knock(address)
        connect: Any = Client
        return connect(address, timeout=CONNECT_S, set_as_default=False, name="rigbench")
    except Exception as error:  # a refused or silent port, a name that nobody knows, another program
        said = " ".join(str(error).split()) or type(error).__name__
        problem = f"no scheduler answers at {address} within {CONNECT_S:g} s ({said:.200})"
        raise InputFaults.one("--cluster", "", problem, "what 'dask scheduler' prints") from None


def _knock(address: str) -> None:
    """OSError unless a scheduler greets who calls there: dask itself waits for ever for one that doesn't."""
    parts = urlsplit(address)
    with socket.create_connection((str(parts.hostname), parts.port or 0), CONNECT_S) as line:
        length = int.from_bytes(line.recv(8), "little")  # of the greeting; another program's words are huge
        if not 0 < length < LONGEST_GREETING:
            raise ConnectionError("it is no scheduler that answers")
