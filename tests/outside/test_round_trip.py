"""Closed forms through the whole chain: simulated readings in, the textbook's number out.

The formulas are those of the sources (tests/outside/test_closed_forms.py checks them against
the textbooks); the shares of the solenoid's integral are design figures recomputed there.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.constants import mu_0

from fieldmap.bench.bench_errors import Errors
from fieldmap.bench.sources import Block, Loop, Plates, Solenoid, TanhMagnet
from fieldmap.estimate import map_lines, stitch
from fieldmap.magnet import evaluate
from fieldmap.readings import Axis, Coil, Magnet, PointReference, Stage, Wire
from tests.shop import MAIN, measured, planned, truth

QUIET = replace(MAIN, read_noise=2e-9, walk_noise=5e-9, u_drift=1e-9, resolution=0.0)
WIRE = Wire("wire", turns=20, active_length=0.05)
COIL = Coil("coil", "rectangular", effective_area=0.3, window=0.01)
ROUND = Coil("round", "round", effective_area=0.3, window=0.01)

CASES = {
    # source, half travel, gap, bound on the relative error of each result
    "tanh magnet": (TanhMagnet(0.5, length=0.3, lam=0.01), 0.4, 0.03, 2e-6),
    "solenoid": (Solenoid(radius=0.05, length=0.3, turns=500, current=40.0), 0.6, 0.1, 2e-6),
    "loop": (Loop(radius=0.1, current=5e3), 0.5, 0.2, 3e-5),
    "block": (Block(1.2, width=0.04, height=0.02, length=0.1, y=0.025), 0.2, 0.03, 1e-5),
    "edge of plates": (Plates(0.8, gap=0.04), 0.3, 0.04, 1e-5),
}


def campaign_of(name, probe):
    source, half, gap, _ = CASES[name]
    rng = np.random.default_rng(1)
    level = PointReference(0.0, float(source.field(0.0)) + 1e-7 * rng.normal(), 1e-7)
    return measured(
        planned((-half, half), (half, -half), probe=probe, integrator=QUIET, rate=100.0),
        [] if isinstance(probe, Wire) else [level],
        source=source,
        axis=Axis("z", (-0.9 * half, 0.9 * half), (-0.1 * half, 0.1 * half)),
        magnet=Magnet("other", "By", gap=gap),
        stage=Stage(),
        errors=Errors(),
    )


@pytest.mark.parametrize("probe", [WIRE, COIL, ROUND], ids=lambda p: p.name)
@pytest.mark.parametrize("name", CASES)
def test_results_are_those_of_the_closed_form(name, probe):
    source, half, gap, bound = CASES[name]
    campaign = campaign_of(name, probe)
    fmap = stitch(campaign, knot_spacing=gap / 25)
    results = evaluate(fmap, campaign)
    for key, value in truth(source, campaign.axis).items():
        found = results[key]
        assert abs(found.value - value) < 3 * found.u, key
        assert found.value == pytest.approx(value, rel=bound), key
    (line,) = map_lines(fmap)
    z = np.linspace(-0.95 * half, 0.95 * half, 191)
    peak = np.abs(source.field(z)).max()
    assert np.abs(line.field(z) - source.field(z)).max() < 3e-4 * peak


def test_share_of_a_solenoid_within_the_scan():
    # R = 0.1 m, L = 0.4 m: 2.280 % of mu0 N I lies beyond ± 0.5 m (design figure)
    solenoid = Solenoid(radius=0.1, length=0.4, turns=500, current=10.0)
    campaign = measured(
        planned((-0.52, 0.52), (0.52, -0.52), probe=WIRE, integrator=QUIET, rate=50.0),
        source=solenoid,
        axis=Axis("z", (-0.5, 0.5), (-0.01, 0.01)),
        magnet=Magnet("solenoid", "Bz", gap=0.2),
        stage=Stage(),
        errors=Errors(),
    )
    found = evaluate(stitch(campaign, knot_spacing=0.01), campaign)["integrated_field"]
    total = mu_0 * 500 * 10.0  # Ampère
    assert 1 - found.value / total == pytest.approx(2.280e-2, abs=1e-5)
    assert found.u < 1e-5 * total


def test_the_integral_of_a_field_without_end_is_that_between_the_limits():
    # the total of the plates diverges; what is given is the integral between the limits alone
    plates = Plates(0.8, gap=0.04)
    assert plates.total == np.inf
    campaign = campaign_of("edge of plates", WIRE)
    fmap = stitch(campaign, knot_spacing=0.003)
    for low, high in ((-0.2, 0.1), (-0.1, 0.25)):
        axis = Axis("z", (low, high), (-0.1, -0.05))
        results = evaluate(fmap, axis=axis)
        assert results["integrated_field"].value == pytest.approx(
            plates.between(low, high), rel=1e-5
        )
        assert np.isfinite(results["integrated_field"].u)
        assert "total" not in results.lines[0].results


def test_polarity_and_direction_of_the_closed_form():
    source = TanhMagnet(-0.5, length=0.3, lam=0.01)
    campaign = measured(
        planned((0.4, -0.4), probe=replace(WIRE, polarity=-1), integrator=QUIET, rate=100.0),
        source=source,
        stage=Stage(),
        errors=Errors(),
    )
    results = evaluate(stitch(campaign, knot_spacing=0.002), campaign)
    assert results["integrated_field"].value == pytest.approx(-0.15, rel=2e-6)
    assert results["magnetic_length"].value == pytest.approx(0.3, rel=1e-5)
