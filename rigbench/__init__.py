"""rigbench: a software test rig for the joint control of robot arms."""

__version__ = "0.1.0"
__all__ = ["__version__"]
