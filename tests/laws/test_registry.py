"""The registry of laws, options as a model, and laws from a user's own file."""

from __future__ import annotations

import pickle
import re
from importlib.metadata import EntryPoint
from pathlib import Path

import numpy as np
import pydantic
import pytest

from rigbench.errors import InputFaults, LawError
from rigbench.laws.options import describe_options, options_model, per_joint_options
from rigbench.laws.plugins import own_trace
from rigbench.laws.registry import LawChoice, choose, load_file_law, registered, registry_of

SPRING = '''
import numpy as np
from rigbench.laws import Law, option
from helpers import STIFFNESS


class Spring(Law):
    """tau = k (q_ref - q)."""

    stiffness: float = option(STIFFNESS, "N m/rad", "of every joint", above=0)

    def start(self, setup):
        pass

    def torque(self, t, q, v, ref, held):
        return self.stiffness * (ref.q - q)
'''


@pytest.fixture
def spring(tmp_path):
    (tmp_path / "spring.py").write_text(SPRING)
    (tmp_path / "helpers.py").write_text("STIFFNESS = 3.0\n")
    return tmp_path / "spring.py"


def test_built_in_laws_are_registered_with_their_package():
    """The built-in laws come through the entry points that every plugin uses, and the README lists them all."""
    found = registered()
    readme = (Path(__file__).resolve().parents[2] / "README.md").read_text("utf-8")
    table = readme.split("### The laws")[1].split("### Your law")[0]
    listed = re.findall(r"^\| `([\w-]+)` \|", table, re.MULTILINE)
    assert set(listed) == {name for name, law in found.laws.items() if law.package == "rigbench"}
    assert found.laws["computed-torque"].package == "rigbench"
    assert found.broken == ()


def test_a_broken_plugin_is_named_and_stops_no_other():
    """An import error, a class that is no law and a clash are each named; good ones stay."""
    good = EntryPoint("good", "rigbench.laws.computed_torque:ComputedTorque", "rigbench.laws")
    absent = EntryPoint("absent", "no_such_module_anywhere:Law", "rigbench.laws")
    no_law = EntryPoint("no-law", "pathlib:Path", "rigbench.laws")
    twice = EntryPoint("twice", "rigbench.laws.computed_torque:ComputedTorque", "rigbench.laws")
    found = registry_of((good, absent, no_law, twice, twice))
    assert set(found.laws) == {"good"}
    reasons = dict(found.broken)
    assert "no_such_module_anywhere" in reasons["absent"]
    assert "not a subclass" in reasons["no-law"]
    assert "more than one package" in reasons["twice"]


def test_a_name_of_our_own_is_kept(monkeypatch):
    """Another package that registers a built-in law's name is named and passed over; the law stays."""
    from rigbench.laws import plugins

    ours = EntryPoint("computed-torque", "rigbench.laws.computed_torque:ComputedTorque", "rigbench.laws")
    theirs = EntryPoint(
        "computed-torque", "rigbench.laws.independent_joint:IndependentJoint", "rigbench.laws"
    )
    packages = {ours.value: ("rigbench", "1"), theirs.value: ("elsewhere", "2")}
    monkeypatch.setattr(plugins, "_package", lambda point: packages[point.value])
    found = registry_of((theirs, ours))
    assert found.laws["computed-torque"].cls.__name__ == "ComputedTorque"
    assert found.broken == (("computed-torque of elsewhere", "the name is rigbench's own; take another"),)


FORM = """
from rigbench.laws import Law, option
class A(Law):
    def start(self, setup): pass
    def torque(self, t, q, v, ref, held): return 0 * q
"""


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ("self, setup", "self, arm", "A.start takes (self, arm); expected (self, setup)"),
        ("t, q, v, ref, held", "q, t, v, ref, held", "A.torque takes (self, q, t, v, ref, held); expected (self, t, q, v, ref, held)"),
        ("ref, held", "ref, *, held", "A.torque takes"),
        ("ref, held", "ref, held, more=None", "A.torque takes"),
        ("self, t, q, v, ref, held", "*args", "A.torque takes (*args)"),
        ("    def start", "    model_term = 3\n    def start", "A.model_term is 3; expected a method (self, t, q, v, ref)"),
        ("    def start", "    def model_term(self, t, q): pass\n    def start", "A.model_term takes (self, t, q); expected (self, t, q, v, ref)"),
        ("    def start", "    @staticmethod\n    def compiled(): pass\n    def start", "A.compiled takes (); expected (self)"),
        ("    def start", "    law: str = option('x')\n    def start", "an option 'law'"),
    ],
)  # fmt: skip
def test_names_and_counts_are_checked_at_registration(tmp_path, old, new, words):
    """A method that takes other things, in another order or number, is told before any run."""
    path = tmp_path / "law.py"
    path.write_text(FORM.replace(old, new, 1))
    with pytest.raises(InputFaults) as caught:
        load_file_law(path, "A")
    assert words in str(caught.value)


def test_all_that_is_wrong_with_the_form_comes_at_once(tmp_path):
    """Three faults in one sentence; an underscore before an unused name is none."""
    path = tmp_path / "law.py"
    path.write_text(
        "from rigbench.laws import Law\n"
        "class A(Law):\n"
        "    def start(self, arm): pass\n"
        "    def model_term(self, _t, _q, v, ref): pass\n"
        "    def compiled(self, more): pass\n"
    )
    with pytest.raises(InputFaults) as caught:
        load_file_law(path, "A")
    told = str(caught.value)
    assert [name in told for name in ("A.start", "'torque'", "A.compiled", "model_term")] == [True] * 3 + [
        False
    ]


def test_a_law_without_a_docstring_is_noted():
    """It is registered, with a note; its signature is not taken for a docstring."""
    from rigbench.laws import Law, option
    from rigbench.laws.form import notes_on

    class Bare(Law):
        gain: float = option(1.0)

    class Told(Bare):
        """tau = 0."""

    assert Bare.__doc__ is None
    assert "Bare has no docstring" in notes_on(Bare)[0]
    assert notes_on(Told) == ()


def test_the_digest_of_a_package_covers_all_of_it(tmp_path, monkeypatch):
    """A change in any file of the package that a law comes from changes the key of its runs."""
    from rigbench.laws.plugins import package_digest

    monkeypatch.syspath_prepend(tmp_path)
    digests = set()
    for number, texts in enumerate((("a = 1", "b = 1"), ("a = 1", "b = 2"), ("a = 2", "b = 1"))):
        name = f"digested{number}"
        (tmp_path / name / "laws").mkdir(parents=True)
        for file, text in zip(("__init__.py", "laws/__init__.py", "laws/one.py"), ("", *texts), strict=True):
            (tmp_path / name / file).write_text(text)
        __import__(f"{name}.laws.one")
        digests.add(package_digest(f"{name}.laws.one"))
    assert len(digests) == 3


def test_options_are_strict_and_bounded():
    """Unknown names, texts for numbers, wrong signs, nan and unknown choices are refused."""
    model = options_model(registered().laws["torque-feedforward"].cls)
    assert model(natural_hz=4, model_hz=100).model_dump()["model_hz"] == 100
    for bad in (
        {"natural_hertz": 4}, {"natural_hz": "4"}, {"natural_hz": -1}, {"damping": float("nan")},
        {"friction": "some"}, {"kp": [1, "x"]}, {"kp": [-1.0], "kd": [1.0]}, {"kp": [1.0]}, {"natural_hz": True},
    ):  # fmt: skip
        with pytest.raises(pydantic.ValidationError):
            model(**bad)


def test_options_describe_themselves():
    """Each option tells its type, default, unit and meaning; per-joint lists are named."""
    cls = registered().laws["computed-torque"].cls
    about = {option.name: option for option in describe_options(cls)}
    assert about["natural_hz"].unit == "Hz"
    assert about["natural_hz"].default == 5.0
    assert about["friction"].choices == ("none", "viscous", "full")
    assert about["kp"].type == "list of numbers"
    assert about["kp"].per_joint
    assert (about["natural_hz"].above, about["damping"].at_least) == (0, 0)
    assert all(option.doc for option in about.values())
    assert per_joint_options(cls) == ("kp", "kd")


def test_a_law_from_a_file_runs_elsewhere_from_its_text(spring):
    """A choice survives pickling and works after the file and its helper are gone."""
    cls, files = load_file_law(spring, "Spring")
    assert dict(files).keys() == {"spring.py", "helpers.py"}
    choice = choose(f"{spring}:Spring", options_model(cls)(stiffness=2.0), files)
    again = pickle.loads(pickle.dumps(choice))
    spring.unlink()
    law = again.make()
    ref = type("R", (), {"q": np.ones(2)})
    np.testing.assert_array_equal(law.torque(0.0, np.zeros(2), np.zeros(2), ref, np.empty(0)), [2.0, 2.0])
    assert options_model(cls)().model_dump() == {"stiffness": 3.0}


def test_a_changed_helper_changes_the_key_and_is_what_runs(spring, tmp_path):
    """The inputs cover every file that the law imports, and two laws may each have a helpers.py."""
    cls, files = load_file_law(spring, "Spring")
    before = choose("spring.py:Spring", options_model(cls)(), files)
    (tmp_path / "helpers.py").write_text("STIFFNESS = 4.0\n")
    cls, files = load_file_law(spring, "Spring")
    after = choose("spring.py:Spring", options_model(cls)(), files)
    assert before.inputs()["source"] != after.inputs()["source"]
    assert (before.make().stiffness, after.make().stiffness) == (3.0, 4.0)


@pytest.mark.parametrize(
    ("text", "name", "error", "words"),
    [
        ("x = 1\n", "Missing", InputFaults, "no such class"),
        ("class Thing: pass\n", "Thing", InputFaults, "not a subclass"),
        ("from rigbench.laws import Law\nclass A(Law):\n  def start(self, setup): pass\n", "A", InputFaults, "'torque'"),
        ("from rigbench.laws import Law\nclass A(Law):\n  def torque(self, t, q): pass\n  def start(self, s): pass\n",
         "A", InputFaults, "expected (self, t, q, v, ref, held)"),
        ("from rigbench.laws import Law\nclass A(Law):\n  def __init__(self): pass\n", "A", LawError, "__init__"),
        ("1/0\n", "A", LawError, "ZeroDivisionError"),
        ("def (:\n", "A", LawError, "SyntaxError"),
    ],
)  # fmt: skip
def test_a_faulty_file_is_told_with_its_reason(tmp_path, text, name, error, words):
    """What is wrong with a user's file is said; what it raises is shown with its own traceback."""
    path = tmp_path / "law.py"
    path.write_text(text)
    with pytest.raises(error) as caught:
        load_file_law(path, name)
    assert words in str(caught.value)
    assert "law.py" in str(caught.value)


def test_a_missing_file_is_a_fault(tmp_path):
    """A file that is not there is the user's fault, with its path."""
    with pytest.raises(InputFaults, match=r"gone\.py"):
        load_file_law(tmp_path / "gone.py", "Law")


def test_a_law_that_is_not_here_is_a_law_error():
    """A run from elsewhere whose plugin is not installed here says so."""
    with pytest.raises(LawError, match="no such law"):
        LawChoice("someone-elses-law").make()


def test_a_law_that_raises_in_a_run_is_told_with_its_own_lines(tmp_path):
    """The traceback names the user's file and shows the line, on a machine that never had the file."""
    path = tmp_path / "bad.py"
    path.write_text(
        SPRING.replace("from helpers import STIFFNESS", "STIFFNESS = 3.0").replace("pass", "nonsense()")
    )
    cls, files = load_file_law(path, "Spring")
    choice = pickle.loads(pickle.dumps(choose(f"{path}:Spring", options_model(cls)(), files)))
    path.unlink()
    with pytest.raises(NameError) as caught:
        choice.make().start(None)
    trace = own_trace(caught.value, Path(__file__).parent)
    assert str(path) in trace
    assert "nonsense()" in trace
