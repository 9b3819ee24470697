"""How rare a number must be before it is said."""

from __future__ import annotations

import math

import pytest

from fieldmap.estimate.findings.thresholds import FAMILY_SHARE, beyond, rarity


@pytest.mark.parametrize("count", [1, 7, 1000, 10**6])
def test_all_that_a_family_looks_at_shares_its_rate(count):
    # the normal distribution by the C library's erfc, not by scipy
    alone = math.erfc(beyond(count) / math.sqrt(2))
    assert count * alone == pytest.approx(FAMILY_SHARE, rel=1e-6)


def test_nothing_to_look_at():
    assert beyond(0) == beyond(1)
    assert rarity(5.0, 0) == 0.0


@pytest.mark.parametrize(
    # 0.1 % points of χ²: NIST/SEMATECH e-Handbook of Statistical Methods, 1.3.6.7.4
    ("freedom", "chi_square"),
    [(1, 10.828), (2, 13.816), (10, 29.588), (30, 59.703), (100, 149.449)],
)
def test_a_chi_square_as_rare_as_a_normal(freedom, chi_square):
    assert rarity(chi_square, freedom) == pytest.approx(3.2905, abs=2e-4)


def test_the_far_tail_does_not_underflow():
    near, far, farther = (rarity(x, 10) for x in (1400, 1500, 1e5))
    assert near < far < farther
    assert far - near == pytest.approx((1500 - 1400) / (2 * 37), rel=0.1)  # dz = dχ²/2z
    assert math.isfinite(farther)
