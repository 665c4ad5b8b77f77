"""How much of a campaign is asked for this time."""

from __future__ import annotations

from dataclasses import dataclass

from rigbench.campaign.plan import Entry

__all__ = ["Part"]


@dataclass(frozen=True)
class Part:
    """A part of a campaign: all of it, unless said otherwise.

    ``draws``: the first so many of every cell, and what is not random. ``ends``: the reading of
    time.monotonic() [s] from which no run is begun any more.
    """

    draws: int | None = None
    ends: float | None = None

    def has(self, entry: Entry) -> bool:
        """Whether the entry's draw is among those asked for."""
        return self.draws is None or entry.draw is None or entry.draw < self.draws

    def resume(self, command: str) -> str:
        """Return the command line that goes on with this part, without the limit on time."""
        return command if self.draws is None else f"{command} --draws {self.draws}"
