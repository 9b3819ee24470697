"""What trials say of a stated uncertainty, in numbers and in words."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from fieldmap.bench.confirmation import Confirmation, confirmed
from fieldmap.magnet.quantity import Quantity
from fieldmap.show.confirmation import confirmation_html, confirmation_shown, confirmation_text

U = 1e-4


def trials(count=100, spread=1.0, off=0.0, seed=1, unit="m"):
    """Errors of exactly this spread and mean, in u."""
    errors = np.random.default_rng(seed).standard_normal(count)
    errors = (errors - errors.mean()) / errors.std(ddof=1)
    return confirmed("magnetic_length", 0, Quantity(0.4, U, unit), U * (spread * errors + off))


def test_numbers():
    one = trials(spread=1.1, off=0.1)
    assert (one.trials, one.value, one.u, one.unit) == (100, 0.4, U, "m")
    assert one.ratio == pytest.approx(1.1)
    assert one.bias == pytest.approx(1e-5)
    assert one.mean == pytest.approx(0.40001)
    assert -3 * U < one.interval[0] < -1.5 * U
    assert 1.5 * U < one.interval[1] < 3 * U
    assert 0.9 < one.covered < 1.0


@pytest.mark.parametrize("count", [30, 100, 1000])
def test_bounds_are_those_of_chi_square(count):
    # chi-square by the cube root that is nearly normal: E. B. Wilson & M. M. Hilferty, Proc. Natl.
    # Acad. Sci. 17, 684, 1931 (memory); 99.9 % of a normal distribution lie within 3.2905
    part = 2 / (9 * (count - 1))
    low, high = ((1 - part + z * math.sqrt(part)) ** 1.5 for z in (-3.2905, 3.2905))
    assert trials(count).allowed_ratio == pytest.approx((low, high), abs=4e-3)


def test_bounds_of_the_mean():
    assert trials(1000).allowed_bias == pytest.approx(3.2905 * U / math.sqrt(1000), rel=5e-3)
    assert trials(10).allowed_bias == pytest.approx(4.781 * U / math.sqrt(10), rel=1e-3)  # t, 9


@pytest.mark.parametrize(
    ("spread", "off", "holds", "good", "words"),
    [
        (1.0, 0.0, True, True, "the linear figure holds: 100 trials spread 1.00 times u, where"),
        (1.2, 0.3, True, True, "the linear figure holds"),
        (1.4, 0.0, False, False, "not good enough: 100 trials spread 1.40 times u, where chance"),
        (0.5, 0.0, False, True, "the linear figure is on the safe side: 100 trials spread 0.50"),
        (1.0, 0.5, False, False, "lie 5e-05 m off in the mean, where chance allows 3.4e-05; corr"),
    ],
)
def test_verdicts_on_the_linear_figure(spread, off, holds, good, words):
    one = trials(spread=spread, off=off)
    assert (one.linear_holds, one.good_enough) == (holds, good)
    assert words in one.sentence
    assert one.sentence.endswith(".")


def test_what_to_use_instead():
    assert trials(spread=1.4).proposed_u == pytest.approx(1.4 * U)
    assert trials(spread=0.5).proposed_u == U
    assert trials(spread=1.4, off=1.0).proposed_u == pytest.approx(math.hypot(1.4, 1.0) * U)
    assert "use u = 0.00014 m instead" in trials(spread=1.4).sentence
    assert "use u = 0.00014 instead" in trials(spread=1.4, unit="1").sentence


def test_right_figures_are_hardly_ever_called_wrong():
    rng = np.random.default_rng(3)
    stated = Quantity(0.4, U, "m")
    wrong = sum(
        not confirmed("r", 0, stated, U * rng.standard_normal(30)).linear_holds for _ in range(1000)
    )
    assert wrong <= 9  # 2 in a thousand are expected


def test_a_result_without_uncertainty():
    exact = confirmed("r", 0, Quantity(0.4, 0.0, "m"), np.zeros(20))
    assert exact.linear_holds
    scattered = confirmed("r", 0, Quantity(0.4, 0.0, "m"), 1e-3 * np.arange(-10.0, 11.0))
    assert not scattered.good_enough
    assert "not good enough" in scattered.sentence


@pytest.fixture
def several():
    results = (
        trials(),
        replace(trials(spread=0.5), key="tail_in"),
        replace(trials(spread=1.5), key="homogeneity", unit="1", value=2e-4),
    )
    return Confirmation("Magnet <3>\n", 103, ("no field", "no field", "no flat"), results)


def test_all_results_together(several):
    assert several["tail_in"].key == "tail_in"
    with pytest.raises(KeyError):
        several["nothing"]
    assert (several.linear_holds, several.good_enough) == (False, False)
    safe = replace(several, results=several.results[:2])
    assert (safe.linear_holds, safe.good_enough) == (False, True)
    assert several.refused == (
        "103 trials, 3 of them refused and left out, the first with: no field"
    )
    assert replace(several, refusals=()).refused == "103 trials, none refused."


def test_text(several):
    text = confirmation_text(several)
    assert max(map(len, text.splitlines())) <= 100
    lines = text.splitlines()
    assert lines[0] == "Trials of the whole chain: Magnet <3> "
    row = next(line for line in lines if line.startswith("Magnetic length"))
    assert row.split()[:6] == ["Magnetic", "length", "400.00", "0.10", "mm", "1.00"]
    flat = " ".join(text.split())
    assert flat.index("Homogeneity: not good enough") < flat.index("Tail in: the linear figure is")
    assert "Magnetic length:" not in flat
    assert confirmation_text(replace(several, results=several.results[:1])).endswith(
        "The linear uncertainties hold for all results."
    )


def test_html(several):
    html = confirmation_html(several)
    assert "<caption>Trials of the whole chain: Magnet &lt;3&gt; </caption>" in html
    assert '<tr data-key="tail_in"><th scope="row">Tail in</th>' in html
    assert "<li>Homogeneity: not good enough" in html
    shown = confirmation_shown(several)
    assert (shown.text, shown.html) == (confirmation_text(several), html)


def test_lines_are_told_apart(several):
    two = replace(several, results=(trials(), replace(trials(spread=2.0), line=1)))
    assert "Magnetic length, line 2: not good enough" in " ".join(confirmation_text(two).split())
