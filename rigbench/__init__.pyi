# What type checkers see: the names that __init__.py imports when they are asked for.
from rigbench.campaign.opened import open_store as open_store

__version__: str
__all__ = ["__version__", "open_store"]
