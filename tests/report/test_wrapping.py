"""Breaking of lines: nothing is lost and nothing is too wide."""

from __future__ import annotations

from hypothesis import given
from hypothesis import strategies as st

from rigbench.report.wrapping import clean, wrap, wrap_name

TEXTS = st.text(st.sampled_from("ab _-/.(ü漢\t\n\x1b"), max_size=60)


@given(TEXTS, st.integers(1, 20))
def test_lines_hold_all_of_the_text_and_are_no_wider_than_asked(text: str, width: int) -> None:
    """Without blanks the lines are the text; each is as short as asked; the text has at least one line."""
    lines = wrap(text, width, len)
    assert "".join(lines).replace(" ", "") == clean(text).replace(" ", "")
    assert max(map(len, lines)) <= width
    assert lines == [""] or all(lines)


@given(TEXTS)
def test_text_becomes_one_clean_line(text: str) -> None:
    """No control character reaches a terminal or a picture."""
    assert clean(text).isprintable()


def test_lines_break_where_it_reads_best() -> None:
    """At blanks first, after signs within a word next, anywhere last; a variant's bracket on its own line."""
    assert wrap("link mass of wrist", 9, len) == ["link mass", "of wrist"]
    assert wrap("rotor_inertia_percent", 15, len) == ["rotor_inertia_", "percent"]
    assert wrap("abcdefgh", 3, len) == ["abc", "def", "gh"]
    assert wrap_name("feedforward (model_hz 100)", 24, len) == ["feedforward", "(model_hz 100)"]
    assert wrap_name("feedforward (model_hz 100)", 26, len) == ["feedforward (model_hz 100)"]


def test_no_width_is_too_narrow() -> None:
    """Where not even one character fits, each stands on a line."""
    assert wrap("ab c", 0, len) == ["a", "b", "c"]
