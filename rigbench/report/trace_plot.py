"""A replayed run as one page of plots."""

from __future__ import annotations

import math
from io import BytesIO
from pathlib import Path

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from rigbench.arm.arm import PRISMATIC, Floats
from rigbench.campaign.labels import Labels
from rigbench.campaign.replay import Replay
from rigbench.report.drawn import drawn_of
from rigbench.report.drawn_bars import DrawnBars
from rigbench.report.output_file import write_whole
from rigbench.report.paper import LINE, QUIET, Paper, steady_settings
from rigbench.report.time_axes import (
    FAR,
    LIMITED,
    REST,
    STROKES,
    Panel,
    Stage,
    draw_curve,
    draw_limits,
    draw_stretches,
    scale_about_zero,
    zero_line,
)
from rigbench.report.trace_data import tool_error_m, trace_arrays
from rigbench.report.trace_words import (
    ANGLE,
    TOOL,
    error_words,
    head_lines,
    limits_of,
    run_words,
    shortened,
    tool_words,
    torque_words,
)

__all__ = ["trace_figure", "trace_picture"]

MARGIN = 30.0
NUMBERS = 36.0  # room for the numbers beside an axis
GAP = 14.0
WIDTHS = (178.0, 262.0, 206.0)  # of a joint's panels: position, error, torque
TITLE, PANEL, BELOW = 12.0, 72.0, 10.0  # heights: above a panel, of it, and below it
FEET = 28.0  # below a panel with numbers of time
TIMELINE = 104.0
SIZE, SMALL = 8.0, 7.0
DPI = 130


def trace_picture(replay: Replay, labels: Labels, path: Path) -> None:
    """Draw the page into a .png file; the same run gives the same bytes. StoreError if the disk refuses."""
    drawn = BytesIO()
    with steady_settings():
        page = trace_figure(replay, labels)
        title = f"{run_words(replay)}, {replay.record.key}"
        page.savefig(drawn, format="png", dpi=DPI, metadata={"Software": "rigbench", "Title": title})
    write_whole(path, lambda stream: stream.write(drawn.getvalue()))


def trace_figure(replay: Replay, labels: Labels) -> Figure:
    """Return the page as a figure.

    For each joint: reference and true position; their difference; torque against its limit. Below: the
    tool point's error over time with its tolerance, likewise the tool's angle if the tolerance limits
    it, and the drawn parameters that depart most. Rests are shaded, a bar at the foot of the torque
    marks where the drive gave less than the law asked for, and a line where the run ended early.
    """
    with steady_settings():
        return _Page(replay, labels).figure()


class _Page:
    """Words are written first, so that the height is known; curves come after."""

    def __init__(self, replay: Replay, labels: Labels) -> None:
        self.replay, self.log, self.labels = replay, replay.log, labels
        self.data, self.limits = trace_arrays(replay, labels), limits_of(replay, labels)
        self.paper = Paper()
        tick, log = 1.0 / replay.log.control_hz, replay.log
        self.stage = Stage(
            span=max(replay.run.motion.duration_s, tick),
            rests=self.data["rest_s"],
            ended=None if log.outcome == "finished" else len(log.t) * tick,
        )
        self.scale = np.where(log.plant.kinds == PRISMATIC, 1e3, math.degrees(1.0))
        self.error = self.scale * (log.q_ref - log.q)
        step = NUMBERS + GAP
        self.columns = [MARGIN + NUMBERS + sum(WIDTHS[:k]) + k * step for k in range(len(WIDTHS))]
        self.right = self.columns[-1] + WIDTHS[-1]

    def figure(self) -> Figure:
        """Return the page."""
        top, n = self._head(), self.log.plant.n
        joints = []
        for i in range(n):
            joints.append(self._joint_panels(i, top))
            top += TITLE + PANEL + BELOW
        top += FEET - BELOW
        bars_left = self.columns[2] - NUMBERS + 8
        shown = (TOOL, ANGLE) if ANGLE in self.limits else (TOOL,)
        height = len(shown) * (TITLE + TIMELINE + FEET) - FEET
        place = Panel(bars_left, top, self.right - bars_left, height)
        bars = DrawnBars(self.paper, place, drawn_of(self.replay.run))
        courses = []
        for name in shown:
            courses.append((name, self._course_panel(name, top)))
            top += TITLE + TIMELINE + FEET
        page = self.paper.figure(self.right + MARGIN, top + MARGIN / 4)
        for i, panels in enumerate(joints):
            position, error, torque = (self.stage.axes(page, panel, i == n - 1) for panel in panels)
            self._draw_position(position, i)
            self._draw_error(error, i)
            self._draw_torque(torque, i)
        for name, panel in courses:
            self._draw_course(self.stage.axes(page, panel, numbered=True), name)
        bars.draw(page)
        return page

    # --- words and places

    def _head(self) -> float:
        """Write what run this is, what came of it and what marks what; return where the panels start."""
        paper, width = self.paper, self.right - MARGIN
        title = paper.wrap(run_words(self.replay), width, 14, bold=True)
        top = paper.lines(MARGIN, MARGIN * 0.8, title, 14, bold=True, name="head") + 2
        for line in head_lines(self.replay, self.labels):
            top = paper.lines(MARGIN, top, paper.wrap(line, width, 9), 9, name="head") + 2
        return self._key(top + 5) + 8

    def _key(self, top: float) -> float:
        """Draw a sample of each mark with its meaning; return where they end."""
        marks = {"reference": "reference", "actual": "true", "limit": "limit"}
        if self.log.limited.any():
            marks["limited"] = "the drive gave less than asked"
        if len(self.stage.rests):
            marks["rest"] = "rest"
        if self.stage.ended is not None:
            marks["ended"] = self.log.outcome
        x, y = MARGIN, top + LINE * SIZE / 2
        for mark, words in marks.items():
            if mark == "rest":
                self.paper.box(x, y - 4, 20, 8, fill=REST, edge="#d5dbe2", line=0.5)
            elif mark == "limited":
                self.paper.box(x, y - 1.8, 20, 3.6, fill=LIMITED)
            else:
                color, line, dashes = STROKES[mark]
                self.paper.stroke((x, y), (x + 20, y), color=color, line=line, dashes=dashes)
            self.paper.text(x + 25, top, words, SIZE, name="key")
            x += 25 + self.paper.width(words, SIZE) + 18
        return top + LINE * SIZE

    def _joint_panels(self, i: int, top: float) -> list[Panel]:
        unit = "mm" if self.log.plant.kinds[i] == PRISMATIC else "deg"
        words = (
            (self.log.plant.joints[i], f"position [{unit}]"),
            (f"error [{unit}]", error_words(self.error[:, i], self._error_limit(i))),
            torque_words(self.replay, i),
        )
        places = zip(self.columns, WIDTHS, words, strict=True)
        return [self._titled(Panel(x, top, width, PANEL), *said) for x, width, said in places]

    def _course_panel(self, name: str, top: float) -> Panel:
        left = self.columns[0]
        width = self.columns[1] + WIDTHS[1] - left
        words = tool_words(name, self._course(name), self.limits)
        return self._titled(Panel(left, top, width, TIMELINE), *words)

    def _titled(self, panel: Panel, title: str, note: str) -> Panel:
        """Write title and note above a panel, within its width; return where its axes go."""
        paper = self.paper
        room = panel.width - paper.width(note, SMALL) - 6
        title = shortened(title, max(room, panel.width / 3), lambda text: paper.width(text, SIZE, bold=True))
        paper.text(panel.x, panel.top, title, SIZE, bold=True, name="title")
        x = panel.x + paper.width(title, SIZE, bold=True) + 6
        note = shortened(note, panel.x + panel.width - x, lambda text: paper.width(text, SMALL))
        paper.text(x, panel.top + SIZE - SMALL, note, SMALL, name="note", ink=QUIET)
        return Panel(panel.x, panel.top + TITLE, panel.width, panel.height)

    # --- curves

    def _error_limit(self, i: int) -> float | None:
        """Return the tolerance's limit on the joint's peak error: the tighter one of two, None for none."""
        base = "joint_peak_mm" if self.log.plant.kinds[i] == PRISMATIC else "joint_peak_deg"
        names = base, f"{base}.{self.log.plant.joints[i]}"
        return min((self.limits[name] for name in names if name in self.limits), default=None)

    def _draw_position(self, axes: Axes, i: int) -> None:
        """Draw both positions, and the joint's limits where the arm comes near them."""
        plant, scale = self.log.plant, self.scale[i]
        both = scale * self.log.q[:, i], scale * self.log.q_ref[:, i]
        draw_curve(axes, self.log.t, both[0], "actual")
        draw_curve(axes, self.log.t, both[1], "reference")
        values = np.concatenate(both)
        low, high = (float(values.min()), float(values.max())) if values.size else (-1.0, 1.0)
        room = 0.12 * max(high - low, 1e-3)
        limits = [float(scale * bound) for bound in (plant.lower[i], plant.upper[i])]
        near = [limit for limit in limits if low - 2 * room < limit < high + 2 * room]
        draw_limits(axes, near)
        axes.set_ylim(min([low, *near]) - room, max([high, *near]) + room)

    def _draw_error(self, axes: Axes, i: int) -> None:
        draw_curve(axes, self.log.t, self.error[:, i], "actual")
        scale_about_zero(axes, self.error[:, i], self._error_limit(i))
        zero_line(axes)

    def _draw_torque(self, axes: Axes, i: int) -> None:
        torque, limit = self.log.torque[:, i], float(self.log.plant.drives.torque_limit[i])
        draw_curve(axes, self.log.t, torque, "actual")
        scale_about_zero(axes, torque, limit)
        zero_line(axes)
        draw_stretches(axes, self.log.limited[:, i], 1.0 / self.log.control_hz, self.stage.span)

    def _course(self, name: str) -> Floats:
        """Return the tool's error over time, (N,) [mm or deg]."""
        if name == ANGLE:
            angle: Floats = self.data["tool_angle_deg"]
            return angle
        return 1e3 * tool_error_m(self.log)

    def _draw_course(self, axes: Axes, name: str) -> None:
        values, limit = self._course(name), self.limits.get(name)
        draw_curve(axes, self.log.t, values, "actual")
        most = float(values.max()) if values.size else 0.0
        if limit is not None and limit <= 2 * FAR * most:
            draw_limits(axes, [limit])
            most = max(most, limit)
        axes.set_ylim(0, 1.12 * most or 1.0)
