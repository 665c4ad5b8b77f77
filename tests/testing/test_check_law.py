"""The check for authors of laws: it passes what is sound, and names the fault of what is not."""

from __future__ import annotations

import pickle
import time

import numpy as np
import pytest

from rigbench.arm.dynamics import newton_euler, place
from rigbench.arm.kernel import kernel_of_this_process
from rigbench.errors import RigbenchError, RulesBroken
from rigbench.laws import Compiled, Law, option
from rigbench.laws.law import Q_REF, TAU, V_REF, Q, V
from rigbench.laws.registry import registered
from rigbench.testing import check_law

BUILT_IN = {name: law.cls for name, law in registered().laws.items() if law.package == "rigbench"}


class Spring(Law):
    """tau = k (q_ref - q) - d v + g(q)."""

    stiffness: float = option(400.0, "N m/rad", "of every joint", above=0)
    damping: float = option(40.0, "N m s/rad", "of every joint", at_least=0)

    def start(self, setup):
        self.model = setup.model

    def torque(self, t, q, v, ref, held):
        return self.stiffness * (ref.q - q) - self.damping * v + self.model.gravity_torque(q)


@kernel_of_this_process
def _gravity(io, held, chain, own):
    n = io.shape[1]
    placed, rest = np.empty((n, 12)), np.zeros(n)
    place(chain, io[Q], placed)
    newton_euler(chain, placed, rest, rest, False, held)


@kernel_of_this_process
def _no_gravity(io, held, chain, own):
    held[:] = 0.0


@kernel_of_this_process
def _spring(io, held, chain, own):
    for i in range(io.shape[1]):
        io[TAU, i] = own[0, i] * (io[Q_REF, i] - io[Q, i]) + own[1, i] * (io[V_REF, i] - io[V, i]) + held[i]


@kernel_of_this_process
def _stray(io, held, chain, own):
    for i in range(io.shape[1]):
        io[TAU, i] = own[0, i] * (io[Q_REF, i] - io[Q, i]) + own[1, i] * (io[V_REF, i] - io[V, i]) + held[i]
    io[V_REF, 0] = 0.0


class Kernels(Spring):
    """tau = k (q_ref - q) + d (v_ref - v) + g(q), also as kernels."""

    scale = 1.0
    kernels = (_spring, _gravity)

    def model_term(self, t, q, v, ref):
        return self.model.gravity_torque(q)

    def torque(self, t, q, v, ref, held):
        return self.stiffness * (ref.q - q) + self.damping * (ref.v - v) + held

    def compiled(self):
        n = self.model.n
        own = self.scale * np.outer([self.stiffness, self.damping], np.ones(n))
        return Compiled(torque=self.kernels[0], own=own, model_term=self.kernels[1], held_size=n)


class OneTorque(Spring):
    """Its torque is one number."""

    def torque(self, t, q, v, ref, held):
        return float(super().torque(t, q, v, ref, held)[0])


class Words(Spring):
    """Its torque is a text."""

    def torque(self, t, q, v, ref, held):
        return "much"


class TwoJointsOnly(Spring):
    """Its gains are made for two joints."""

    def torque(self, t, q, v, ref, held):
        return np.array([300.0, 100.0]) * (ref.q - q) - self.damping * v


class ByTheError(Spring):
    """It divides by the error, which is 0 on the reference."""

    def torque(self, t, q, v, ref, held):
        with np.errstate(all="ignore"):
            return super().torque(t, q, v, ref, held) * ((ref.q - q) / (ref.q - q))


class ByTheLimit(Spring):
    """It reckons with the limit of torque, which may be inf."""

    def start(self, setup):
        super().start(setup)
        self.limit = setup.torque_limit

    def torque(self, t, q, v, ref, held):
        with np.errstate(all="ignore"):
            return self.limit * np.tanh(super().torque(t, q, v, ref, held) / self.limit)


class InPlace(Spring):
    """It turns the position it is given into the error."""

    def torque(self, t, q, v, ref, held):
        q -= ref.q
        return -self.stiffness * q - self.damping * v


class InTheSetup(Spring):
    """It halves the setup's limits."""

    def start(self, setup):
        super().start(setup)
        setup.torque_limit[:] *= 0.5


class Keeping(Spring):
    """It differentiates the position by itself, and keeps the array instead of a copy."""

    def start(self, setup):
        super().start(setup)
        self.last = None

    def torque(self, t, q, v, ref, held):
        step = 0.0 * q if self.last is None else q - self.last
        self.last = q
        return self.stiffness * (ref.q - q) - self.damping * step / 1e-3


class Dice(Spring):
    """It adds random numbers that nobody seeds."""

    def torque(self, t, q, v, ref, held):
        return super().torque(t, q, v, ref, held) + np.random.default_rng().normal(size=len(q))


COUNTED = [0]


class Counting(Spring):
    """It counts its calls in the module, over all its laws."""

    def torque(self, t, q, v, ref, held):
        COUNTED[0] += 1
        return super().torque(t, q, v, ref, held) * (1 + 1e-3 * COUNTED[0])


class Remembering(Spring):
    """Its integral is not reset by start."""

    integral = 0.0

    def torque(self, t, q, v, ref, held):
        self.integral = self.integral + float(np.sum(ref.q - q))
        return super().torque(t, q, v, ref, held) + self.integral


class GivenAnObject(Spring):
    """An option of it is not plain."""

    shape: object = option(np.tanh, "", "how the error is bent")


class OutOfBounds(Spring):
    """The default of an option is beyond its bound."""

    corner: float = option(-1.0, "Hz", "of the filter", above=0)


class OtherKernel(Kernels):
    """Its kernel has other gains than its method."""

    scale = 1.1


class OtherTerm(Kernels):
    """Its kernel leaves gravity out."""

    kernels = (_spring, _no_gravity)


class StrayKernel(Kernels):
    """Its kernel writes into the reference."""

    kernels = (_stray, _gravity)


class NoKernelOfTheTerm(Kernels):
    """It has no kernel for its model term."""

    def compiled(self):
        whole = super().compiled()
        return Compiled(torque=whole.torque, own=whole.own)


class WholeNumbers(Kernels):
    """What its kernels keep is of whole numbers."""

    def compiled(self):
        whole = super().compiled()
        return Compiled(whole.torque, whole.own.astype(int), whole.model_term, whole.held_size)


class Pair(Kernels):
    """It hands out its kernels bare."""

    def compiled(self):
        return self.kernels


class GrowingTerm(Spring):
    """Its model term grows."""

    def start(self, setup):
        super().start(setup)
        self.calls = 0

    def model_term(self, t, q, v, ref):
        self.calls += 1
        return np.zeros(self.calls)


class WrongSign(Spring):
    """Its feedback drives the arm away from the reference."""

    def torque(self, t, q, v, ref, held):
        return 5 * self.stiffness * (q - ref.q) + 5 * self.damping * (v - ref.v)


class Raising(Spring):
    """It can't start on an arm that slides."""

    def start(self, setup):
        super().start(setup)
        if setup.model.arm.kinds.any():
            raise ValueError("no rails, please")


class NoTorque(Law):
    """It has no torque."""

    def start(self, setup):
        pass


class OtherNames(Spring):
    """Its torque takes the velocity first."""

    def torque(self, t, v, q, ref, held):
        return 0 * q


BROKEN = {
    OneTorque: {"shape": "torque returns shape ()"},
    Words: {"shape": "torque returns str"},
    TwoJointsOnly: {"raises": "could not be broadcast"},
    ByTheError: {"finite": "torque returns [nan"},
    ByTheLimit: {"finite": "2 turning joints without limits"},
    InPlace: {"inputs": "changes q, v or ref in place"},
    InTheSetup: {"inputs": "start changes the setup"},
    Keeping: {"references": "arrays of earlier calls"},
    Dice: {"determinism": "other torques"},
    Counting: {"determinism": "other torques"},
    Remembering: {"start": "started once more"},
    GivenAnObject: {"options": "'shape' is <ufunc 'tanh'>"},
    OutOfBounds: {"options": "the default -1.0 of 'corner'"},
    OtherKernel: {"compiled torque": "by the method at t = "},
    OtherTerm: {"compiled model term": "by the kernel"},
    StrayKernel: {"kernels": "rows of io besides TAU"},
    NoKernelOfTheTerm: {"compiled model term": "0 numbers by the kernel"},
    WholeNumbers: {"kernels": "own is int64"},
    Pair: {"kernels": "compiled returns tuple"},
    GrowingTerm: {"shape": "model_term returns 2 numbers"},
    WrongSign: {"closed loop": "ran away"},
    Raising: {"raises": "no rails, please"},
    NoTorque: {"form": "does not define 'torque'"},
    OtherNames: {"form": "(self, t, v, q, ref, held); expected (self, t, q, v, ref, held)"},
}  # fmt: skip


@pytest.mark.parametrize("name", BUILT_IN)
def test_built_in_laws_keep_all_rules(name):
    """Whatever this package registers, now or later, passes with its defaults, and is documented."""
    checked = check_law(BUILT_IN[name])
    assert checked.arms == 13
    assert checked.plain_us > 0
    assert checked.notes == ()


@pytest.mark.parametrize("sound", [Spring, Kernels])
def test_sound_laws_pass(sound):
    """A plain law and one with kernels of its own keep all rules."""
    checked = check_law(sound)
    assert (checked.compiled_us is not None) == (sound is Kernels)
    assert f"{sound.__name__} keeps all rules on 13 arms" in str(checked)


@pytest.mark.parametrize("law", BROKEN, ids=lambda law: law.__name__)
def test_a_broken_law_is_told_its_fault(law):
    """Each law that breaks a rule on purpose fails, with the rule by name and what was found.

    What goes by the drive and by feedback follows from other faults; beside those no other rule is named.
    """
    with pytest.raises(RulesBroken) as caught:
        check_law(law)
    found = {broken.rule: broken.found for broken in caught.value.broken}
    for rule, words in BROKEN[law].items():
        assert words in found[rule]
        assert f"  {rule}: " in str(caught.value)
    assert set(found) - set(BROKEN[law]) <= {"closed loop", "finite", "shape"}
    assert all(broken.expected and broken.remedy for broken in caught.value.broken)


def test_every_rule_has_a_law_that_breaks_it():
    """No rule is without a proof that it can fail."""
    from rigbench.testing.rules import RULES

    assert set(RULES) == {rule for rules in BROKEN.values() for rule in rules}


def test_all_faults_come_at_once():
    """A law with three faults is told all three, each with the arm it was met on and how many more."""

    class Worst(Remembering):
        stiffness: float = option(400.0, "N m/rad", "of every joint", above=0)

        def torque(self, t, q, v, ref, held):
            torque = super().torque(t, q, v, ref, held)
            v *= 0.5
            return torque[:1] if len(torque) == 4 else torque

    with pytest.raises(AssertionError) as caught:
        check_law(Worst)
    error = caught.value
    assert isinstance(error, RigbenchError)
    found = {broken.rule: broken.found for broken in error.broken}
    assert {"shape", "inputs", "start"} <= set(found)
    assert found["inputs"].startswith("on an arm of 1 turning joint, ")
    assert "(and on 12 more of 13 arms)" in found["inputs"]
    assert "(on this one of 13 arms alone)" in found["shape"]
    assert str(pickle.loads(pickle.dumps(error))) == str(error)


def test_a_law_that_raises_is_shown_its_own_lines_alone():
    """The traceback begins in the law's file."""
    with pytest.raises(RulesBroken) as caught:
        check_law(Raising)
    (broken,) = caught.value.broken
    assert broken.found.startswith("on an arm of 1 sliding joint, start raises ValueError: no rails, please")
    assert "test_check_law.py" in broken.found
    assert "rigbench/testing" not in broken.found


def test_options_choose_the_arms():
    """A list with one entry a joint is checked on arms with so many joints; two lengths, or none fit, are faults."""
    law = BUILT_IN["independent-joint"]
    assert check_law(law, kp=(900.0,) * 3, kd=(90.0,) * 3).arms == 2
    for lengths in ((2, 3), (9, 9)):
        with pytest.raises(RulesBroken, match="joints; expected one length"):
            check_law(law, kp=(900.0,) * lengths[0], kd=(90.0,) * lengths[1])


@pytest.mark.parametrize(
    ("options", "words"),
    [({"natural_hertz": 3}, "natural_hertz"), ({"natural_hz": -1}, "natural_hz"), ({"kp": (1.0,)}, "'kp' needs 'kd'")],
)  # fmt: skip
def test_wrong_options_are_told(options, words):
    """What the experiment file would refuse, the check refuses."""
    with pytest.raises(RulesBroken, match="options: check_law was given") as caught:
        check_law(BUILT_IN["independent-joint"], **options)
    assert words in str(caught.value)


def test_what_is_no_law_is_told():
    """Anything but a subclass of Law breaks the first rule."""
    for thing in (dict, 3, Spring()):
        with pytest.raises(RulesBroken, match="not a subclass"):
            check_law(thing)


def test_a_law_that_is_only_slow_or_undocumented_passes_with_a_note():
    """Times are told and not judged; words that are missing are a note."""

    class Slow(Spring):
        bare: float = option(1.0)

        def torque(self, t, q, v, ref, held):
            if len(q) == 6:
                time.sleep(0.0012)
            return super().torque(t, q, v, ref, held)

    notes = check_law(Slow).notes
    assert len(notes) == 3
    assert "no docstring" in notes[0]
    assert "'bare' has no words" in notes[1]
    assert "more than the control period of 1000 us" in notes[2]


def test_kernels_made_anew_are_noted():
    """Kernels from within compiled() work, and are said to be slower."""

    class Anew(Kernels):
        """tau as its parent's."""

        def compiled(self):
            @kernel_of_this_process
            def spring(io, held, chain, own):
                for i in range(io.shape[1]):
                    io[TAU, i] = (
                        own[0, i] * (io[Q_REF, i] - io[Q, i])
                        + own[1, i] * (io[V_REF, i] - io[V, i])
                        + held[i]
                    )

            whole = super().compiled()
            return Compiled(spring, whole.own, whole.model_term, whole.held_size)

    (note,) = check_law(Anew).notes
    assert "one by one" in note
