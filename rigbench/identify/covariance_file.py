"""The covariance file: how well an identified arm is known, written and read back as a source of mismatch."""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path
from typing import Annotated, Any, Literal

import numpy as np
from pydantic import Field

from rigbench.arm.arm import PRISMATIC, Arm, Floats
from rigbench.arm.knowledge import Knowledge
from rigbench.arm.log_cholesky import Coordinates
from rigbench.arm.vector import LINK, vector_labels, vector_of
from rigbench.errors import Fault, InputFaults, nearest
from rigbench.identify.consistent import Consistent
from rigbench.identify.estimate import Estimate
from rigbench.identify.regressor import Terms, parameter_labels, parameter_values
from rigbench.yamlfile import Declared, Document, read_text, validate

__all__ = ["covariance_document", "covariance_text", "read_knowledge"]

ROUNDING = 1e-9
"""By which a covariance may be asymmetric or negative, as a share of its variances."""

SAME = 1e-6
"""Parameters nearer than this, as a share of the largest of their kind, are those of the arm identified."""

Deviation = Annotated[float, Field(ge=0)]


class BaseKeys(Declared):
    """A base parameter: its name, its value in the identified arm, the estimate, and what it is a sum of."""

    name: str
    value: float
    deviation: Deviation
    estimate: float
    low: float
    high: float
    of: dict[str, float] = Field(min_length=1)


class CovarianceKeys(Declared):
    """The covariance file as it is read."""

    rigbench: Literal[1]
    kind: Literal["covariance"]
    arm: str
    links: list[str]
    joints: list[str]
    kinds: list[Literal["revolute", "prismatic"]]
    terms: list[Literal["rotor", "viscous", "coulomb", "offset"]]
    values: list[float]
    scales: list[Annotated[float, Field(gt=0)]]
    base: list[BaseKeys] = Field(min_length=1)
    covariance: list[list[float]]
    offset: dict[str, float]
    noise_nm: dict[str, float]


def covariance_document(result: Consistent, terms: Terms, found: Estimate) -> dict[str, Any]:
    """Return how well an identified arm is known, as JSON-able lists and numbers.

    ``values`` (p,) are the arm's parameters, of links, then of ``terms``, and ``scales`` those by which
    changes of the drives' are measured. Each of ``base`` is a sum ``of`` parameters: its value in the
    identified arm, with the standard ``deviation`` that torques and declared values together leave, and
    ``covariance`` (b, b) likewise; ``estimate``, ``low`` and ``high`` are what torques alone say, with 95 %.
    """
    arm, combination = result.arm, found.base.combination
    values, low, high = parameter_values(arm, terms), *found.interval()
    slope = Coordinates(values, arm.n, result.scales).slope(np.zeros(len(values)))
    by_coordinates = combination @ slope
    covariance = by_coordinates @ result.covariance @ by_coordinates.T
    values[len(values) - arm.n * terms.offset :] = result.offset[: arm.n * terms.offset]
    labels = parameter_labels(arm, terms)
    columns = zip(
        found.base.names,
        (combination @ values).tolist(),
        np.sqrt(np.diag(covariance)).tolist(),
        found.values.tolist(),
        low.tolist(),
        high.tolist(),
        (_sum(labels, row, first) for row, first in zip(combination, found.base.kept, strict=True)),
        strict=True,
    )
    return {
        "rigbench": 1,
        "kind": "covariance",
        "arm": arm.name,
        "links": list(arm.links),
        "joints": list(arm.joints),
        "kinds": _kinds(arm),
        "terms": list(terms.names),
        "values": values.tolist(),
        "scales": result.scales.tolist(),
        "base": [dict(zip(BaseKeys.model_fields, column, strict=True)) for column in columns],
        "covariance": ((covariance + covariance.T) / 2).tolist(),
        "offset": dict(zip(arm.joints, result.offset.tolist(), strict=True)),
        "noise_nm": dict(zip(arm.joints, found.noise.tolist(), strict=True)),
    }


def _kinds(arm: Arm) -> list[str]:
    return ["prismatic" if kind == PRISMATIC else "revolute" for kind in arm.kinds]


def _sum(labels: tuple[str, ...], row: Floats, first: int) -> dict[str, float]:
    """Return the shares of the parameters in a sum, that which names it first."""
    shares = {labels[k]: float(row[k]) for k in np.flatnonzero(row)}
    return {labels[first]: 1.0} | shares


def covariance_text(document: dict[str, Any]) -> str:
    """Return the document as JSON, a line for each base parameter and each row of the covariance."""

    def text(value: Any) -> str:
        if isinstance(value, list) and value and isinstance(value[0], dict | list):
            return "[\n  " + ",\n  ".join(json.dumps(each, allow_nan=False) for each in value) + "\n ]"
        return json.dumps(value, allow_nan=False)

    return "{\n" + ",\n".join(f' "{key}": {text(value)}' for key, value in document.items()) + "\n}\n"


def read_knowledge(path: Path | str, arm: Arm) -> tuple[Knowledge, bool]:
    """Read a covariance file as a source of mismatch of ``arm``, and tell whether it is the arm identified.

    Constant torques (offsets) have no place in an arm: their sums are left out. InputFaults with all that is
    wrong: no JSON, unknown or missing keys, other links or joints than the arm's, sizes that don't fit, a
    covariance that is none.
    """
    file = str(path)
    text = read_text(Path(path), file, "the covariance file")
    try:
        data = json.loads(text)
    except (ValueError, RecursionError) as error:  # ValueError: no JSON, or a number of too many digits
        line, said = getattr(error, "lineno", None), getattr(error, "msg", str(error))
        expected = "a file that `rigbench identify` wrote"
        raise InputFaults([Fault(file, line, "", f"no JSON: {said}", expected)]) from None
    keys, faults = validate(Document(file, data, {}), CovarianceKeys)
    if keys is None:
        raise InputFaults(faults)
    faults = list(_of_another_arm(file, keys, arm)) or list(_misfits(file, keys))
    if faults:
        raise InputFaults(faults)
    return _knowledge(keys), _is_same(keys, arm)


def _of_another_arm(file: str, keys: CovarianceKeys, arm: Arm) -> Iterator[Fault]:
    for name, own in (("links", arm.links), ("joints", arm.joints), ("kinds", _kinds(arm))):
        if (given := getattr(keys, name)) != list(own):
            yield Fault(file, None, name, f"are {', '.join(given)}", f"the arm's: {', '.join(own)}")


def _misfits(file: str, keys: CovarianceKeys) -> Iterator[Fault]:
    """Yield what doesn't fit together in a file of the right links and joints."""
    labels = vector_labels(keys.links, keys.joints, keys.terms)
    drives, b = len(keys.joints) * len(keys.terms), len(keys.base)
    for name, count in (("values", len(labels)), ("scales", drives), ("covariance", b)):
        if len(getattr(keys, name)) != count:
            yield Fault(file, None, name, f"{len(getattr(keys, name))} entries", str(count))
    for i, base in enumerate(keys.base):
        for label in sorted(set(base.of) - set(labels)):
            problem, near = f"'{label}' is no parameter of the arm", nearest(label, labels)
            expected = "" if near else "parameters such as m.LINK and coulomb.JOINT"
            yield Fault(file, None, f"base[{i}].of", problem, expected, near)
    firsts = _firsts(keys)
    for i, first in enumerate(firsts):
        if first in firsts[:i]:
            problem = f"begins with '{first}' as base[{firsts.index(first)}].of does"
            yield Fault(file, None, f"base[{i}].of", problem, "a first parameter of its own")
    if len(keys.covariance) != b or any(len(row) != b for row in keys.covariance):
        yield Fault(file, None, "covariance", "is not square", f"{b} rows of {b} numbers")
        return
    covariance = np.array(keys.covariance)
    deviation = np.sqrt(np.maximum(np.diag(covariance), np.finfo(float).tiny))
    with np.errstate(over="ignore"):  # a covariance with what has no variance
        unit = covariance / np.outer(deviation, deviation)
    if np.diag(covariance).min() < 0 or not np.isfinite(unit).all() or np.abs(unit - unit.T).max() > ROUNDING:
        yield Fault(file, None, "covariance", "is none", "symmetric, with no variance below 0")
    elif np.linalg.eigvalsh(unit)[0] < -ROUNDING:
        problem = "is none: some combination would have a variance below 0"
        yield Fault(file, None, "covariance", problem, "positive definite")


def _firsts(keys: CovarianceKeys) -> list[str]:
    """Return the parameter that each sum is called by."""
    return [next(iter(base.of)) for base in keys.base]


def _knowledge(keys: CovarianceKeys) -> Knowledge:
    """Return what is known of all but offsets."""
    terms = tuple(term for term in keys.terms if term != "offset")
    labels = vector_labels(keys.links, keys.joints, terms)
    firsts = _firsts(keys)
    kept = [i for i, first in enumerate(firsts) if not first.startswith("offset.")]
    return Knowledge(
        terms=terms,
        names=tuple(firsts[i] for i in kept),
        combination=tuple(tuple(keys.base[i].of.get(label, 0.0) for label in labels) for i in kept),
        covariance=tuple(tuple(keys.covariance[i][j] for j in kept) for i in kept),
        scales=tuple(keys.scales[: len(keys.joints) * len(terms)]),
    )


def _is_same(keys: CovarianceKeys, arm: Arm) -> bool:
    """Tell whether the arm has the parameters of the arm identified, but for offsets."""
    terms = [term for term in keys.terms if term != "offset"]
    own = vector_of(arm, terms)
    there = np.array(keys.values[: len(own)])
    size = np.maximum(np.abs(own), np.abs(there))
    links = LINK * arm.n
    size[:links] = np.tile(size[:links].reshape(arm.n, LINK).max(axis=0), arm.n)
    return bool((np.abs(own - there) <= SAME * size).all())
