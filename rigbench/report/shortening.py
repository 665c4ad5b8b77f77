"""Names cut to a width so that they can still be told apart."""

from __future__ import annotations

import re
from collections.abc import Callable

__all__ = ["fitted"]


def fitted(name: str, width: float, measure: Callable[[str], float]) -> str:
    """Return as many of a sum's terms as fit, and an ellipsis for the rest; a long one loses its middle."""
    if measure(name) <= width:
        return name
    terms = re.split(r" (?=[+-] )", name)
    more = " \u2026" if len(terms) > 1 else ""
    kept = terms[0]
    for term in terms[1:]:
        if measure(f"{kept} {term}{more}") > width:
            break
        kept += f" {term}"
    cut = len(terms[0])
    while measure(kept + more) > width and cut > 2:
        cut -= 1
        kept = f"{terms[0][: cut - cut // 2]}\u2026{terms[0][len(terms[0]) - cut // 2 :]}"
    return kept + more
