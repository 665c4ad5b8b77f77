"""The experiment file: its keys, its faults, and what it expands into.

``schema`` holds the keys; ``checks``, ``laws``, ``motions`` and ``tolerance`` hold what only shows
against each other; ``expand`` makes columns and runs; ``experiment`` puts it together.
"""

from rigbench.experiment.experiment import Experiment, load_experiment, store_path

__all__ = ["Experiment", "load_experiment", "store_path"]
