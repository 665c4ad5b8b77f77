"""Scores as the store keeps them: the values of a run as one row of bytes, its names once for all runs.

A *layout* is the names of a run's scores and, apart from them, of its scores about the host, in the order in
which they came. Nearly all runs of a campaign have the same one. The values are little-endian float64 in that
order, so infinite is infinite and each bit is kept.
"""

from __future__ import annotations

import json
import struct
import sys
from collections.abc import Mapping
from dataclasses import dataclass
from itertools import chain

__all__ = ["VALUE", "Layout", "packed"]

VALUE = "<f8"
"""The form of one value, as numpy writes it."""


@dataclass(frozen=True)
class Layout:
    """The names of a run's scores, and of those about its host."""

    scores: tuple[str, ...]
    host_scores: tuple[str, ...]

    @property
    def names(self) -> tuple[str, ...]:
        """All of them, in the order of the values."""
        return self.scores + self.host_scores

    @property
    def text(self) -> str:
        """The layout as JSON."""
        return json.dumps([self.scores, self.host_scores])

    @classmethod
    def of_text(cls, text: str) -> Layout:
        """Read what :attr:`text` wrote; names are shared between all who hold them."""
        scores, host_scores = json.loads(text)
        return cls(tuple(map(sys.intern, scores)), tuple(map(sys.intern, host_scores)))

    def scores_of(self, values: bytes) -> dict[str, float]:
        """Return the scores that were packed as ``values``."""
        return dict(zip(self.names, struct.unpack(f"<{len(values) // 8}d", values), strict=True))


def packed(scores: Mapping[str, float], host_scores: Mapping[str, float]) -> tuple[Layout, bytes]:
    """Return the layout and the values of a run's scores."""
    values = struct.pack(f"<{len(scores) + len(host_scores)}d", *chain(scores.values(), host_scores.values()))
    return Layout(tuple(scores), tuple(host_scores)), values
