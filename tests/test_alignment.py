"""Shift, scale and simultaneous bands, on profiles whose errors are known."""

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.bench.sources import TanhMagnet, Uniform
from fieldmap.errors import RefusedError
from fieldmap.estimate.fieldline import FieldLine
from fieldmap.magnet.comparison.alignment import CommonErrors, Pair, align, band_factor, first_shift
from fieldmap.magnet.comparison.design_profile import design_profile
from fieldmap.magnet.comparison.position_errors import position_errors
from tests.pairs import SOFT, map_of, plain_map
from tests.shop import STAGE

GRID = np.linspace(-0.4, 0.4, 161)
S = np.linspace(-0.35, 0.35, 101)


def line_of(source, root=None):
    line = design_profile(GRID, source.field(GRID)).line
    return line if root is None else replace(line, covariance=root @ root.T)


def smooth_root(size, rng):
    """Errors as maps have them: few smooth ones, a gain, and a little from knot to knot."""
    x = np.linspace(-1, 1, size)
    waves = [np.cos(k * np.pi * x + rng.uniform(0, 6)) for k in range(4)]
    gain = line_of(SOFT).b * 4e-4
    return np.column_stack([*(1e-5 * wave for wave in waves), gain, 5e-6 * np.eye(size)])


def drawn(line, root, rng):
    return replace(line, b=line.b + root @ rng.standard_normal(root.shape[1]))


@pytest.mark.parametrize(("shift", "scale"), [(0.0, 0.0), (3e-3, -0.02), (-0.05, 0.1)])
def test_exact_profiles_give_exact_values(shift, scale):
    first = line_of((1 + scale) * SOFT.shifted(shift), np.eye(163) * 1e-6)
    pair = Pair(first, line_of(SOFT))
    s = S[(S - shift > -0.4) & (S - shift < 0.4)]
    found = align(pair, s, first_shift(pair, -0.4, 0.4))
    assert found.shift == pytest.approx(shift, abs=2e-7)
    assert found.scale == pytest.approx(scale, abs=2e-6)


def test_errors_are_those_stated():
    rng = np.random.default_rng(5)
    root = smooth_root(163, rng)
    errors, outside = [], 0
    truth = line_of(1.001 * SOFT.shifted(1e-4)), line_of(SOFT)
    for _ in range(150):
        pair = Pair(
            *(replace(drawn(one, root, rng), covariance=root @ root.T) for one in truth),
        )
        found = align(pair, S, 0.0)
        u = np.sqrt(np.diagonal(found.covariance))
        errors.append([(found.shift - 1e-4) / u[0], (found.scale - 1e-3) / u[1]])
        spread, k = band_factor(found.spread)
        outside += bool((np.abs(found.difference) > k * spread).any())
    rms = np.sqrt(np.mean(np.square(errors), axis=0))
    assert np.all(np.abs(rms - 1) < 3 / np.sqrt(300)), rms
    # 5 % of 150, within three standard deviations
    assert 1 <= outside <= 15


def test_common_errors_cancel():
    line = line_of(SOFT)
    gain = 4e-4 * line.b
    shared = replace(line, covariance=np.outer(gain, gain) + 1e-12 * np.eye(163))
    apart = align(Pair(shared, shared), S, 0.0)
    together = align(Pair(shared, shared, CommonErrors(gain[:, None], gain[:, None])), S, 0.0)
    assert np.sqrt(apart.covariance[1, 1]) == pytest.approx(4e-4 * np.sqrt(2), rel=1e-3)
    assert np.sqrt(together.covariance[1, 1]) < 1e-6


def test_the_offset_of_the_stage_is_no_shift_that_a_fit_could_tell():
    # without the correction the shift's u is far smaller, the more so the coarser knots are
    for knots, most in ((0.006, 0.99), (0.012, 0.3)):
        maps = [map_of(SOFT, seed, knots=knots) for seed in (1, 2)]
        lines = [position_errors(one, 0).line for one in maps]
        pair = Pair(*lines, moves=tuple(position_errors(m, 0) for m in maps))
        s = np.linspace(-0.39, 0.39, 66)
        u = np.sqrt(align(pair, s, 0.0).covariance[0, 0])
        assert u == pytest.approx(np.sqrt(2) * STAGE.u_offset, rel=0.05)
        bare = align(replace(pair, moves=(None, None)), s, 0.0).covariance
        assert np.sqrt(bare[0, 0]) < most * u


def test_position_errors_keep_the_size_of_the_uncertainty():
    one = position_errors(plain_map(), 0)
    s = np.linspace(-0.39, 0.39, 131)
    rows = one.line.spline.field_rows(s)
    held = rows @ one.line.covariance @ rows.T
    corrected = held + one.correction(rows, s)
    assert np.linalg.eigvalsh(corrected).min() > -1e-12 * np.linalg.eigvalsh(corrected).max()
    np.testing.assert_allclose(np.diagonal(corrected), np.diagonal(held), rtol=0.25)


def test_what_does_not_determine_a_shift_is_refused():
    flat = line_of(Uniform(0.5), np.eye(163) * 1e-5)
    for other in (line_of(Uniform(0.5)), line_of(Uniform(0.0))):
        with pytest.raises(RefusedError) as caught:
            align(Pair(flat, other), S, 0.0)
        assert caught.value.code == "not-aligned"


def test_the_factor_of_independent_points():
    # the largest of n independent |normals|: (2 Phi(k) - 1)^n = 0.95
    from scipy.stats import norm

    for n in (1, 10, 100):
        k = band_factor(np.diag(np.linspace(1, 2, n)))[1]
        assert k == pytest.approx(norm.ppf(0.5 * (1 + 0.95 ** (1 / n))), rel=0.02)


def test_points_that_move_together_count_once():
    u, k = band_factor(np.full((50, 50), 4.0))
    np.testing.assert_allclose(u, 2.0)
    assert k == pytest.approx(1.96, rel=0.03)


def test_the_same_profiles_give_the_same_digits():
    line = line_of(TanhMagnet(0.5, 0.3, 0.02), np.eye(163) * 1e-5)
    assert isinstance(line, FieldLine)
    pair = Pair(line, line_of(SOFT))
    first, again = (band_factor(align(pair, S, 0.0).spread) for _ in range(2))
    np.testing.assert_array_equal(first[0], again[0])
    assert first[1] == again[1]
