"""Error of the integrated field against the Cramér-Rao bound, wire passes with known noise.

Source: C. R. Rao, Bull. Calcutta Math. Soc. 37, 81 (1945); H. Cramér, Mathematical Methods of
Statistics (1946); with priors on the drifts, H. L. Van Trees, Detection, Estimation and
Modulation Theory I (1968), 2.4. In a linear Gaussian model generalised least squares attains it.

The bound is taken from the full covariance of the single readings, walk and read noise, and
leaves the field free at every position where the probe read: no smoothness is assumed. The two
passes read at the same positions, so the bound is as tight as it gets.
"""

from __future__ import annotations

import os
from dataclasses import dataclass

import numpy as np
import pytest

from fieldmap.bench.sources import TanhMagnet
from fieldmap.estimate import map_lines, stitch
from fieldmap.readings import Axis, Campaign, Integrator, Magnet, Wire, make_pass

MAGNET = TanhMagnet(0.5, length=0.2, lam=0.03 / np.pi)
WIRE = Wire("wire", turns=20, active_length=0.05)
RATE, WALK, READ, U_DRIFT = 40.0, 2e-7, 1e-7, 3e-7
MAIN = Integrator("main", walk_noise=WALK, read_noise=READ, u_drift=U_DRIFT)
END = 0.25
LIMITS = {"between the dwells": (-END, END), "between moving readings": (-0.2, 0.2)}
SAMPLE = os.environ.get("FIELDMAP_STUDY", "whole") == "sample"
CAMPAIGNS = 200 if SAMPLE else 500


def motion(dwell, moving=301):
    """Standing, moving evenly, standing again."""
    return np.concatenate(
        [np.full(dwell, -END), np.linspace(-END, END, moving).round(12), np.full(dwell, END)]
    )


@dataclass(frozen=True)
class Trial:
    """Two passes, out and back, and the best linear estimate that their readings allow."""

    dwell: int

    @property
    def motions(self):
        out = motion(self.dwell)
        return out, out[::-1]

    def noise_root(self):
        """Cholesky factor of the covariance of the readings of one pass."""
        time = np.arange(len(self.motions[0])) / RATE
        C = WALK**2 * np.minimum.outer(time, time) + READ**2 * np.eye(len(time))
        return np.linalg.cholesky(C)

    def best(self, low, high):
        """Weights of all readings in the best estimate of the integral, and its uncertainty."""
        places = np.unique(self.motions[0])
        count, root = len(places), self.noise_root()
        blocks, goals = [], []
        for k, position in enumerate(self.motions):
            n = len(position)
            design = np.zeros((n, count + 4))
            design[np.arange(n), np.searchsorted(places, position)] = WIRE.gain
            design[:, count + k] = 1.0  # the constant of the pass
            design[:, count + 2 + k] = np.arange(n) / RATE  # its drift
            blocks.append(np.linalg.solve(root, design))
            goals.append(np.linalg.inv(root))
        prior = np.zeros((2, count + 4))
        prior[0, count + 2] = prior[1, count + 3] = 1 / U_DRIFT
        A = np.vstack([*blocks, prior])
        A = np.delete(A, 0, axis=1)  # F is zero at the first place: a constant is free anyway
        row = np.zeros(count + 4)
        row[np.searchsorted(places, high)] += 1.0
        row[np.searchsorted(places, low)] -= 1.0
        weights = row[1:] @ np.linalg.pinv(A)
        n = len(self.motions[0])
        whitening = np.zeros((2 * n, 2 * n))
        whitening[:n, :n], whitening[n:, n:] = goals
        return weights[: 2 * n] @ whitening, float(np.linalg.norm(weights))

    def readings(self, rng):
        """Flux of both passes with walk, read noise and drift."""
        root = self.noise_root()
        drawn = []
        for position in self.motions:
            time = np.arange(len(position)) / RATE
            noise = root @ rng.standard_normal(len(position))
            drift = U_DRIFT * rng.standard_normal() * time
            drawn.append(WIRE.gain * MAGNET.integral(position) + noise + drift)
        return drawn

    def mapped(self, fluxes):
        """The kit's estimate."""
        passes = tuple(
            make_pass(position, flux, rate=RATE, probe=WIRE, integrator=MAIN, name=name)
            for name, position, flux in zip(("out", "back"), self.motions, fluxes, strict=True)
        )
        axis = Axis("z", (-END, END), (-0.02, 0.02))
        campaign = Campaign("trial", Magnet("dipole", "By", 0.03), axis, passes=passes)
        (line,) = map_lines(stitch(campaign, knot_spacing=0.004))
        return line


def test_the_bound_by_hand():
    # one reading at each end, no drift to speak of, two passes: each difference has the variance
    # walk² T + 2 read², and two of them are averaged
    trial = Trial(dwell=0)
    time = (len(trial.motions[0]) - 1) / RATE
    _, bound = trial.best(*LIMITS["between the dwells"])
    alone = np.sqrt(WALK**2 * time + 2 * READ**2 + (U_DRIFT * time) ** 2)
    # the drift is common to all stretches of a pass and opposite for the way back; readings on
    # the way add nothing where the field is free
    assert 0.5 * alone < bound < alone
    steady = np.sqrt((WALK**2 * time + 2 * READ**2) / 2)
    assert bound > steady


@pytest.mark.parametrize("dwell", [0, 80, 400])
def test_stated_uncertainty_is_not_above_the_bound(dwell):
    trial = Trial(dwell)
    line = trial.mapped(trial.readings(np.random.default_rng(1)))
    for name, (low, high) in LIMITS.items():
        _, bound = trial.best(low, high)
        u = line.integral(low, high)[1]
        print(f"dwell {dwell / RATE:.0f} s, {name}: u / bound = {u / bound:.3f}")
        assert u < 1.05 * bound
        # what smoothness may add at most: the noise of single readings averaged away
        assert u > 0.5 * bound


@pytest.mark.slow
@pytest.mark.parametrize("dwell", [80] if SAMPLE else [80, 400])
def test_error_of_the_integrated_field_attains_the_bound(dwell):
    trial = Trial(dwell)
    best = {name: trial.best(*ends) for name, ends in LIMITS.items()}
    rng = np.random.default_rng(20_260)
    errors = {name: [] for name in LIMITS}
    for _ in range(CAMPAIGNS):
        fluxes = trial.readings(rng)
        line = trial.mapped(fluxes)
        for name, (low, high) in LIMITS.items():
            true = MAGNET.between(low, high)
            weights, _ = best[name]
            linear = float(weights @ np.concatenate(fluxes))
            value, u = line.integral(low, high)
            errors[name].append((value - true, linear - true, u))
    for name, rows in errors.items():
        kit, linear, u = np.array(rows).T
        bound = best[name][1]
        rms = np.sqrt(np.mean(kit**2)) / bound, np.sqrt(np.mean(linear**2)) / bound
        in_u = np.sqrt(np.mean((kit / u) ** 2))
        print(
            f"dwell {dwell / RATE:.0f} s, {name}: rms error / bound {rms[0]:.3f}, "
            f"of the best linear estimate {rms[1]:.3f}; error / u {in_u:.3f}"
        )
        assert abs(rms[1] - 1) < 3 / np.sqrt(2 * CAMPAIGNS)  # the bound is the right one
        assert rms[0] < 1.05 + (3 / np.sqrt(2 * CAMPAIGNS) if SAMPLE else 0.0)
        assert rms[0] < 1.02 * rms[1]  # on the same draws
        assert abs(in_u - 1) < 3 / np.sqrt(2 * CAMPAIGNS)
