"""YAML with lines: the 1.2 core scalars, every odd file a fault, and pydantic's errors in plain words."""

from __future__ import annotations

import math
from typing import Annotated, Any, Literal

import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st
from pydantic import Field, field_validator, model_validator
from pydantic_core import PydanticCustomError

from rigbench.errors import InputFaults
from rigbench.yamlfile import Declared, Document, key_text, load, partial, read_text, validate

SCALARS: list[tuple[str, Any]] = [
    # YAML 1.2.2, chapter 10.3.2, "Tag Resolution" of the core schema
    ("null", None), ("Null", None), ("NULL", None), ("~", None), ("", None),
    ("true", True), ("True", True), ("TRUE", True), ("false", False), ("False", False), ("FALSE", False),
    ("0", 0), ("-19", -19), ("+12", 12), ("010", 10), ("0o17", 15), ("0x3A", 58),
    ("1.", 1.0), (".5", 0.5), ("-0.0", -0.0), ("12e03", 12000.0), ("-2E+05", -2e5), ("1e-5", 1e-5),
    (".inf", math.inf), ("-.Inf", -math.inf), ("+.INF", math.inf),
    # text in 1.2, though other readers make more of it
    ("yes", "yes"), ("No", "No"), ("on", "on"), ("off", "off"), ("y", "y"), ("nUll", "nUll"),
    ("2026-01-01", "2026-01-01"), ("1:30", "1:30"), ("1_000", "1_000"), ("0b11", "0b11"), ("-0x3A", "-0x3A"),
    ("0o8", "0o8"), ("1e", "1e"), (".", "."), ("inf", "inf"), ("<<", "<<"), ("=", "="),
    ("'10'", "10"), ('"true"', "true"), ("!!str 10", "10"), ("! 10", "10"), ('"\\x41"', "A"),
]  # fmt: skip


@pytest.mark.parametrize(("text", "value"), SCALARS)
def test_core_scalars(text: str, value: Any) -> None:
    """A plain scalar means what the standard says, in block and flow style alike."""
    for document in (load("x.yaml", f"key: {text}\n"), load("x.yaml", f"{{key: {text}}}")):
        found = document.data["key"]
        assert found == value
        assert type(found) is type(value)
        assert str(found) == str(value)  # tells -0.0 from 0.0


def test_not_a_number() -> None:
    """.nan is read as such; no model takes it unless it says so."""
    assert math.isnan(load("x.yaml", ".nan").data)


TEXT = """\
# an arm
arm: a.yaml
motions:
  there and back:
    via_deg:
      - [0, -60]
      - [70,
         -20]
  rim: {circle: {radius_m: 0.1}, turns: 2}
base: &base {kp: 1}
laws:
  one: *base
  two:
    - &item first
    - *item
"""


@pytest.mark.parametrize(
    ("path", "line", "key"),
    [
        ((), 2, ""),
        (("arm",), 2, "arm"),
        (("motions", "there and back"), 4, "motions.there and back"),
        (("motions", "there and back", "via_deg"), 5, "motions.there and back.via_deg"),
        (("motions", "there and back", "via_deg", 0, 1), 6, "motions.there and back.via_deg[0][1]"),
        (("motions", "there and back", "via_deg", 1), 7, "motions.there and back.via_deg[1]"),
        (("motions", "there and back", "via_deg", 1, 1), 8, "motions.there and back.via_deg[1][1]"),
        (("motions", "rim", "circle", "radius_m"), 9, "motions.rim.circle.radius_m"),
        (("laws", "one"), 12, "laws.one"),
        (("laws", "one", "kp"), 10, "laws.one.kp"),
        (("laws", "two", 1), 14, "laws.two[1]"),
        (("laws", "two", 5, "none"), 13, "laws.two[5].none"),
        (("laws", "nobody", "kp"), 11, "laws.nobody.kp"),
    ],
)
def test_lines_and_keys(path: tuple[str | int, ...], line: int, key: str) -> None:
    """Every key and item knows its line; what isn't there has that of what is around it."""
    document = load("x.yaml", TEXT)
    assert document.line(path) == line
    assert key_text(path) == key
    assert str(document.fault(path, "odd", "even", "evem")) == (
        f"x.yaml:{line}: {key + ': ' if key else ''}odd; expected even (did you mean 'evem'?)"
    )


def test_data_are_plain() -> None:
    """What is read are dicts, lists and scalars, aliases written out."""
    assert load("x.yaml", TEXT).data == {
        "arm": "a.yaml",
        "motions": {
            "there and back": {"via_deg": [[0, -60], [70, -20]]},
            "rim": {"circle": {"radius_m": 0.1}, "turns": 2},
        },
        "base": {"kp": 1},
        "laws": {"one": {"kp": 1}, "two": ["first", "first"]},
    }


LAUGHS = "a: &a [1,1,1,1,1,1,1,1,1]\n" + "".join(
    f"{name}: &{name} [{','.join('*' + before for _ in range(9))}]\n"
    for before, name in zip("abcde", "bcdef", strict=True)
)

ODD_FILES: list[tuple[str, str, list[str]]] = [
    ("empty", "", ["x.yaml: the file is empty; expected a declaration"]),
    ("comments", "# a\n\n", ["x.yaml: the file is empty; expected a declaration"]),
    ("twice", "a: 1\nb: {c: 1, c: 2}\na: 2\n", [
        "x.yaml:2: b.c: declared twice, first on line 2; expected each key once",
        "x.yaml:3: a: declared twice, first on line 1; expected each key once",
    ]),
    ("number as key", "a:\n  1: x\n  true: y\n  ~: z\n", [
        "x.yaml:2: a: the key 1 is not text; expected a name (in quotes, if need be)",
        "x.yaml:3: a: the key true is not text; expected a name (in quotes, if need be)",
        "x.yaml:4: a: the key ~ is not text; expected a name (in quotes, if need be)",
    ]),
    ("list as key", "? [a]\n: b\n", ["x.yaml:1: a key can't be a list or mapping; expected a name"]),
    ("unclosed", "a: [1,\nb: 2\n", [
        "x.yaml:3: not valid YAML: while parsing a flow sequence expected ',' or ']', but got '<stream end>'"
    ]),
    ("tab", "a:\n\tb: 1\n", [
        "x.yaml:2: not valid YAML: while scanning for the next token found character '\\t' that cannot start any token"
    ]),
    ("two documents", "a: 1\n---\nb: 1\n", ["x.yaml:2: a second document starts here; expected one document in a file"]),
    ("tag", "a: !!int '3'\nb: !x [1]\n", [
        "x.yaml:1: a: the tag tag:yaml.org,2002:int is not known; expected a plain value",
        "x.yaml:2: b: the tag !x is not known; expected a plain value",
    ]),
    ("python tag", "a: !!python/object/apply:os.getcwd []\n", [
        "x.yaml:1: a: the tag tag:yaml.org,2002:python/object/apply:os.getcwd is not known; expected a plain value"
    ]),
    ("control", "a: 1\nb: \x07\n", ["x.yaml:2: the character U+0007 is not allowed; expected plain text"]),
    ("line separator", "a: b\u2028c\n", ["x.yaml:1: the character U+2028 is not allowed; expected plain text"]),
    ("surrogate", "a: \ud800\n", ["x.yaml:1: the character U+D800 is not allowed; expected plain text"]),
    ("escaped control", 'a: "\\0"\nb: 2\n', ["x.yaml:1: a: the character U+0000 is not allowed; expected plain text"]),
    ("escaped nothing", 'a: "\\UFFFFFFFF"\n', None),
    ("long number", "a: " + "9" * 5000, [
        "x.yaml:1: a: a whole number of 5000 digits is not allowed; expected at most 40 digits"
    ]),
    ("merge key", "a: &a {b: 1}\nc:\n  <<: *a\n", [
        "x.yaml:3: c: merge keys (<<) aren't read; expected the keys themselves"
    ]),
    ("unknown alias", "a: [1, *b]\n", ["x.yaml:1: a[1]: *b is not defined; expected an anchor defined further up"]),
    ("alias of itself", "a: &a\n  b: *a\n", [
        "x.yaml:2: a.b: *a contains itself; expected an anchor defined further up"
    ]),
    ("growing aliases", LAUGHS, ["x.yaml:6: more than 100000 values; expected fewer, or fewer aliases"]),
    ("deep flow", "a: " + "[" * 5000, ["x.yaml:1: nested more than 40 deep; expected fewer levels"]),
    ("deep block", "".join(" " * i + "a:\n" for i in range(60)), [
        "x.yaml:41: nested more than 40 deep; expected fewer levels"
    ]),
]  # fmt: skip


@pytest.mark.parametrize(
    ("text", "faults"), [row[1:] for row in ODD_FILES], ids=[row[0] for row in ODD_FILES]
)
def test_odd_files(text: str, faults: list[str] | None) -> None:
    """Whatever no declaration needs is a fault with its line; all that can be told are told at once."""
    with pytest.raises(InputFaults) as caught:
        load("x.yaml", text)
    if faults is not None:
        assert [str(fault) for fault in caught.value.faults] == faults


def test_nearly_odd_files() -> None:
    """A byte order mark, Windows line ends, a directive and end markers are fine."""
    for text in ("\ufeffa: 1\n", "a: 1\r\n", "%YAML 1.2\n---\na: 1\n...\n", "# é\na: 1 # ü\n"):
        assert load("x.yaml", text).data == {"a": 1}


def test_a_fault_on_a_windows_file_has_its_line() -> None:
    """Lines are counted alike whatever ends them."""
    with pytest.raises(InputFaults, match=r"x\.yaml:3: a: declared twice"):
        load("x.yaml", "a: 1\r\nb: 2\r\na: 3\r\n")


def test_read_text(tmp_path: Any) -> None:
    """A file that can't be read is a fault that names it as the user does."""
    (tmp_path / "latin").write_bytes(b"a: 1\nb: \xff\n")
    for name, said in (
        ("none", "u: the thing does not exist; expected a file that can be read"),
        (".", "u: the thing is a folder; expected a file that can be read"),
        ("a\0b", "u: the thing can't be read (embedded null byte); expected a file that can be read"),
        ("latin", "u:2: the thing is not UTF-8 text; expected a text file"),
    ):
        with pytest.raises(InputFaults) as caught:
            read_text(tmp_path / name, "u", "the thing")
        assert str(caught.value) == said


# Validation -------------------------------------------------------------------------------------


class Circle(Declared):
    centre_m: tuple[float, float, float]
    radius_m: float = Field(gt=0, le=5)


class Via(Declared):
    via_deg: Annotated[tuple[tuple[float, ...], ...], Field(min_length=2)]
    leg_s: float = Field(default=1.0, gt=0)


class Round(Declared):
    circle: Circle
    turns: int = 1


class PerLink(Declared):
    all: float | None = None
    shared: bool = False


class Sheet(Declared):
    title: str = Field(default="", pattern=r"^[^\n]*$")
    mass: float | PerLink | dict[str, float] | None = None
    gains: Literal["stiff", "soft"] | list[float] = "soft"
    friction: Literal["none", "viscous", "full"] = "full"
    motions: dict[str, Via | Round] = Field(default_factory=dict)
    draws: int = Field(default=1, ge=1)
    quiet: bool = False
    share: float = 0.95
    low: float = 0.0
    high: float = 1.0

    @field_validator("draws")
    @classmethod
    def _even(cls, draws: int) -> int:
        if draws % 2 and draws > 1:
            raise ValueError(f"{draws} draws can't be halved")
        return draws

    @model_validator(mode="after")
    def _ordered(self) -> Sheet:
        if self.low > self.high:
            raise PydanticCustomError(
                "order", "{said}", {"said": "low is above high", "expected": "low below", "near": "high"}
            )
        return self


WORDS: list[tuple[str, list[str]]] = [
    ("share: fast", ["share: 'fast' is not a number; expected a number"]),
    ("share: '5'", ["share: '5' is not a number; expected a number"]),
    ("share: true", ["share: true is not a number; expected a number"]),
    ("share:", ["share: an empty value is not a number; expected a number"]),
    ("share: [1]", ["share: a list is not a number; expected a number"]),
    ("share: .nan", ["share: nan is not a finite number; expected a finite number"]),
    ("share: .inf", ["share: inf is not a finite number; expected a finite number"]),
    ("share: 1e999", ["share: inf is not a finite number; expected a finite number"]),
    ("draws: 2.5", ["draws: 2.5 is not a whole number; expected a whole number"]),
    ("draws: 2.0", ["draws: 2.0 is not a whole number; expected a whole number"]),
    ("draws: true", ["draws: true is not a whole number; expected a whole number"]),
    ("draws: 0", ["draws: 0 is out of range; expected at least 1"]),
    ("draws: 7", ["draws: 7 draws can't be halved"]),
    ("quiet: on", ["quiet: 'on' is not true or false; expected true or false"]),
    ("quiet: 1", ["quiet: 1 is not true or false; expected true or false"]),
    ("title: 5", ["title: 5 is not text; expected text"]),
    ("title: {a: 1}", ["title: a mapping is not text; expected text"]),
    ("friction: ful", [
        "friction: 'ful' is not a valid choice; expected 'none', 'viscous' or 'full' (did you mean 'full'?)"
    ]),
    ("shre: 1", ["shre: unknown key (did you mean 'share'?)"]),
    ("xyzzy: 1", [
        "xyzzy: unknown key; expected one of title, mass, gains, friction, motions, draws, quiet, share, low, high"
    ]),
    ("{low: 2, high: 1}", ["low is above high; expected low below (did you mean 'high'?)"]),
    ("motions: {rim: 5}", ["motions.rim: 5 is not a mapping of keys; expected a mapping of keys"]),
    ("motions: [1]", ["motions: a list is not a mapping of keys; expected a mapping of keys"]),
    ("motions: {m: {via_deg: [[0, 1]]}}", ["motions.m.via_deg: 1 entry given; expected at least 2"]),
    ("motions: {m: {via_deg: [[0, 1], [2, x]]}}", ["motions.m.via_deg[1][1]: 'x' is not a number; expected a number"]),
    ("motions: {m: {via_dg: [[0], [1]], leg_s: 2}}", [
        "motions.m.via_deg: missing", "motions.m.via_dg: unknown key (did you mean 'via_deg'?)"
    ]),
    ("motions: {m: {circle: {}}}", ["motions.m.circle.centre_m: missing", "motions.m.circle.radius_m: missing"]),
    ("motions: {m: {circle: {centre_m: [1, 2], radius_m: 9}}}", [
        "motions.m.circle.centre_m: 2 entries given; expected 3",
        "motions.m.circle.radius_m: 9 is out of range; expected at most 5",
    ]),
    ("motions: {m: {circle: {centre_m: [1, 2, 3, 4], radius_m: 1, radios: 1, round: 2, tip: 1}}}", [
        "motions.m.circle.centre_m: 4 entries given; expected 3",
        "motions.m.circle.radios: unknown key (did you mean 'radius_m'?)",
        "motions.m.circle.round: unknown key; expected one of centre_m, radius_m",
        "motions.m.circle.tip: unknown key; expected one of centre_m, radius_m",
    ]),
    ("mass: x", ["mass: 'x' is not a number or a mapping of keys; expected a number or a mapping of keys"]),
    ("mass: .nan", ["mass: nan is not a finite number; expected a finite number"]),
    ("mass: {all: x}", ["mass.all: 'x' is not a number; expected a number"]),
    ("gains: stif", [
        "gains: 'stif' is not 'stiff' or 'soft' or a list; expected 'stiff' or 'soft' or a list (did you mean 'stiff'?)"
    ]),
    ("gains: [1, x]", ["gains[1]: 'x' is not a number; expected a number"]),
]  # fmt: skip


@pytest.mark.parametrize(("text", "faults"), WORDS, ids=[row[0] for row in WORDS])
def test_words(text: str, faults: list[str]) -> None:
    """Each error of the model is one sentence with an address, also where a union has many branches."""
    parsed, found = validate(load("x.yaml", text), Sheet)
    assert parsed is None
    assert sorted(str(fault) for fault in found) == sorted(f"x.yaml:1: {fault}" for fault in faults)


def test_what_is_right_stays_as_it_is() -> None:
    """Numbers keep their bits, whole numbers may stand for numbers, lists become the model's tuples."""
    text = "{share: 3, mass: {all: 2, shared: true}, gains: [1, 2.5], motions: {m: {via_deg: [[1], [2]]}}}"
    parsed, faults = validate(load("x.yaml", text), Sheet)
    assert faults == []
    assert parsed == Sheet(
        share=3.0,
        mass=PerLink(all=2.0, shared=True),
        gains=[1.0, 2.5],
        motions={"m": Via(via_deg=((1.0,), (2.0,)))},
    )


@given(st.floats(allow_nan=False, allow_infinity=False))
@example(5e-324)
@example(0.1 + 0.2)
def test_numbers_keep_their_bits(number: float) -> None:
    """A double written in full is the same double once validated."""
    parsed, faults = validate(load("x.yaml", f"share: {number!r}"), Sheet)
    assert faults == []
    assert parsed is not None
    assert (parsed.share, math.copysign(1, parsed.share)) == (number, math.copysign(1, number))


def test_a_part_of_a_document() -> None:
    """Validation of one section, or of data that derive from it, keeps the section's addresses."""
    document = load("x.yaml", "title: a\nmotions:\n  rim:\n    circle: {centre_m: [1, 2, 3], radius_m: -1}\n")
    path = ("motions", "rim")
    _, faults = validate(document, Round, path)
    assert [str(fault) for fault in faults] == [
        "x.yaml:4: motions.rim.circle.radius_m: -1 is out of range; expected above 0"
    ]
    changed = {"circle": {"centre_m": [1, 2, 3], "radius_m": 1}, "turns": "two"}
    _, faults = validate(document, Round, path, changed)
    assert [str(fault) for fault in faults] == [
        "x.yaml:3: motions.rim.turns: 'two' is not a whole number; expected a whole number"
    ]
    _, faults = validate(document, Round, ("motions", "none"))
    assert [str(fault) for fault in faults] == [
        "x.yaml:2: motions.none: an empty value is not a mapping of keys; expected a mapping of keys"
    ]


def test_partial_keeps_what_is_right() -> None:
    """What is faulty goes, with what can't do without it; the rest comes back, and each fault once."""
    text = """\
draws: x
shre: 1
share: 0.5
motions:
  a: {via_deg: [[0], [x]], leg_s: 2}
  b: {via_deg: [[0], [1]], leg_s: -2}
  c: {circle: {centre_m: [1, 2], radius_m: 1}}
  d: {circle: {centre_m: [1, 2, 3], radius_m: 1}, turns: 1.5}
  e: {circle: {centre_m: [1, 2, 3], radius_m: 1}}
mass: {all: x, shared: true}
low: 2
"""
    parsed, faults = partial(load("x.yaml", text), Sheet)
    circle = Circle(centre_m=(1.0, 2.0, 3.0), radius_m=1.0)
    # low: 2 is right by itself, but no sheet of that kind can be: nothing is left of it as a whole
    assert parsed is None
    assert [(fault.line, fault.key) for fault in faults] == [
        (1, "draws"), (1, ""), (2, "shre"), (5, "motions.a.via_deg[1][0]"), (6, "motions.b.leg_s"),
        (7, "motions.c.circle.centre_m"), (8, "motions.d.turns"), (10, "mass.all"),
    ]  # fmt: skip
    document = load("x.yaml", text.replace("low: 2", "low: 0.5"))
    parsed, faults = partial(document, Sheet)
    assert [fault.key for fault in faults] == [
        "draws", "shre", "motions.a.via_deg[1][0]", "motions.b.leg_s", "motions.c.circle.centre_m",
        "motions.d.turns", "mass.all",
    ]  # fmt: skip
    assert parsed == Sheet(
        share=0.5,
        low=0.5,
        mass=PerLink(shared=True),
        motions={"b": Via(via_deg=((0.0,), (1.0,))), "d": Round(circle=circle), "e": Round(circle=circle)},
    )
    assert document.data["motions"]["b"]["leg_s"] == -2  # pruning is done on a copy


def test_partial_of_nothing() -> None:
    """Where a required key is faulty, nothing is left."""
    parsed, faults = partial(load("x.yaml", "{circle: 5, turns: x}"), Round)
    assert parsed is None
    assert [fault.key for fault in faults] == ["circle", "turns"]
    assert partial(load("x.yaml", "[1]"), Round)[0] is None


VALUES = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=4),
    lambda inside: (
        st.lists(inside, max_size=3)
        | st.dictionaries(
            st.sampled_from(["circle", "via_deg", "all", "radius_m", "centre_m", "a"]), inside, max_size=3
        )
    ),
    max_leaves=8,
)


@settings(max_examples=200, deadline=None)
@given(st.dictionaries(st.sampled_from([*Sheet.model_fields, "x"]), VALUES, max_size=4))
def test_any_data_give_a_model_or_faults(data: dict[str, Any]) -> None:
    """Whatever stands in a file, validation ends in a model without faults or in faults without a model."""
    document = Document("x.yaml", data, {(): 1})
    parsed, faults = validate(document, Sheet)
    assert (parsed is None) == bool(faults)
    assert all(fault.problem and fault.line == 1 for fault in faults)
    rest, again = partial(document, Sheet)
    assert bool(again) == bool(faults)
    if not faults:
        assert rest == parsed


PIECES = [
    "",
    ":",
    ": ",
    "- ",
    "[",
    "]",
    "{",
    "}",
    "&a ",
    "*a",
    "!x ",
    "'",
    '"',
    "\n",
    "\t",
    "#",
    "|\n",
    "? ",
    "%",
    "---\n",
]


@settings(max_examples=300, deadline=None)
@given(st.data())
def test_damaged_text_gives_data_or_faults(data: st.DataObject) -> None:
    """Whatever is cut out of or put into a file, reading ends in a document or in faults."""
    text = TEXT
    for _ in range(data.draw(st.integers(1, 4))):
        start = data.draw(st.integers(0, len(text)))
        end = min(len(text), start + data.draw(st.integers(0, 10)))
        text = text[:start] + data.draw(st.sampled_from(PIECES) | st.text(max_size=4)) + text[end:]
    faults: tuple[object, ...] = ()
    try:
        document = load("x.yaml", text)
    except InputFaults as error:
        faults = error.faults
    assert faults or all(document.line(path) for path in document.lines)
