"""A replayed run as a moving picture: the arm as a stick figure, and a ghost where it was told to be."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import Any

import matplotlib
import numpy as np
from numpy.typing import NDArray
from PIL import Image, ImageDraw, ImageFont

from rigbench.arm.arm import PRISMATIC, Floats
from rigbench.arm.dynamics import forward_kinematics, tool_path
from rigbench.campaign.replay import Replay
from rigbench.errors import InputFaults
from rigbench.report.output_file import write_whole
from rigbench.report.trace_data import tool_error_m

__all__ = ["animate"]

WIDTH, HEIGHT = 480, 440  # pixels
WORDS = 56  # pixels at the top for words
EDGE = 26
FINER = 2  # drawn at twice the size, then reduced: smooth edges
PERIOD_S = 0.05
MOST_FRAMES = 160
FINER_WAY = 8  # points of the tool's way from one frame to the next
LAST_S = 1.5  # the last frame stays this long
ELEVATION = math.radians(25.0)  # of the eye, for an arm that leaves its plane
AZIMUTHS = np.radians(np.arange(0.0, 360.0, 15.0) - 60.0)  # that of the widest view is taken
FLAT = 1e-6
"""Smallest over largest extent of all poses below which the arm moves in one plane, and is seen square on."""

PAPER, INK, QUIET, ARM, GHOST, WAY, GROUND = range(7)
COLORS = ("#ffffff", "#14202b", "#5b6873", "#1d4a75", "#c9d1d9", "#dfa24a", "#e8ecf0")
"""What is drawn with; frames hold the numbers of these colours until they are reduced."""

FONT = "fonts/ttf/DejaVuSans.ttf"  # comes with matplotlib

Corner = tuple[float, float]


def animate(replay: Replay, path: Path) -> None:
    """Draw the run into a .gif file that repeats: in real time, or faster if it is long.

    From the arrays of the log and forward kinematics alone: links are straight lines from joint to joint.
    The true arm is dark, the commanded one pale behind it, and the tool point leaves a line. An arm that
    stays in a plane is seen square on, another one from the side and above. InputFaults for another
    suffix, StoreError if the disk refuses.
    """
    if path.suffix.lower() != ".gif":
        raise InputFaults.one(path, "--animate", f"'{path.suffix}' is no format of a moving picture", ".gif")
    frames = [_reduced(frame) for frame in _Film(replay).frames()]
    times = [round(1000 * PERIOD_S)] * (len(frames) - 1) + [round(1000 * LAST_S)]
    write_whole(
        path,
        lambda stream: frames[0].save(
            stream, "GIF", save_all=True, append_images=frames[1:], duration=times, loop=0, optimize=False
        ),
    )


@dataclass(frozen=True, eq=False)
class _Eye:
    """How points (..., 3) [m] come onto the picture: ``across`` and ``up`` are unit vectors (3,)."""

    across: Floats
    up: Floats

    @classmethod
    def on(cls, points: Floats) -> _Eye:
        """Return the eye that sees these points (M, 3) best."""
        normal = _plane(points)
        if normal is not None:  # from above, or from where x points to the right
            return cls.at(normal * math.copysign(1.0, normal[2] if abs(normal[2]) > 0.5 else -normal[1]))
        flat, up = math.cos(ELEVATION), math.sin(ELEVATION)
        eyes = [cls.at(np.array([flat * math.cos(turn), flat * math.sin(turn), up])) for turn in AZIMUTHS]
        return max(eyes, key=lambda eye: float(np.linalg.det(np.cov(eye.flat(points).T))))

    @classmethod
    def at(cls, away: Floats) -> _Eye:
        """Return the eye in the direction ``away``, a unit vector (3,)."""
        vertical = np.array([0.0, 0.0, 1.0] if abs(away[2]) < 0.9 else [0.0, 1.0, 0.0])
        across = np.cross(vertical, away)
        across /= np.linalg.norm(across)
        return cls(across, np.cross(away, across))

    def flat(self, points: Floats) -> Floats:
        """Return points (..., 3) as (..., 2): across and up [m]."""
        return np.stack([points @ self.across, points @ self.up], axis=-1)


def _plane(points: Floats) -> Floats | None:
    """Return the unit normal (3,) of the one plane that holds all points (M, 3); None if they leave it."""
    _, extents, axes = np.linalg.svd(points - points.mean(axis=0), full_matrices=False)
    if len(extents) < 3 or extents[0] == 0 or extents[1] <= FLAT * extents[0]:
        return None  # fewer points, or all on a line: any side is as good
    if extents[2] > FLAT * extents[0]:
        return None
    normal: Floats = axes[2]
    return normal


class _Film:
    """The frames of one run."""

    def __init__(self, replay: Replay) -> None:
        self.replay, self.log = replay, replay.log
        ticks = len(self.log.t)
        stride = max(1, round(PERIOD_S * self.log.control_hz), math.ceil(ticks / MOST_FRAMES))
        self.shown = (
            np.unique(np.append(np.arange(0, ticks, stride), ticks - 1)) if ticks else np.empty(0, int)
        )
        self.speed = stride / self.log.control_hz / PERIOD_S
        chain = self.log.plant.chain(self.log.gravity)
        self.arm, self.ghost = (
            np.array([forward_kinematics(chain, np.ascontiguousarray(q[k]))[:, 9:] for k in self.shown])
            for q in (self.log.q, self.log.q_ref)
        )
        self.miss_mm = 1e3 * tool_error_m(self.log)
        self.fine = np.arange(0, ticks, max(1, stride // FINER_WAY))  # ticks at which the tool's way is drawn
        self.way, self.aim = (
            tool_path(chain, np.ascontiguousarray(q[self.fine]))[0] for q in (self.log.q, self.log.q_ref)
        )
        if ticks:
            base = np.zeros((1, 3))
            everything = np.concatenate([base, self.arm.reshape(-1, 3), self.ghost.reshape(-1, 3)])
            self.eye = _Eye.on(everything)
            self._fit(everything)

    def _fit(self, points: Floats) -> None:
        """Choose scale and place so that all points are on the picture."""
        flat = self.eye.flat(points)
        low, high = flat.min(axis=0), flat.max(axis=0)
        room = np.array([WIDTH - 2 * EDGE, HEIGHT - WORDS - 2 * EDGE])
        self.scale = FINER * float(np.min(room / np.maximum(high - low, 1e-3)))
        middle = FINER * np.array([WIDTH / 2, WORDS + (HEIGHT - WORDS) / 2])
        self.origin = middle - self.scale * (low + high) / 2 * [1, -1]

    def _place(self, points: Floats) -> list[Corner]:
        flat = self.origin + self.scale * self.eye.flat(points) * [1, -1]
        return [(float(x), float(y)) for x, y in flat]

    def frames(self) -> Iterator[Image.Image]:
        """Yield every frame, at FINER times its size; one with words alone for a run without a tick."""
        way, aim = (self._place(points) if len(points) else [] for points in (self.way, self.aim))
        for number, tick in enumerate(self.shown):
            image = Image.new("L", (FINER * WIDTH, FINER * HEIGHT), PAPER)
            pen = _pen(image)
            self._draw_ground(pen)
            if len(aim) > 1:
                pen.line(aim, fill=GHOST, width=FINER)
            gone = way[: int(np.searchsorted(self.fine, tick, side="right"))]
            if len(gone) > 1:
                pen.line(gone, fill=WAY, width=2 * FINER, joint="curve")
            self._draw_arm(pen, self.ghost[number], GHOST, 8)
            self._draw_arm(pen, self.arm[number], ARM, 5)
            last = number == len(self.shown) - 1
            self._draw_words(pen, f"{self.log.t[tick]:.2f} s   tool error {self.miss_mm[tick]:.2f} mm", last)
            yield image
        if not len(self.shown):
            image = Image.new("L", (FINER * WIDTH, FINER * HEIGHT), PAPER)
            self._draw_words(_pen(image), "", True)
            yield image

    def _draw_ground(self, pen: ImageDraw.ImageDraw) -> None:
        """Draw the base: a square in the base frame's x-y plane."""
        half = 16 * FINER / self.scale
        square = half * np.array([[1, 1, 0], [-1, 1, 0], [-1, -1, 0], [1, -1, 0]], float)
        corners = self._place(square)
        pen.polygon(corners, fill=GROUND, outline=QUIET, width=FINER)

    def _draw_arm(self, pen: ImageDraw.ImageDraw, positions: Floats, color: int, width: int) -> None:
        corners = self._place(np.concatenate([np.zeros((1, 3)), positions]))
        pen.line(corners, fill=color, width=width * FINER, joint="curve")
        for kind, (x, y) in zip(self.log.plant.kinds, corners[1:-1], strict=True):
            r = FINER * (width / 2 + 2)
            draw = pen.rectangle if kind == PRISMATIC else pen.ellipse
            draw((x - r, y - r, x + r, y + r), fill=PAPER, outline=color, width=2 * FINER)
        x, y = corners[-1]
        r = FINER * (width / 2 + 1)
        pen.ellipse((x - r, y - r, x + r, y + r), fill=color)

    def _draw_words(self, pen: ImageDraw.ImageDraw, now: str, last: bool) -> None:
        row = self.replay.record.row
        self._write(pen, 10, f"{row.law} on {row.motion}, {row.condition}", 14, INK)
        faster = f"   {self.speed:.2g} times as fast" if self.speed > 1.01 else ""
        said = f"{now}{faster}"
        if last and self.log.outcome != "finished":
            said = f"{self.log.outcome}: {self.log.reason}"
        self._write(pen, 32, said, 12, QUIET)

    def _write(self, pen: ImageDraw.ImageDraw, top: int, words: str, size: int, color: int) -> None:
        """Write one line, smaller and then cut short where it is too long."""
        space = FINER * (WIDTH - 24)
        while size > 9 and pen.textlength(words, _font(size)) > space:
            size -= 1
        if pen.textlength(words, _font(size)) > space:
            while words and pen.textlength(words + "\u2026", _font(size)) > space:
                words = words[:-1]
            words += "\u2026"
        pen.text((12 * FINER, top * FINER), words, fill=color, font=_font(size))


@cache
def _mixtures() -> tuple[NDArray[np.uint8], NDArray[np.uint8]]:
    """Return the mixtures of any four colours (P, 3), and which of them four numbers make, (7, 7, 7, 7)."""
    pure = np.array([[int(color[at : at + 2], 16) for at in (1, 3, 5)] for color in COLORS])
    four = np.indices((len(pure),) * 4).reshape(4, -1)
    mixed, which = np.unique(pure[four].sum(axis=0) // 4, axis=0, return_inverse=True)
    return mixed.astype(np.uint8), which.astype(np.uint8).reshape((len(pure),) * 4)


def _reduced(frame: Image.Image) -> Image.Image:
    """Return a frame in its final size: each pixel the mixture of the four that it was drawn with."""
    numbers = np.asarray(frame)
    palette, which = _mixtures()
    a, b, c, d = (numbers[i::FINER, j::FINER] for i in range(FINER) for j in range(FINER))
    image = Image.fromarray(which[a, b, c, d], "P")
    image.putpalette(palette.ravel().tolist())
    return image


def _pen(image: Image.Image) -> ImageDraw.ImageDraw:
    """Return a pen whose letters have no grey edges: their smoothing comes with the reduction."""
    pen = ImageDraw.Draw(image)
    pen.fontmode = "1"
    return pen


@cache
def _font(size: int) -> Any:
    return ImageFont.truetype(str(Path(matplotlib.get_data_path()) / FONT), FINER * size)
