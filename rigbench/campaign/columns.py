"""The stored runs as named columns, each with its unit and its meaning, for whoever reads them elsewhere."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rigbench.campaign.acting import Acting
from rigbench.campaign.blocks import Block
from rigbench.campaign.places import Place
from rigbench.campaign.reading import Reader
from rigbench.scores.names import in_display_order, score_info

__all__ = ["NUMBER", "TEXT", "WHOLE", "Columns", "TableColumn", "Values"]

TEXT, WHOLE, NUMBER = "text", "whole", "number"
"""Kinds of columns: object arrays of str; int64, NO_DRAW where there is none; float64, NaN where none."""

Values = NDArray[Any]


@dataclass(frozen=True)
class TableColumn:
    """A column: its name, its ``kind``, its unit as it is written ('' for none) and its meaning in words."""

    name: str
    kind: str
    unit: str
    meaning: str


STUDY = TableColumn(
    "study",
    TEXT,
    "",
    "study that the run is of, such as worst_case; empty for a run of the matrix. A run of several has a row "
    "in each. Under the conditions 'shares ...' of needs, draw is the number of a row of its design",
)
PLACE = (
    TableColumn("sheet", TEXT, "", "sheet of the sweep; empty where nothing is swept"),
    TableColumn("law", TEXT, "", "name of the law, as the experiment has it"),
    TableColumn("motion", TEXT, "", "name of the motion"),
    TableColumn("condition", TEXT, "", "condition: nominal, sources at a level, or a case"),
    TableColumn("level", NUMBER, "", "level of the mismatch: 0 none, 1 the declared spread"),
)
OUTCOME = (
    TableColumn(
        "draw", WHOLE, "", "number of the draw, the same machine in all laws; empty where nothing is random"
    ),
    TableColumn(
        "outcome", TEXT, "", "finished, diverged, hit-stop: the machine's verdict; else the host's trouble"
    ),
    TableColumn("reason", TEXT, "", "why the run did not finish, or came to nothing"),
    TableColumn("key", TEXT, "", "digest of all inputs of the run; 'rigbench trace' takes its beginning"),
)
RESIDUAL = TableColumn(
    "residual_rad_s", NUMBER, "rad/s", "largest disagreement of engine and drive about a joint's speed"
)
WALL = TableColumn("wall_s", NUMBER, "s", "how long the run took on its host")
CPU = TableColumn("cpu", TEXT, "", "type of CPU that did the run")

MORE = {
    "outcome": "",
    "reason": "reason",
    "key": "key",
    "residual_rad_s": "residual_rad_s",
    "wall_s": "wall_s",
}
"""The further column of a block that a column is made of."""


def _score(name: str) -> TableColumn:
    info, joint = score_info(name), name.partition(".")[2]
    if info is None:
        return TableColumn(name, NUMBER, "", "a score that this version of rigbench does not know")
    meaning = f"{info.doc}; of joint {joint} alone" if joint else info.doc
    return TableColumn(name, NUMBER, info.unit, meaning)


def _draw(parameter: str) -> TableColumn:
    meaning = f"the factor u of {parameter}, drawn in [-1, 1) or set by a study; empty where it did not act"
    source, _, sum_of = parameter.partition(".")
    if source == "identification":
        meaning += (
            f"; as u is uniform, its normal quantile departs the base parameter that begins with {sum_of}"
        )
    return TableColumn(f"draw.{parameter}", NUMBER, "", meaning)


def _version(package: str) -> TableColumn:
    return TableColumn(f"version.{package}", TEXT, "", f"version of {package} that the run was done with")


class Columns:
    """The columns of a reader's stored runs. Make and use it within one moment of the reader.

    With ``studies`` the runs of the studies come as well, after those of the plan, and a first column, study.
    The others in this order: sheet, law, motion, condition, level, draw, outcome, reason, key; every score;
    residual_rad_s; draw.<parameter>; wall_s; cpu; version.<package>.
    """

    def __init__(self, reader: Reader, studies: bool = False) -> None:
        self._reader, self._studies = reader, reader.study_runs() if studies else None
        self._places, self._hosts = reader.places(), reader.hosts()
        self._scores, self._acting = reader.scores(), Acting(reader.text)
        values = reader.draw_values()
        parameters = {name for own in values.values() for name in own}
        self._study_places: Mapping[int, Place] = {}
        if self._studies is not None:
            self._study_places = self._studies.places(max(self._places, default=-1) + 1)
            self._places = self._places | self._study_places
            self._hosts = self._hosts | self._studies.hosts()
            self._scores = in_display_order([*self._scores, *self._studies.scores()])
            parameters |= set(self._studies.parameters())
        self._parameters = tuple(sorted(parameters))
        column = {name: k for k, name in enumerate(self._parameters)}
        self._drawn = np.array(sorted(values), dtype=np.int64)
        self._u = np.full((len(values) + 1, len(column)), np.nan)  # the last row is of no draw
        for row, number in enumerate(self._drawn.tolist()):
            for name, u in values[number].items():
                self._u[row, column[name]] = u
        self._packages = tuple(
            dict.fromkeys(name for host in self._hosts.values() for name, _ in host.versions)
        )
        self.all: tuple[TableColumn, ...] = (
            *([STUDY] if studies else []),
            *PLACE,
            *OUTCOME,
            *map(_score, self._scores),
            RESIDUAL,
            *map(_draw, self._parameters),
            WALL,
            CPU,
            *map(_version, self._packages),
        )

    def blocks(self, names: Sequence[str] | None = None, size: int = 2048) -> Iterator[dict[str, Values]]:
        """Yield the columns of these names, or all, ``size`` runs at a time, in the order of the plan."""
        wanted = [column.name for column in self.all] if names is None else list(names)
        scores = [name for name in wanted if name in self._scores]
        more = [MORE[name] for name in wanted if MORE.get(name)]
        if any(name == "cpu" or name.startswith("version.") for name in wanted):
            more.append("host")
        makers = {name: self._maker(name, scores) for name in wanted}
        for block in self._reader.blocks(scores, more, size):
            yield {name: make(block) for name, make in makers.items()}
        if self._studies is not None:
            more += ["directions"] if any(name.startswith("draw.") for name in wanted) else []
            for block in self._studies.blocks(self._study_places, scores, more, size):
                yield {name: make(block) for name, make in makers.items()}

    def _maker(self, name: str, scores: Sequence[str]) -> Callable[[Block], Values]:  # noqa: PLR0911 - one a kind
        """Return what makes the column of a name out of a block."""
        if name in {column.name for column in PLACE}:
            return _looked_up(
                self._places, lambda place: getattr(place, name), NUMBER if name == "level" else TEXT
            )
        if name == "study":
            return lambda block: _texts(block.more.get("study", ("",) * len(block)))
        if name == "draw":
            return lambda block: block.draw
        if name == "outcome":
            return lambda block: _texts(block.outcome)
        if name in {"reason", "key"}:
            return lambda block: _texts(block.more[name])
        if name in {"residual_rad_s", "wall_s"}:
            return lambda block: np.array(block.more[name], dtype=float)
        if name in scores:
            k = scores.index(name)
            return lambda block: block.scores[:, k]
        if name.startswith("draw."):
            return self._draw_maker(name.removeprefix("draw."))
        package = name.removeprefix("version.")
        told: dict[int | None, str] = {None: ""}
        for number, host in self._hosts.items():
            told[number] = host.cpu if name == "cpu" else dict(host.versions).get(package, "")
        return lambda block: _texts([told[number] for number in block.more["host"]])

    def _draw_maker(self, parameter: str) -> Callable[[Block], Values]:
        u = self._u[:, self._parameters.index(parameter)]
        acts = _looked_up(self._places, lambda place: float(self._acting.of(place, parameter)), NUMBER)

        def make(block: Block) -> Values:
            row = np.searchsorted(self._drawn, block.draw)
            known = np.append(self._drawn, -2)[row] == block.draw
            values = u[np.where(known, row, -1)]
            for k, directions in enumerate(block.more.get("directions", ())):
                if directions is not None:
                    values[k] = directions.get(parameter, np.nan)
            return np.where(acts(block) > 0.0, values, np.nan)

        return make


def _looked_up(
    places: Mapping[int, Place], value: Callable[[Place], Any], kind: str
) -> Callable[[Block], Values]:
    """Return what looks a value up by the number of a block's places."""
    table = np.empty(max(places, default=-1) + 1, dtype=float if kind == NUMBER else object)
    for number, place in places.items():
        table[number] = value(place)
    return lambda block: table[block.place]


def _texts(values: Sequence[str]) -> Values:
    texts = np.empty(len(values), dtype=object)
    texts[:] = values
    return texts
