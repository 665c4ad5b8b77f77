"""The covariance file: what it holds, how it reads back, and what is said of bad ones."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest

from rigbench.arm.files import ArmFiles
from rigbench.arm.log_cholesky import Coordinates
from rigbench.arm.mismatch import Mismatch
from rigbench.errors import InputFaults
from rigbench.identify.base import base_of
from rigbench.identify.consistent import Consistent
from rigbench.identify.covariance_file import covariance_document, covariance_text, read_knowledge
from rigbench.identify.estimate import Estimate
from rigbench.identify.fourier import FourierMotion
from rigbench.identify.procedure import Settings, Simulated, identify, record
from rigbench.identify.regressor import Terms, parameter_labels, parameter_values

GRAVITY = (0.0, 0.0, -9.81)
ROBOTS = Path(__file__).resolve().parents[2] / "robots_demo"
TRAY6 = ArmFiles.read(ROBOTS / "tray6" / "arm.yaml").arm()
PLANAR2 = ArmFiles.read(ROBOTS / "planar2" / "arm.yaml").arm()


def document(arm, terms=None, offset=0.0):
    """An arm taken as found, its coordinates known to 10 % each, torques showing 1 %."""
    terms = terms or Terms()
    base, count = base_of(arm, GRAVITY, terms), len(parameter_labels(arm, terms))
    values = base.combination @ parameter_values(arm, terms)
    found = Estimate(
        base, values, np.diag((0.01 * values) ** 2), np.ones(arm.n), np.zeros(arm.n, int), 100, 10.0
    )
    result = Consistent(arm, np.full(arm.n, offset), 0.01 * np.eye(count), np.ones(count - 10 * arm.n))
    return covariance_document(result, terms, found)


def written(folder, data):
    path = folder / "known.json"
    path.write_text(covariance_text(data) if isinstance(data, dict) else data)
    return path


def test_it_says_what_it_holds(tmp_path):
    """As many rows as sums; each sum is that of its parts; the covariance is K S C S' K' of the coordinates'."""
    data = json.loads(written(tmp_path, document(TRAY6)).read_text())
    assert len(data["base"]) == len(data["covariance"]) == 52
    assert len(data["values"]) == 78
    assert len(data["scales"]) == 18
    labels = parameter_labels(TRAY6, Terms())
    values = dict(zip(labels, data["values"], strict=True))
    for entry in data["base"]:
        assert entry["low"] <= entry["value"] <= entry["high"]
        assert sum(share * values[label] for label, share in entry["of"].items()) == pytest.approx(
            entry["value"]
        )
        assert next(iter(entry["of"])) == entry["name"].split(" ")[0]
    base = base_of(TRAY6, GRAVITY, Terms())
    slope = Coordinates(np.array(data["values"]), 6, np.ones(18)).slope(np.zeros(78))
    expected = 0.01 * (base.combination @ slope) @ (base.combination @ slope).T
    assert np.allclose(data["covariance"], expected, rtol=1e-9, atol=1e-12 * expected.max())
    assert np.allclose([entry["deviation"] ** 2 for entry in data["base"]], np.diag(expected))


def test_it_reads_back(tmp_path):
    """Sums, covariance and scales are those written; it knows its own arm, and another by its numbers."""
    data = document(TRAY6)
    known, same = read_knowledge(written(tmp_path, data), TRAY6)
    assert same
    assert np.array_equal(known.covariance, data["covariance"])
    assert np.allclose(known.combination, base_of(TRAY6, GRAVITY, Terms()).combination, rtol=1e-15, atol=0)
    assert known.names[0] == "Izz.turret"
    assert known.terms == ("rotor", "viscous", "coulomb")
    heavier = TRAY6.replaced(TRAY6.parameters * 1.001)
    assert read_knowledge(written(tmp_path, data), heavier) == (known, False)


def test_offsets_are_no_part_of_an_arm(tmp_path):
    """With offsets identified too, their sums are left out, all others have the covariance that they had."""
    terms = Terms(rotor=False, viscous=False, coulomb=False, offset=True)
    data = document(PLANAR2, terms, offset=0.7)
    assert data["offset"]["elbow"] == 0.7
    assert [entry["value"] for entry in data["base"] if entry["name"].startswith("offset.")] == [0.7, 0.7]
    known, same = read_knowledge(written(tmp_path, data), PLANAR2)
    assert same
    assert known.terms == ()
    assert known.scales == ()
    kept = [i for i, entry in enumerate(data["base"]) if not entry["name"].startswith("offset.")]
    assert np.array_equal(known.covariance, np.array(data["covariance"])[np.ix_(kept, kept)])
    assert len(known.combination[0]) == 20


def changed(**changes):
    return document(PLANAR2) | changes


def asymmetric():
    covariance = np.array(document(PLANAR2)["covariance"])
    covariance[0, 1] += np.sqrt(covariance[0, 0] * covariance[1, 1])
    return covariance.tolist()


def indefinite():
    covariance = np.array(document(PLANAR2)["covariance"])
    covariance[0, 1] = covariance[1, 0] = 2 * np.sqrt(covariance[0, 0] * covariance[1, 1])
    return covariance.tolist()


def of_nothing():
    """A covariance of two sums that have no variance."""
    covariance = np.array(document(PLANAR2)["covariance"])
    covariance[:2], covariance[:, :2] = 0.0, 0.0
    covariance[0, 1] = covariance[1, 0] = 10.0
    return covariance.tolist()


def of_the_same_first():
    base = document(PLANAR2)["base"]
    return [base[0], base[1] | {"of": base[0]["of"]}, *base[2:]]


BAD = {
    "no JSON": (lambda: "a: {b\n", "no JSON", ""),
    "empty": (lambda: "", "no JSON", ""),
    "another document": (lambda: '{"rigbench": 1}\n', "missing", "kind"),
    "an unknown key": (lambda: changed(colour="blue"), "unknown key", "colour"),
    "another version": (lambda: changed(rigbench=2), "2", "rigbench"),
    "another arm": (lambda: document(TRAY6), "are turret, upper_arm", "links"),
    "too few values": (lambda: changed(values=[1.0, 2.0]), "2 entries", "values"),
    "no square": (lambda: changed(covariance=[[1.0], [2.0]]), "2 entries", "covariance"),
    "asymmetric": (lambda: changed(covariance=asymmetric()), "is none", "covariance"),
    "indefinite": (lambda: changed(covariance=indefinite()), "variance below 0", "covariance"),
    "a negative scale": (lambda: changed(scales=[-1.0] * 6), "-1", "scales[0]"),
    "an unknown part": (
        lambda: changed(base=[entry | {"of": {"Iab.fore": 1.0}} for entry in document(PLANAR2)["base"]]),
        "'Iab.fore' is no parameter",
        "base[0].of",
    ),
    "a covariance without variances": (
        lambda: changed(covariance=of_nothing()),
        "is none",
        "covariance",
    ),
    "two sums of one name": (
        lambda: changed(base=of_the_same_first()),
        "as base[0].of does",
        "base[1].of",
    ),
    "too deep": (lambda: "[" * 100_000, "no JSON", ""),
    "too many digits": (lambda: f'{{"rigbench": {"9" * 5000}}}', "no JSON", ""),
    "not a number": (lambda: changed(values=["x"] * 26), "'x'", "values[0]"),
}


@pytest.mark.parametrize("bad", BAD)
def test_a_bad_file_is_told_with_its_place(tmp_path, bad):
    """File, key, and what is wrong; never another error."""
    make, said, key = BAD[bad]
    path = written(tmp_path, make())
    with pytest.raises(InputFaults) as caught:
        read_knowledge(path, PLANAR2)
    assert any(
        fault.file == str(path) and fault.key == key and said in fault.problem
        for fault in caught.value.faults
    ), [str(fault) for fault in caught.value.faults]


def test_a_misspelt_part_has_its_nearest_name(tmp_path):
    """Of the arm's own parameters."""
    data = document(PLANAR2)
    data["base"][0]["of"]["mcx.for"] = 0.5
    with pytest.raises(InputFaults) as caught:
        read_knowledge(written(tmp_path, data), PLANAR2)
    assert [(fault.key, fault.near) for fault in caught.value.faults] == [("base[0].of", "mcx.fore")]


def test_a_file_that_is_not_there(tmp_path):
    """Named with its path."""
    with pytest.raises(InputFaults, match="does not exist"):
        read_knowledge(tmp_path / "none.json", PLANAR2)


MOTION = FourierMotion((0.2, -0.3), ((0.9, -0.45), (-0.7, 0.35)), ((0.4, -0.1), (0.8, -0.2)), 4.0, 3)


@pytest.mark.evidence
def test_the_hidden_machine_is_like_a_draw():
    """40 practices of a rubbing planar2: distances of the truth from the identified arm are those of draws.

    In its own covariance the squared distance of a draw is chi-squared with as many degrees of freedom as there
    are sums; their total over 40 machines lies within four of its standard deviations.
    """
    files = ArmFiles.read(ROBOTS / "planar2" / "arm.yaml").with_drives(
        [("all", "viscous", 0.8), ("all", "coulomb", 0.6)]
    )
    settings = Settings(Terms(rotor=False))
    mismatch = Mismatch(link_mass_percent=20, link_cog_mm=20, viscous_percent=20, coulomb_percent=20)
    total = 0.0
    for seed in range(40):
        hidden = Simulated(mismatch, mismatch.sources, seed, noise_deg=0.001, torque_noise_nm=0.2)
        recording, truth = record(files, settings, hidden, MOTION, "practice", 0)
        done = identify(files, settings, [recording], truth=truth)
        data = covariance_document(done.result, settings.terms, done.found)
        off = done.true_values - np.array([entry["value"] for entry in data["base"]])
        total += off @ np.linalg.solve(np.array(data["covariance"]), off)
    degrees = 40 * len(off)
    print(f"{total:.0f} of {degrees}")
    assert abs(total - degrees) < 4 * np.sqrt(2 * degrees)
