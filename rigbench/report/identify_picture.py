"""An identification as one page of pictures: torques, what is left of them, parameters."""

from __future__ import annotations

from pathlib import Path

from matplotlib.figure import Figure

from rigbench.identify.procedure import Identification
from rigbench.report.identify_joints import JointRows
from rigbench.report.identify_numbers import Shown
from rigbench.report.identify_parameters import draw_parameters
from rigbench.report.identify_verdict import caution_words, known_words, left_words, torque_words
from rigbench.report.paper import QUIET, Paper, steady_settings
from rigbench.report.picture import save_picture

__all__ = ["identify_figure", "identify_picture"]

MARGIN, WIDTH = 30.0, 732.0  # pt
TITLE, VERDICT, SIZE = 14.0, 10.0, 8.0


def identify_picture(done: Identification, path: Path) -> None:
    """Draw an identification into a file whose suffix says the format, as :func:`save_picture` does."""
    save_picture(path, f"Identification of {done.files.arm().name}", lambda: identify_figure(done))


def identify_figure(done: Identification) -> Figure:
    """Return the page: verdict; by joint torques, errors before and after, and what is left; parameters."""
    with steady_settings():
        shown, paper = Shown(done), Paper()
        joints = JointRows(paper, MARGIN, _draw_head(paper, shown) + 6, shown)
        top = draw_parameters(paper, MARGIN, joints.end + 12, WIDTH, shown)
        said = paper.wrap(caution_words(shown), WIDTH, SIZE)
        end = paper.lines(MARGIN, top + 10, said, SIZE, name="caution", ink=QUIET)
        page = paper.figure(WIDTH + 2 * MARGIN, end + MARGIN / 2)
        joints.draw(page)
        return page


def _draw_head(paper: Paper, shown: Shown) -> float:
    """Write title and verdict; return where they end."""
    title = paper.wrap(f"Identification of {shown.arm.name}", WIDTH, TITLE, bold=True)
    top = paper.lines(MARGIN, MARGIN - 8, title, TITLE, bold=True, name="head") + 2
    for said in (torque_words(shown), left_words(shown), known_words(shown)):
        top = paper.lines(MARGIN, top, paper.wrap(said, WIDTH, VERDICT), VERDICT, name="verdict") + 1
    return top
