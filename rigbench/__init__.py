"""rigbench: a software test rig for the joint control of robot arms.

Each command is a call here: load an experiment, run it, open its store, draw what it shows.
"""

from importlib import import_module
from typing import Any

__version__ = "0.1.0"
__all__ = [
    "Rig",
    "__version__",
    "audit",
    "draw_matrix",
    "gains",
    "gate",
    "gears",
    "load_experiment",
    "needs",
    "open_store",
    "run",
    "trace",
    "worst_case",
    "write_report",
]

_HOMES = {
    "Rig": "rigbench.rig",
    "load_experiment": "rigbench.experiment",
    "open_store": "rigbench.campaign.opened",
}
"""Where public names live, if not in :mod:`rigbench.calls`. They are imported when they are asked for: what
doesn't need them starts fast."""


def __getattr__(name: str) -> Any:
    if name not in __all__:
        raise AttributeError(f"module 'rigbench' has no attribute '{name}'")
    return getattr(import_module(_HOMES.get(name, "rigbench.calls")), name)


def __dir__() -> list[str]:
    return [*globals(), *__all__]
