"""Trials of the whole chain, on small campaigns."""

from __future__ import annotations

import os
import sys
from concurrent.futures.process import BrokenProcessPool
from dataclasses import replace

import numpy as np
import pytest

import fieldmap.bench.trials as module
from fieldmap.bench import workers
from fieldmap.bench.bench_errors import Errors
from fieldmap.bench.trials import confirm
from fieldmap.bench.twin import record
from fieldmap.errors import InputError, RefusedError
from fieldmap.estimate import stitch
from fieldmap.magnet import evaluate
from fieldmap.magnet.quantity import Quantity
from fieldmap.magnet.results import LineResults
from fieldmap.readings import Limit, PointReference, ZeroReference
from tests.shop import DIPOLE, RECT, measured, out_and_back, plan, planned

MAIN_RESULTS = ("integrated_field", "central_field", "magnetic_length", "magnetic_centre")


@pytest.fixture(scope="module")
def shop():
    campaign = measured(out_and_back(rate=20.0), [PointReference(0.0, 0.5, 2e-5)], seed=2)
    campaign = replace(campaign, limits=(Limit("fringe_integral_in", None, 1e9),))
    return campaign, stitch(campaign, knot_spacing=0.01)


@pytest.fixture(scope="module")
def confirmation(shop):
    told = []
    found = confirm(*shop, trials=20, workers=1, tell=told.append)
    assert told[::19] == ["trial 1 of 20", "trial 20 of 20"]
    return found


def with_u(results, factor):
    """The results with another uncertainty."""
    lines = [
        LineResults(
            line.x,
            line.y,
            {key: Quantity(q.value, q.u * factor, q.unit) for key, q in line.results.items()},
        )
        for line in results.lines
    ]
    return replace(results, lines=tuple(lines))


def test_the_stated_uncertainties_are_confirmed(shop, confirmation):
    results = evaluate(shop[1], replace(shop[0], limits=()), fringe=False)
    for key in MAIN_RESULTS:
        one = confirmation[key]
        assert (one.value, one.u, one.unit) == (
            results[key].value,
            results[key].u,
            results[key].unit,
        )
        assert one.linear_holds, one.sentence
        assert one.trials == 20
    assert confirmation.refusals == ()
    assert {one.key for one in confirmation.results} == set(results.lines[0].results)


@pytest.mark.parametrize(
    ("factor", "good", "words"), [(0.4, False, "not good enough"), (3.0, True, "safe side")]
)
def test_wrong_uncertainties_are_found_out(shop, factor, good, words):
    results = with_u(evaluate(shop[1], replace(shop[0], limits=()), fringe=False), factor)
    found = confirm(*shop, results, trials=20, workers=1)
    for key in MAIN_RESULTS:
        assert (found[key].linear_holds, found[key].good_enough) == (False, good)
        assert words in found[key].sentence


@pytest.mark.slow
def test_the_number_of_workers_changes_nothing(shop):
    alone, together = (confirm(*shop, trials=6, workers=count) for count in (1, 2))
    assert alone == together


def test_the_seed_does(shop):
    first, other = (confirm(*shop, trials=5, workers=1, seed=seed) for seed in (1, 2))
    assert first["central_field"].sd != other["central_field"].sd


def test_a_level_from_vanishing_field_is_compared_with_its_own_truth():
    zeros = (ZeroReference(0.36, 0.4, 1e-4),)
    campaign = measured(out_and_back(RECT, rate=20.0), zeros, seed=9)
    found = confirm(campaign, stitch(campaign, knot_spacing=0.01), trials=20, workers=1)
    for key in ("integrated_field", "central_field"):
        # the level makes up nearly all of u: a truth that stood still would show no spread
        assert found[key].linear_holds, found[key].sentence


def test_refused_trials_are_counted_and_left_out(shop, monkeypatch):
    calls = []

    def sometimes(*arguments, **more):
        calls.append(1)
        if len(calls) % 3 == 0:
            raise RefusedError("some-code", "pass_01.csv", "found nothing of use.")
        return stitch(*arguments, **more)

    monkeypatch.setattr(module, "stitch", sometimes)
    found = confirm(*shop, trials=9, workers=1)
    assert found.refusals == ("pass_01.csv: found nothing of use.",) * 3
    assert found["central_field"].trials == 6
    assert "9 trials, 3 of them refused" in found.refused


def test_too_few_good_trials_are_refused(shop, monkeypatch):
    def never(*_, **__):
        raise RefusedError("some-code", "pass_01.csv", "found nothing of use.")

    monkeypatch.setattr(module, "stitch", never)
    with pytest.raises(RefusedError, match="6 of 6 trials were refused, the first with: pass_01"):
        confirm(*shop, trials=6, workers=1)


def test_workers_that_end_early_are_told_of(shop, monkeypatch):
    def broken(*_):
        raise BrokenProcessPool

    monkeypatch.setattr(workers.ProcessPoolExecutor, "map", broken)
    monkeypatch.setenv("OMP_NUM_THREADS", "7")
    main = sys.modules["__main__"]
    with pytest.raises(RefusedError, match="call confirm with workers=1"):
        confirm(*shop, trials=5, workers=2)
    # environment and main module are as they were before
    assert (os.environ["OMP_NUM_THREADS"], sys.modules["__main__"]) == ("7", main)


@pytest.mark.parametrize("more", [{"trials": 4}, {"workers": 0}])
def test_refuses_arguments_out_of_range(shop, more):
    with pytest.raises(InputError, match=f"argument '{next(iter(more))}'"):
        confirm(*shop, **more)


def test_refuses_the_map_of_another_campaign(shop):
    campaign, fmap = shop
    renamed = replace(campaign, passes=tuple(replace(p, name="other") for p in campaign.passes))
    with pytest.raises(InputError, match="which is not in the map"):
        confirm(renamed, fmap, trials=5, workers=1)


def test_passes_of_one_name_are_told_apart_as_the_map_does(shop):
    campaign, _ = shop
    same = replace(campaign, passes=tuple(replace(p, name="pass") for p in campaign.passes))
    found = confirm(same, stitch(same, knot_spacing=0.01), trials=5, workers=1)
    assert np.isfinite(found["central_field"].sd)


def test_every_line_is_confirmed():
    passes = [*planned((-0.4, 0.4), rate=20.0), *planned((-0.4, 0.4), rate=20.0, x=0.02)]
    campaign = record(
        plan(passes), lambda x, _: (1 + x) * DIPOLE, np.random.default_rng(1), Errors()
    )
    found = confirm(campaign, stitch(campaign, knot_spacing=0.01), trials=5, workers=1)
    fields = [one for one in found.results if one.key == "integrated_field"]
    assert [one.line for one in fields] == [0, 1]
    assert fields[1].value / fields[0].value == pytest.approx(1.02, abs=5e-4)
