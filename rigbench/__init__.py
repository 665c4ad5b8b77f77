"""rigbench: a software test rig for the joint control of robot arms."""

from importlib import import_module
from typing import Any

__version__ = "0.1.0"
__all__ = ["__version__", "open_store"]

_HOMES = {"open_store": "rigbench.campaign.opened"}
"""Where each public name lives. It is imported when it is asked for: what doesn't need it starts fast."""


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module 'rigbench' has no attribute '{name}'")
    return getattr(import_module(_HOMES[name]), name)


def __dir__() -> list[str]:
    return [*globals(), *_HOMES]
