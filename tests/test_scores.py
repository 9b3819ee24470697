"""Score tests against a full refit, and how rare they are by chance."""

from __future__ import annotations

import numpy as np
import pytest

from fieldmap.estimate.findings.scan.scores import Scores
from tests.solved_lines import fitted, four_passes


@pytest.fixture(scope="module")
def solved():
    return fitted(four_passes()).solved


def refitted(solved, columns):
    """Amounts and uncertainties if signatures are solved for with all other unknowns.

    By the bordered normal equations, formed densely: an independent way to the same numbers.
    """
    size, count = len(solved.values), len(columns)
    matrix = np.zeros((size + count, size + count))
    matrix[:size, :size] = solved.system.matrix
    right = np.zeros(size + count)
    for k, column in enumerate(columns):
        for number, part in column.items():
            design = solved.design(number).toarray()
            weighed = np.linalg.solve(
                solved.covariance(number) @ np.eye(len(part)), np.column_stack([part, design])
            )
            matrix[:size, size + k] += design.T @ weighed[:, 0]
            right[size + k] += float(weighed[:, 0] @ solved.residual(number))
            for j, other in enumerate(columns):
                if number in other:
                    matrix[size + j, size + k] += float(other[number][:, 0] @ weighed[:, 0])
    matrix[size:, :size] = matrix[:size, size:].T
    scale = 1 / np.sqrt(np.diagonal(matrix))
    inverse = np.linalg.inv(matrix * scale[:, None] * scale) * scale[:, None] * scale
    amounts = inverse @ right
    return amounts[size:], np.sqrt(np.diagonal(inverse)[size:])


def signatures(solved, number):
    rng = np.random.default_rng(number)
    n = len(solved.residual(number))
    return 1e-7 * rng.normal(size=(n, 3))


def test_it_finds_what_a_refit_finds(solved):
    columns = signatures(solved, 1)
    score = Scores(solved).test(1, columns)
    for k in range(3):
        (amount,), (u,) = refitted(solved, [{1: columns[:, k : k + 1]}])
        assert score.amount[k] == pytest.approx(amount, rel=1e-4, abs=1e-4 * u)
        assert score.u[k] == pytest.approx(u, rel=1e-6)
        assert score.normal[k] == pytest.approx(amount / u, abs=1e-4)


def test_a_signature_through_several_passes(solved):
    columns = {number: signatures(solved, number)[:, :1] for number in (0, 2, 3)}
    score = Scores(solved).test_all(columns)
    (amount,), (u,) = refitted(solved, [columns])
    assert score.amount[0] == pytest.approx(amount, abs=1e-4 * u)
    assert score.u[0] == pytest.approx(u, rel=1e-6)


def test_what_was_accepted_is_solved_for_as_well(solved):
    first, second = ({1: column[:, None]} for column in signatures(solved, 1).T[:2])
    third = {
        1: first[1] + second[1] + signatures(solved, 1)[:, 2:],
        3: signatures(solved, 3)[:, :1],
    }
    scores = Scores(solved)
    scores.accept(first)
    scores.accept(third)
    score = scores.test_all(second)
    amounts, u = refitted(solved, [first, third, second])
    assert score.amount[0] == pytest.approx(amounts[2], abs=1e-3 * u[2])
    assert score.u[0] == pytest.approx(u[2], rel=1e-5)


def test_steps_are_what_unit_columns_are(solved):
    scores = Scores(solved)
    scores.accept({0: signatures(solved, 0)[:, :1], 1: signatures(solved, 1)[:, :1]})
    steps = scores.test_steps(1)
    each = scores.test(1, np.eye(len(steps.normal)))
    np.testing.assert_allclose(steps.normal, each.normal, atol=1e-6)
    np.testing.assert_allclose(steps.information, each.information, rtol=1e-6)


def test_several_at_once_as_a_chi_square(solved):
    columns = signatures(solved, 2)
    chi_square, freedom = Scores(solved).joint(2, columns)
    amounts, _ = refitted(solved, [{2: column[:, None]} for column in columns.T])
    weighed = [Scores(solved).test(2, column[:, None]).pushed[0] for column in columns.T]
    assert freedom == 3
    assert chi_square == pytest.approx(float(amounts @ weighed), rel=1e-4)
    # one signature twice is one degree of freedom
    assert Scores(solved).joint(2, columns[:, [0, 0]])[1] == 1


def test_what_an_unknown_explains_is_not_told(solved):
    # the drift of the pass is an unknown, its prior far wider than what the readings tell
    drift = np.diff(solved.models[0].bins.time)[:, None]
    index = solved.state.index("drift", solved.models[0].one.name)
    assert Scores(solved).test(0, drift).normal[0] == pytest.approx(
        solved.state.eta[index] / solved.state.unknowns[index].sd, rel=0.2, abs=0.1
    )
    field = np.asarray(solved.design(0)[:, [50]].todense())
    alone = fitted(four_passes(), four_passes().passes[:1]).solved
    assert Scores(alone).test(0, field).information[0] < 1e-2 * float(
        field[:, 0] @ alone.covariance(0).solve(field[:, 0])
    )


def test_they_are_unit_normals_by_chance():
    steps, others = [], []
    for seed in range(12):
        scores = Scores(fitted(four_passes(seed=seed)).solved)
        steps.append(scores.test_steps(1).normal)
        others.append(scores.test(1, signatures(scores.solved, seed % 4)[: len(steps[-1])]).normal)
    steps, others = np.concatenate(steps), np.concatenate(others)
    # standard deviation of a root mean square of n normals: 1/√(2n)
    assert np.sqrt(np.mean(steps**2)) == pytest.approx(1, abs=4 / np.sqrt(2 * len(steps)))
    assert np.sqrt(np.mean(others**2)) == pytest.approx(1, abs=4 / np.sqrt(2 * len(others)))
    assert np.abs(steps).max() < 5
