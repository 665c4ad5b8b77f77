"""Control laws: the base class that a law's author needs."""

from rigbench.laws.law import Compiled, Law, Reference, Setup, option
from rigbench.laws.model import Model

__all__ = ["Compiled", "Law", "Model", "Reference", "Setup", "option"]
