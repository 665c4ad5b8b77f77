"""An identification as one page of pictures: torques, residuals, parameters."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from rigbench.identify.procedure import Identification
from rigbench.report.paper import INK, steady_settings
from rigbench.report.picture import save_picture

__all__ = ["identify_figure", "identify_picture"]

DARK, LIGHT, QUIET = "#1d4a75", "#d08a3c", "#8a949e"
ROW_IN, WIDE_IN, PARAMETERS_IN = 1.5, 11.0, 2.6


def identify_picture(done: Identification, path: Path) -> None:
    """Draw an identification into a .png, .svg or .pdf file; missing folders are made.

    Raises InputFaults for another suffix and StoreError if the file can't be written.
    """
    save_picture(path, done.files.arm().name, lambda: identify_figure(done))


def identify_figure(done: Identification) -> Figure:
    """Return the page: each joint's torque and what is left of it; below, parameters with error bars."""
    arm = done.files.arm()
    high = arm.n * ROW_IN + PARAMETERS_IN
    with steady_settings():
        figure = Figure(figsize=(WIDE_IN, high), layout="constrained")
        FigureCanvasAgg(figure)
        grid = figure.add_gridspec(arm.n + 1, 2, height_ratios=[*[ROW_IN] * arm.n, PARAMETERS_IN])
        for i in range(arm.n):
            _draw_joint(figure.add_subplot(grid[i, 0]), figure.add_subplot(grid[i, 1]), done, i)
        _draw_parameters(figure.add_subplot(grid[arm.n, :]), done)
        return figure


def _draw_joint(torque: Axes, rest: Axes, done: Identification, i: int) -> None:
    """Draw a joint's torque as measured and predicted, and beside it the residuals."""
    rows = done.rows
    samples = np.arange(len(rows.y))
    measured = np.where(rows.usable[:, i], rows.torque[:, i], np.nan)
    torque.plot(samples, measured, color=QUIET, linewidth=2.5, label="measured")
    for values, color, label in (
        (done.declared_values, LIGHT, "declared"),
        (done.identified_values, DARK, "identified"),
    ):
        predicted = rows.y[:, i] @ values
        torque.plot(samples, predicted, color=color, linewidth=0.9, label=label)
        rest.plot(samples, measured - predicted, color=color, linewidth=0.9, label=label)
    torque.set_ylabel(f"{done.files.arm().joints[i][:14]} [N m]", fontsize=8, color=INK)
    rest.set_ylabel("residual", fontsize=8, color=INK)
    if i == 0:
        torque.legend(fontsize=7, ncol=3, frameon=False, loc="upper right")
        torque.set_title(f"torques on {rows.name[-60:]}", fontsize=9, color=INK, parse_math=False)
        rest.set_title("measured less predicted, by sample after filtering", fontsize=9, color=INK)
    for axes in (torque, rest):
        axes.tick_params(labelsize=7)


def _draw_parameters(axes: Axes, done: Identification) -> None:
    """Draw each base parameter's departure from the declared value as a share of its size, with 95 % bars."""
    base = done.found.base
    low, high = done.found.interval()
    declared = done.declared_values
    size = np.maximum(np.abs(declared), np.abs(done.found.values))
    size = np.where(size > 0, size, 1.0)
    middle, half = (done.found.values - declared) / size, (high - low) / 2 / size
    places = np.arange(base.count)
    axes.axhline(0.0, color=LIGHT, linewidth=1.0)
    axes.errorbar(
        places, middle, yerr=half, fmt="o", markersize=3, color=DARK, elinewidth=1.0, label="estimate, 95 %"
    )
    axes.plot(
        places, (done.identified_values - declared) / size, "x", color=INK, markersize=4, label="identified"
    )
    if (true := done.true_values) is not None:
        axes.plot(places, (true - declared) / size, "_", color="#7a4fa0", markersize=7, label="true")
    axes.set_ylim(-1.5, 1.5)
    axes.set_xticks(
        places, [name.split(" ")[0] for name in base.names], rotation=90, fontsize=6, parse_math=False
    )
    axes.set_ylabel("less declared, share", fontsize=8, color=INK)
    axes.set_title("base parameters, each by its first term", fontsize=9, color=INK)
    axes.tick_params(axis="y", labelsize=7)
    axes.legend(fontsize=7, ncol=3, frameon=False, loc="upper right")
