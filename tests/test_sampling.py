"""Many points of a line: the same numbers as by full rows, in any number of chunks."""

import numpy as np
import pytest

from fieldmap.errors import InputError
from fieldmap.estimate.fieldline import FieldLine
from fieldmap.estimate.spline import UniformSpline
from fieldmap.magnet import sampling
from fieldmap.magnet.sampling import Term, chosen_line, sample
from tests.pairs import plain_map


@pytest.fixture(scope="module")
def line():
    rng = np.random.default_rng(1)
    spline = UniformSpline.covering(-0.1, 0.1, 0.01)
    root = rng.standard_normal((spline.size, spline.size))
    return FieldLine(
        0, 0, -0.1, 0.1, spline, rng.standard_normal(spline.size), 1e-6 * root @ root.T
    )


def test_the_field_and_its_uncertainty(line):
    s = np.linspace(-0.1, 0.1, 57)
    value, u = sample(line, s)
    np.testing.assert_allclose(value, line.field(s), rtol=1e-12, atol=1e-13)
    np.testing.assert_allclose(u, line.u_field(s), rtol=1e-10)


@pytest.mark.parametrize("derivative", [0, 1, 2, 3])
def test_a_sum_of_derivatives_at_other_places(line, derivative):
    s = np.linspace(-0.08, 0.08, 23)
    value, u = sample(line, s, [Term(derivative, 0.5, 0.003), Term(0, -2.0, -0.004)])
    rows = 0.5 * line.spline.field_rows(s + 0.003, derivative)
    rows -= 2.0 * line.spline.field_rows(s - 0.004)
    np.testing.assert_allclose(value, rows @ line.b, rtol=1e-10, atol=1e-10)
    expected = np.sqrt(np.einsum("ij,ij->i", rows @ line.covariance, rows))
    np.testing.assert_allclose(u, expected, rtol=1e-9)


def test_chunks_do_not_show(line, monkeypatch):
    s = np.linspace(-0.1, 0.1, 57)
    whole = sample(line, s)
    monkeypatch.setattr(sampling, "CHUNK", 10)
    np.testing.assert_array_equal(sample(line, s), whole)


def test_no_such_line():
    bench_map = plain_map()
    with pytest.raises(InputError, match=r"line: found 1, expected 0"):
        chosen_line(bench_map, 1)
    with pytest.raises(InputError, match="found -1"):
        chosen_line(bench_map, -1)
