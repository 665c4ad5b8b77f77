"""Breaking of lines: nothing is lost and nothing is too wide."""

from __future__ import annotations

from hypothesis import given
from hypothesis import strategies as st

from rigbench.report.wrapping import clean, settings, wrap, wrap_list, wrap_name

TEXTS = st.text(st.sampled_from("ab ,[)_-/.(ü漢\t\n\x1b"), max_size=60)


@given(TEXTS, st.integers(1, 20))
def test_lines_hold_all_of_the_text_and_are_no_wider_than_asked(text: str, width: int) -> None:
    """Without blanks the lines are the text; each is as short as asked; the text has at least one line."""
    for lines in (wrap(text, width, len), wrap_list(text, width, len)):
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


def test_a_sheet_s_name_breaks_behind_its_commas() -> None:
    """Each setting stays together where it fits a line."""
    name = "control_hz 500, gear_ratio 50, leg_s 0.8"
    assert wrap_list(name, 40, len) == [name]
    assert wrap_list(name, 30, len) == ["control_hz 500, gear_ratio 50,", "leg_s 0.8"]
    assert wrap_list(name, 15, len) == ["control_hz 500,", "gear_ratio 50,", "leg_s 0.8"]
    assert wrap_list(name, 10, len) == ["control_hz", "500,", "gear_ratio", "50,", "leg_s 0.8"]


def test_a_value_s_own_commas_part_no_settings() -> None:
    """A vector or a mapping is one value; a bracket that never closes takes all the rest, one too many nothing."""
    name = "gravity_m_s2 [0, 0, -9.81], payload {kg: 1, cog: [0, 1]}, held"
    assert settings(name) == ["gravity_m_s2 [0, 0, -9.81]", "payload {kg: 1, cog: [0, 1]}", "held"]
    assert settings("a (b, c, d") == ["a (b, c, d"]
    assert settings("a), b") == ["a)", "b"]
    assert settings("") == [""]


def test_no_width_is_too_narrow() -> None:
    """Where not even one character fits, each stands on a line."""
    assert wrap("ab c", 0, len) == ["a", "b", "c"]
