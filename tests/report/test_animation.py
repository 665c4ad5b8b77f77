"""The moving picture of a replayed run: true to the arm's kinematics, of a bounded length and size."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from PIL import Image

from rigbench.arm.files import ArmFiles
from rigbench.campaign.reading import Record
from rigbench.campaign.replay import Replay
from rigbench.errors import InputFaults, StoreError
from rigbench.laws.options import options_model
from rigbench.laws.registry import choose, registered
from rigbench.motion.via import ViaMotion
from rigbench.report import animation
from rigbench.report.animation import animate
from rigbench.rig import Rates, Run, simulate
from rigbench.scores.row import Row

ARMS = Path(__file__).resolve().parents[2] / "robots_demo"
POSE = (0.0, -1.0, 1.5, 0.0, 1.0, 0.0)
LIMIT_BYTES = 3_000_000


def replayed(
    arm: str, *points: Sequence[float], leg_s: float = 0.5, law: str = "a law", **given: Any
) -> Replay:
    plugin = "independent-joint"
    run = Run(
        arm=ArmFiles.read(ARMS / arm / "arm.yaml"),
        law=choose(plugin, options_model(registered().laws[plugin].cls)(natural_hz=3.0)),
        motion=ViaMotion(tuple(map(tuple, points)), leg_s=leg_s, rest_s=0.1),
        rates=Rates(200.0, 1000.0),
        gain_pose=tuple(points[0]),
        settle_band_mm=0.5,
        **given,
    )
    log = simulate(run)
    row = Row("", law, "a motion", "nominal", 0.0, None, log.outcome, {}, log.reason)
    return Replay(Record(row, run.key(), "", (), log.residual, 0.1), run, log, {})


def frames_of(path: Path) -> list[Image.Image]:
    with Image.open(path) as film:
        frames = []
        for number in range(film.n_frames):
            film.seek(number)
            frames.append(film.convert("RGB"))
        return frames


def pixels(frame: Image.Image, number: int) -> int:
    color = animation.COLORS[number]
    wanted = [int(color[at : at + 2], 16) for at in (1, 3, 5)]
    return int((np.asarray(frame) == wanted).all(axis=2).sum())


@pytest.fixture(scope="module")
def swing() -> Replay:
    return replayed("planar2", (0.2, 0.3), (0.9, -0.4))


def test_a_film_in_real_time(tmp_path: Path, swing: Replay) -> None:
    """A frame every 50 ms, the last one for longer, over and over; the arm, its ghost and its way are on it."""
    animate(swing, tmp_path / "new" / "swing.gif")
    with Image.open(tmp_path / "new" / "swing.gif") as film:
        times = []
        for number in range(film.n_frames):
            film.seek(number)
            times.append(film.info["duration"])
        assert film.info["loop"] == 0
        assert film.size == (animation.WIDTH, animation.HEIGHT)
    assert times == [50] * 12 + [1500]
    frames = frames_of(tmp_path / "new" / "swing.gif")
    assert frames[0].getpixel((1, 1)) == (255, 255, 255)
    for frame in frames:
        assert pixels(frame, animation.ARM) > 300
    assert pixels(frames[6], animation.GHOST) > 100
    assert pixels(frames[-1], animation.WAY) > pixels(frames[4], animation.WAY) > 0
    assert (tmp_path / "new" / "swing.gif").stat().st_size < LIMIT_BYTES


def test_the_same_run_gives_the_same_bytes(tmp_path: Path, swing: Replay) -> None:
    """No date, no chance."""
    for name in ("one.gif", "other.GIF"):
        animate(swing, tmp_path / name)
    assert (tmp_path / "one.gif").read_bytes() == (tmp_path / "other.GIF").read_bytes()


def test_a_planar_arm_is_seen_square_on(swing: Replay) -> None:
    """Every link keeps its length on the picture, and up in the world (z) is up there, x to the right."""
    film = animation._Film(swing)
    lengths = np.linalg.norm(np.diff(film.eye.flat(film.arm), axis=1), axis=2)
    assert np.allclose(lengths, np.linalg.norm(np.diff(film.arm, axis=1), axis=2), atol=1e-12)
    assert np.ptp(lengths, axis=0).max() < 1e-12
    (x0, y0), (x1, _), (_, y1) = film._place(np.array([[0, 0, 0], [0.1, 0, 0], [0, 0, 0.1]], float))
    assert x1 > x0
    assert y1 < y0


@pytest.mark.parametrize("normal", np.vstack([np.eye(3), -np.eye(3), [[0.6, 0.8, 0.0]], [[0.0, -0.6, 0.8]]]))
def test_any_plane_is_seen_square_on(normal: np.ndarray) -> None:
    """Distances in the plane stay what they are, and the axes across and up are at right angles."""
    random = np.random.default_rng(3)
    points = random.standard_normal((40, 3))
    points -= np.outer(points @ normal, normal)
    eye = animation._Eye.on(points)
    flat = eye.flat(points)
    apart = np.linalg.norm(points[:, None] - points, axis=2)
    assert np.allclose(np.linalg.norm(flat[:, None] - flat, axis=2), apart, atol=1e-9)
    assert abs(eye.across @ eye.up) < 1e-12


def test_an_arm_that_leaves_its_plane_is_on_the_picture_whole(tmp_path: Path) -> None:
    """Every pose of arm and ghost lies inside the edges, below the words; z points up."""
    replay = replayed("tray6", POSE, (1.2, -0.5, 1.2, 0.3, 0.8, 0.5))
    film = animation._Film(replay)
    places = np.array(film._place(np.concatenate([film.arm, film.ghost]).reshape(-1, 3))) / animation.FINER
    assert places.min() >= animation.EDGE - 1
    assert places[:, 0].max() <= animation.WIDTH - animation.EDGE + 1
    assert places[:, 1].max() <= animation.HEIGHT - animation.EDGE + 1
    assert places[:, 1].min() >= animation.WORDS
    assert film.eye.up[2] > 0.8
    animate(replay, tmp_path / "tray.gif")
    assert (tmp_path / "tray.gif").stat().st_size < LIMIT_BYTES


def test_a_long_run_is_shown_faster(tmp_path: Path) -> None:
    """No more frames than fit, and few bytes; how much faster stands on them."""
    replay = replayed("planar2", (0.0, 0.0), (0.9, -0.9), (0.0, 0.5), leg_s=20.0)
    film = animation._Film(replay)
    assert film.speed == pytest.approx(40.2 / animation.PERIOD_S / animation.MOST_FRAMES, rel=0.03)
    animate(replay, tmp_path / "long.gif")
    assert len(frames_of(tmp_path / "long.gif")) <= animation.MOST_FRAMES + 1
    assert (tmp_path / "long.gif").stat().st_size < LIMIT_BYTES


@pytest.mark.parametrize("start", [7.0, 5.9])
def test_runs_that_end_early_have_a_film(tmp_path: Path, start: float) -> None:
    """One that stood beyond its limit of 6.3 has one frame of words; another one as many as it lasted."""
    replay = replayed("planar2", (start, 0.0), (6.6, 0.0))
    assert replay.log.outcome == "hit-stop"
    animate(replay, tmp_path / "short.gif")
    frames = frames_of(tmp_path / "short.gif")
    assert len(frames) == max(1, len(animation._Film(replay).shown))
    assert (len(frames) == 1) is (start > 6.3)
    assert pixels(frames[-1], animation.QUIET) > 20  # the reason's words


def test_words_that_are_too_long_are_cut(tmp_path: Path, swing: Replay) -> None:
    """A law's name of any length stays inside the picture's edge."""
    replay = replayed("planar2", (0.0, 0.0), (0.3, 0.0), law="a law with a long name " * 12)
    animate(replay, tmp_path / "a.gif")
    right = np.asarray(frames_of(tmp_path / "a.gif")[0])[: animation.WORDS, animation.WIDTH - 10 :]
    assert (right == 255).all()


def test_another_format_is_refused_before_anything_is_drawn(tmp_path: Path, swing: Replay) -> None:
    """A fault that names .gif; a folder that can't be made is the disk's."""
    with pytest.raises(InputFaults, match=r"'.mp4' is no format of a moving picture; expected .gif"):
        animate(swing, tmp_path / "a.mp4")
    (tmp_path / "file").touch()
    with pytest.raises(StoreError, match="can't be written"):
        animate(swing, tmp_path / "file" / "a.gif")
    assert [path.name for path in tmp_path.iterdir()] == ["file"]
