"""Loading an experiment: its own Python files are imported then, and may take for ever."""

from __future__ import annotations

import contextlib
import threading
from collections.abc import Iterator

from rigbench.cli.output import say
from rigbench.experiment import Experiment, load_experiment
from rigbench.laws.plugins import being_imported

__all__ = ["loaded"]

PATIENCE_S = 3.0
"""How long a file may take to be imported until that is said."""


def loaded(file: str) -> Experiment:
    """Read and check an experiment file; say so where a file that it names takes long to import."""
    with _long_imports_told():
        return load_experiment(file)


@contextlib.contextmanager
def _long_imports_told() -> Iterator[None]:
    done, importing = threading.Event(), threading.get_ident()

    def watch() -> None:
        before, told = None, set[str]()
        while not done.wait(PATIENCE_S):
            now = being_imported(importing)
            if now is not None and now == before and now not in told:
                told.add(now)
                say(f"note: {now} is still being imported, for more than {PATIENCE_S:g} s; Ctrl-C ends that")
            before = now

    watcher = threading.Thread(target=watch, name="imports", daemon=True)
    watcher.start()
    try:
        yield
    finally:
        done.set()
        watcher.join()
