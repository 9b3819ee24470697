"""Whether the equations leave digits to results, and how what they do not determine is named."""

from __future__ import annotations

import numpy as np
import pytest

from fieldmap.errors import RefusedError
from fieldmap.estimate.condition import check_digits, lost, undetermined, weakest_unknown
from fieldmap.estimate.fit import fit_line
from fieldmap.estimate.knots import knots_for
from fieldmap.estimate.normal import Undetermined
from fieldmap.estimate.parameters import Nuisance
from fieldmap.estimate.spline import UniformSpline
from fieldmap.readings import PointReference
from tests.shop import RECT, measured, out_and_back
from tests.study.draw import draw_campaign

LINE = UniformSpline.covering(-0.2, 0.2, 0.01)
DRIFT = Nuisance("drift", "pass_01.csv", 0.0, 1e-6)


def along(values, *others):
    return np.concatenate([values, others])


@pytest.mark.parametrize(
    ("direction", "said"),
    [
        (along(np.ones(LINE.size), 0.1), "the level of the field along the line"),
        (along(np.exp(-((LINE.middles() - 0.1) ** 2) / 2e-4), 0.1), "the field near 100 mm"),
        (along(np.full(LINE.size, 0.01), 1.0), "the drift pass_01.csv"),
    ],
)
def test_a_direction_in_words(direction, said):
    assert weakest_unknown(direction, LINE, [DRIFT]) == said


@pytest.mark.parametrize(
    ("what", "remedy"),
    [
        ("the level of the field along the line", "point or flip reference"),
        ("the field near 100 mm", "scan that stretch"),
        ("the drift pass_01.csv", "dwell at each end"),
        ("the gain coil", "smaller uncertainty of it"),
    ],
)
def test_a_refusal_names_the_reading_that_is_missing(what, remedy):
    error = undetermined("pass_01.csv", what)
    assert isinstance(error, RefusedError)
    assert what in str(error)
    assert remedy in str(error)


def fitted(campaign):
    knots = knots_for(campaign.passes, -0.4, 0.4, 0.004)
    return fit_line(campaign.passes, campaign.references, campaign.stage, knots, 0.03)


def test_coil_passes_without_a_level_name_the_level():
    with pytest.raises(Undetermined) as error:
        fitted(measured(out_and_back(RECT), seed=1))
    assert error.value.what == "the level of the field along the line"


def test_usual_readings_keep_their_digits():
    fit = fitted(measured(out_and_back(RECT), [PointReference(0.0, 0.5, 1e-5)], seed=1))
    rows = np.array([fit.spline.integral_row(-0.4, 0.4)])
    assert lost(fit, rows) < 1e-5
    assert check_digits(fit, rows) == []


def test_rounding_found_by_another_order_is_what_is_said():
    campaign, _ = draw_campaign("rectangular+point", 7)
    spacing = campaign.magnet.gap / 8
    found = []
    for passes in (campaign.passes, campaign.passes[::-1]):
        low, high = campaign.axis.integrate
        knots = knots_for(passes, low, high, spacing)
        fit = fit_line(passes, campaign.references, campaign.stage, knots, campaign.magnet.gap)
        row = knots.integral_row(low, high)
        u = np.sqrt(row @ fit.covariance[: knots.size, : knots.size] @ row)
        found.append((row @ fit.values[: knots.size], u, lost(fit, row[None])))
    (one, u, said), (other, other_u, _) = found
    moved = max(abs(one - other) / u, abs(other_u / u - 1))
    assert moved < 100 * said
