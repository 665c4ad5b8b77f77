# What type checkers see: the names that __init__.py imports when they are asked for.
from rigbench.calls import audit as audit
from rigbench.calls import draw_matrix as draw_matrix
from rigbench.calls import gains as gains
from rigbench.calls import gate as gate
from rigbench.calls import gears as gears
from rigbench.calls import needs as needs
from rigbench.calls import run as run
from rigbench.calls import trace as trace
from rigbench.calls import worst_case as worst_case
from rigbench.calls import write_report as write_report
from rigbench.campaign.opened import open_store as open_store
from rigbench.experiment import load_experiment as load_experiment
from rigbench.rig import Rig as Rig

__version__: str
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
