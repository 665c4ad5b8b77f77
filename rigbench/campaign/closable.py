"""What is to be closed, also by the end of a ``with``."""

from __future__ import annotations

from types import TracebackType
from typing import Self

__all__ = ["Closable"]


class Closable:
    """Whatever has a ``close()``. Use it in a ``with``, or close it."""

    def close(self) -> None:
        """Let go of what is held."""
        raise NotImplementedError

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()
