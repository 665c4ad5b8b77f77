"""A whole physics step with a law in it as one kernel: a call from Python costs as much as the law."""

from __future__ import annotations

from collections.abc import Callable
from functools import lru_cache
from types import FunctionType
from typing import Any

from rigbench.arm.arm import Floats
from rigbench.arm.kernel import kernel, kernel_of_this_process
from rigbench.laws.law import SEES, Compiled
from rigbench.rig.rows import MACHINE_ROWS
from rigbench.rig.sensing import OK
from rigbench.rig.tick import begin_step, end_step

__all__ = ["AFTER", "BEFORE", "NOT_DUE", "FusedStep", "fused", "no_term"]

NOT_DUE, BEFORE, AFTER = range(3)
"""When a tick works out the model term: not at all, before its torque, or after it (one tick late)."""

FusedStep = Callable[..., int]
"""A kernel of the arguments of :func:`_step`."""


@kernel
def no_term(io: Floats, held: Floats, chain: Floats, own: Floats) -> None:
    """Stand for the model term of a law that has none."""


def fused(compiled: Compiled) -> FusedStep | None:
    """Return the physics step around a law's kernels; None where each run makes kernels of its own.

    A function made inside another one is another kernel each time: compiling a step around it would cost
    every run a second, to save milliseconds.
    """
    torque: Any = compiled.torque
    model_term: Any = compiled.model_term or no_term
    sources = [getattr(made, "py_func", None) for made in (torque, model_term)]
    if any("<locals>" in getattr(source, "__qualname__", "<locals>") for source in sources):
        return None
    return _fused(torque, model_term)


@lru_cache(maxsize=64)
def _fused(torque: Any, model_term: Any) -> FusedStep:
    """Compile a copy of :func:`_step` that calls these two.

    The copy bears the names of both, by which the compiler's cache on disk tells it from the others. That
    cache can't see a change in a law's own files, so it serves the laws of this package alone, whose
    sources are in the cache folder's name; others are compiled once a process.
    """
    parts = [f"{made.py_func.__module__}.{made.py_func.__qualname__}" for made in (torque, model_term)]
    name = "_".join(["step", *parts]).replace(".", "_")
    code = _step.__code__.replace(co_name=name, co_qualname=name)
    names = {**globals(), "law_torque": torque, "law_model_term": model_term}
    step = FunctionType(code, names, name)
    return (
        kernel(step) if all(part.startswith("rigbench.") for part in parts) else kernel_of_this_process(step)
    )


law_torque = law_model_term = no_term  # by these names the copies find their law


def _step(
    chains: Floats,
    bench: Floats,
    record: Floats,
    held: Floats,
    own: Floats,
    tick: int,
    t: float,
    due: int,
    logged: int,
) -> int:
    """Do what :func:`begin_step`, the law and :func:`end_step` do in turn; return a status.

    At ``tick`` below 0 the law is not called. ``chains`` (2, n + 1, 26): the plant's and the believed one;
    ``bench``: the rows of ``machine`` and those of ``io`` below them. Every array costs its 40 ns a call.
    """
    chain, believed, machine, io = chains[0], chains[1], bench[:MACHINE_ROWS], bench[MACHINE_ROWS:]
    status = begin_step(machine, io, record, tick, t)
    if status != OK:
        return status
    if tick >= 0:
        seen = io[:SEES]
        if due == BEFORE:
            law_model_term(seen, held, believed, own)
        law_torque(seen, held, believed, own)
        if due == AFTER:
            law_model_term(seen, held, believed, own)
    return end_step(chain, machine, io, record, logged)
