"""Certified linear least squares through the project's solver: digits of agreement.

Source: NIST/ITL Statistical Reference Datasets, linear regression. Norris comes with scipy's
wheel (scipy/stats/tests/data/nist_linregress); the other sets with Debian's package gretl-data
(/usr/share/gretl/data/nist, or the folder named by FIELDMAP_STRD).
"""

from __future__ import annotations

import os
import re
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest
import scipy

from fieldmap.estimate.normal import NormalSystem

SCIPY = Path(scipy.__file__).parent / "stats/tests/data/nist_linregress"
GRETL = Path(os.environ.get("FIELDMAP_STRD", "/usr/share/gretl/data/nist"))
NUMBER = r"([-+]?[0-9]*\.?[0-9]+(?:[EeDd][-+]?[0-9]+)?)"

POLYNOMIALS = {
    # set: digits asked of coefficients and of their standard deviations
    "Wampler1": (12, None),  # exact: no residual, no standard deviation
    "Wampler2": (12, None),
    "Wampler3": (12, 12),
    "Wampler4": (12, 12),
    "Wampler5": (11, 12),
    "Pontius": (12, 12),
    "Filip": (11, 11),
}


def dataset(folder, name):
    """Certified coefficients with their standard deviations, residual deviation, y and x."""
    text = (folder / f"{name}.dat").read_text("latin-1")
    head, table = re.split(r"\nData:\s+y\s+x\S*.*\n", text)
    pairs = re.findall(rf"^\s+B\d+\s+{NUMBER}\s+{NUMBER}\s*$", head, re.MULTILINE)
    certified = np.array(pairs, float)
    (deviation,) = re.findall(rf"Residual\s+Standard Deviation\s+{NUMBER}", head)
    rows = np.array([line.split() for line in table.strip().splitlines()], float)
    return certified[:, 0], certified[:, 1], float(deviation), rows[:, 0], rows[:, 1:]


def solved(design, y):
    """Solution and covariance by the project's solver, and the residual deviation."""
    system = NormalSystem(design.T @ design)
    solution = system.solve(design.T @ y)
    rest = y - design @ solution
    solution = solution + system.solve(design.T @ rest)  # the rounds of a fit do as much
    rest = y - design @ solution
    freedom = len(y) - design.shape[1]
    deviation = np.sqrt(rest @ rest / freedom)
    return solution, deviation**2 * system.inverse(), deviation


def digits(got, certified):
    """Least number of digits that agree."""
    wrong = np.abs(np.asarray(got, float) - certified) / np.abs(certified)
    return float(-np.log10(np.maximum(wrong, 1e-16)).min())


def orthogonal(x, count):
    """Orthonormal polynomials on the points x, and their exact monomial coefficients.

    Three-term recurrence of G. E. Forsythe, J. Soc. Indust. Appl. Math. 5, 74 (1957).
    """
    values = [np.full(len(x), 1 / np.sqrt(len(x)))]
    powers = [[Fraction(float(values[0][0]))]]
    before, before_powers, below = np.zeros(len(x)), [Fraction(0)], 0.0
    for _ in range(1, count):
        here, here_powers = values[-1], powers[-1]
        middle = float(here @ (x * here))
        new = (x - middle) * here - below * before
        norm = float(np.linalg.norm(new))
        shifted = [Fraction(0), *here_powers]
        plain = [
            s - Fraction(middle) * h - Fraction(below) * b
            for s, h, b in zip(
                shifted,
                _padded(here_powers, len(shifted)),
                _padded(before_powers, len(shifted)),
                strict=True,
            )
        ]
        before, before_powers, below = here, here_powers, norm
        values.append(new / norm)
        powers.append([p / Fraction(norm) for p in plain])
    return np.column_stack(values), powers


def _padded(row, length):
    return row + [Fraction(0)] * (length - len(row))


def as_monomials(solution, covariance, powers):
    """Coefficients of 1, x, x² … and their standard deviations, without rounding on the way."""
    count = len(powers)
    table = [_padded(row, count) for row in powers]
    coefficients = [
        float(sum(Fraction(float(c)) * row[k] for c, row in zip(solution, table, strict=True)))
        for k in range(count)
    ]
    columns = np.array([[float(value) for value in row] for row in table])
    return coefficients, np.sqrt(np.einsum("ik,ij,jk->k", columns, covariance, columns))


def test_norris():
    certified, certified_sd, deviation, y, x = dataset(SCIPY, "Norris")
    design = np.column_stack([np.ones(len(y)), x])
    solution, covariance, found = solved(design, y)
    agreed = digits(solution, certified), digits(np.sqrt(np.diag(covariance)), certified_sd)
    print(f"Norris: {agreed[0]:.1f} digits of the coefficients, {agreed[1]:.1f} of their sd")
    assert agreed[0] > 12
    assert agreed[1] > 12
    assert digits(found, deviation) > 12


needs_gretl = pytest.mark.skipif(not GRETL.is_dir(), reason="needs Debian's gretl-data")


@needs_gretl
@pytest.mark.slow
@pytest.mark.parametrize("name", ["NoInt1", "NoInt2"])
def test_lines_through_the_origin(name):
    certified, certified_sd, deviation, y, x = dataset(GRETL, name)
    solution, covariance, found = solved(x, y)
    assert digits(solution, certified) > 13
    assert digits(np.sqrt(np.diag(covariance)), certified_sd) > 13
    assert digits(found, deviation) > 13


@needs_gretl
@pytest.mark.slow
@pytest.mark.parametrize("name", POLYNOMIALS)
def test_polynomials_in_an_orthogonal_basis(name):
    certified, certified_sd, deviation, y, x = dataset(GRETL, name)
    basis, powers = orthogonal(x[:, 0], len(certified))
    solution, covariance, found = solved(basis, y)
    coefficients, sd = as_monomials(solution, covariance, powers)
    of_values, of_sd = POLYNOMIALS[name]
    agreed = digits(coefficients, certified)
    print(f"{name}: {agreed:.1f} digits of the coefficients")
    assert agreed > of_values
    if of_sd is not None:
        assert digits(sd, certified_sd) > of_sd
        assert digits(found, deviation) > of_sd


@needs_gretl
@pytest.mark.slow
def test_longley_with_centred_columns():
    certified, certified_sd, deviation, y, x = dataset(GRETL, "Longley")
    middle = x.mean(axis=0)
    design = np.column_stack([np.ones(len(y)), x - middle])
    solution, covariance, found = solved(design, y)
    back = np.eye(7)
    back[0, 1:] = -middle
    solution, covariance = back @ solution, back @ covariance @ back.T
    agreed = digits(solution, certified)
    print(f"Longley: {agreed:.1f} digits of the coefficients")
    assert agreed > 11
    assert digits(np.sqrt(np.diag(covariance)), certified_sd) > 11
    assert digits(found, deviation) > 10
