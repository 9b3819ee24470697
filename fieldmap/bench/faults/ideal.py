"""Could anything have revealed a fault? The statistic of an ideal observer.

A fault displaces the readings by Δ, noise-free. What is left of Δ after the unknowns (field,
drifts, gains, ...) have taken what they can explain, within what is known of them beforehand,
counted in standard deviations of the noise, is

    z = sqrt(Δᵀ P Δ),   P = C⁻¹ - C⁻¹ A V Aᵀ C⁻¹

with C the noise, A the design and V the posterior covariance of the unknowns. It is the
non-centrality of the most powerful test for a displacement of exactly that shape (E. L. Lehmann
and J. P. Romano, Testing Statistical Hypotheses, 2005, 3.2): a fault below some z no test can
reveal at that rate of false alarms, whatever it looks for.

The smoothness stands among what is known beforehand, but it knows one field only, this one. Another
magnet may well be stronger, longer, elsewhere, or have a fringe elsewhere; so a change of the field
that is one of these costs nothing, and z is the least over them.

Δ is the change of readings less what the claimed positions and probes would read. So a wrong
position or a wrong probe counts like wrong flux, to first order in the fault.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.bench.faults import inject
from fieldmap.bench.faults.setting import strength
from fieldmap.bench.response import flux
from fieldmap.errors import FieldmapError
from fieldmap.estimate.bins import pass_starts
from fieldmap.estimate.map import map_lines
from fieldmap.estimate.noise import total
from fieldmap.estimate.normal import NormalSystem
from fieldmap.estimate.provenance import (
    line_reference_numbers,
    map_evidence,
    map_joint,
    map_unknowns,
)
from fieldmap.readings.passes import FlipReference, PointReference, ZeroReference

if TYPE_CHECKING:
    from collections.abc import Mapping

    import xarray as xr

    from fieldmap.bench.faults.setting import Faulty, Setting
    from fieldmap.bench.sources import Source
    from fieldmap.estimate.fieldline import FieldLine
    from fieldmap.readings.passes import Campaign, Floats, Reference

__all__ = ["REVEALABLE", "Observer"]

REVEALABLE: Final = 7.0
"""Below this z no test reveals a fault at a false-alarm rate as low as the kit's."""


LINEAR: Final = 1e-6  # of all squares of a displacement: where less is left, no more is known of it
_MOVED: Final = (0.01, 0.1, 0.25, 0.5, 1.0)  # gaps; far below one any step does as well
_STRETCHED: Final = dict(zip(_MOVED, (1e-4, 1e-3, 1e-2, 3e-2, 0.1), strict=True))


class Observer:
    """Knows a campaign without its fault, and all that its readings can tell.

    Parameters
    ----------
    setting : Setting
        The campaign without the fault.
    fmap : xarray.Dataset
        From `stitch`, of that campaign.
    """

    def __init__(self, setting: Setting, fmap: xr.Dataset) -> None:
        joints = [_drifts(fmap, number) for number in range(len(map_lines(fmap)))]
        drifts = {name: rate for one in joints for name, rate in one.items()}
        self.setting = setting.quiet(drifts)
        self.lines = [_Line(self.setting, fmap, number, one) for number, one in enumerate(joints)]

    def statistic(self, key: str, severity: int, rng: np.random.Generator) -> float:
        """How far a fault stands out, in standard deviations; infinite if the tables show it.

        Parameters
        ----------
        key : str
            Kind of the fault.
        severity : int
            1 to 5.
        rng : numpy.random.Generator
            In the state in which it put the fault into the campaign.

        Returns
        -------
        float
        """
        try:
            faulty = inject(self.setting, key, severity, rng)
        except FieldmapError:
            return float("inf")
        if faulty is None:
            return 0.0
        if faulty.structural:
            return float("inf")
        with np.errstate(all="ignore"):
            squares = [line.square(faulty) for line in self.lines]
        found = float(np.sqrt(max(sum(squares), 0.0)))
        return found if np.isfinite(found) else float("inf")


def _drifts(fmap: xr.Dataset, number: int) -> dict[str, float]:
    """Drift rate that was found for each pass of a line, V s/s."""
    unknowns = map_unknowns(fmap, number)
    values = map_joint(fmap, number).values[-len(unknowns) or None :]
    return {
        one.where: one.sd * value
        for one, value in zip(unknowns, values.tolist(), strict=False)
        if one.kind == "drift"
    }


class _Line:
    """One line of the map: its evidence, factored."""

    def __init__(
        self, setting: Setting, fmap: xr.Dataset, number: int, drifts: Mapping[str, float]
    ) -> None:
        self.setting = setting
        self.drifts = drifts
        line = map_lines(fmap)[number]
        self.step = line.spline.spacing / 2
        self.evidence = map_evidence(fmap, number)
        self.numbers = line_reference_numbers(fmap, number)
        passes = enumerate(setting.campaign.passes)
        self.passes = [i for i, one in passes if (one.x, one.y) == (line.x, line.y)]
        self.noise = total(self.evidence.noise)
        self.smoothness = self.evidence.smoothness(recorded=True).rows
        rows = self.evidence.references
        squares = self.evidence.squares(recorded=True).matrix
        self.normal = squares + self.smoothness.T @ self.smoothness - rows.T @ rows
        self.factored: dict[tuple[float, ...], NormalSystem] = {}
        self.others = other_fields(line, setting.gap)
        self.clean = [_unexplained(setting, setting.campaign, i) for i in self.passes]

    def square(self, faulty: Faulty) -> float:
        """What no choice of the unknowns explains, squared."""
        evidence = self.evidence
        moved = np.concatenate([self._increments(faulty, k) for k in range(len(self.passes))])
        stiffer, offsets = self._references(faulty)
        references = evidence.references * stiffer[:, None]
        weighed = self.noise.solve(moved)
        system = self._system(stiffer, references)
        explained = system.solve(evidence.design.T @ weighed + references.T @ offsets)
        left = moved - evidence.design @ explained
        told = left @ self.noise.solve(left) + np.sum((offsets - references @ explained) ** 2)
        told += np.sum(explained[evidence.size :] ** 2)
        told += self._roughness(system, self.smoothness @ explained)
        whole = float(moved @ weighed + offsets @ offsets)
        return float(told) if told > LINEAR * whole else 0.0

    def _roughness(self, system: NormalSystem, rough: Floats) -> float:
        """What the smoothness adds, less the most that another plausible field takes off all."""
        most = 0.0
        for fields in self.others:
            judged = self.smoothness[:, : self.evidence.size] @ fields
            shared = self.smoothness.T @ judged
            free = judged.T @ judged - shared.T @ system.solve(shared)
            # columns that the readings know as well as the smoothness does free nothing
            values, turned = np.linalg.eigh(free)
            some = values > 1e-9 * values.max(initial=0.0)
            gained = (turned.T @ (judged.T @ rough))[some]
            most = max(most, float(np.sum(gained**2 / values[some])))
        return float(rough @ rough) - most

    def _system(self, stiffer: Floats, references: Floats) -> NormalSystem:
        """The normal equations with the references as claimed, factored."""
        key = tuple(stiffer.tolist())
        if key not in self.factored:
            if len(self.factored) > 1:
                self.factored.popitem()  # one that is asked for once
            self.factored[key] = NormalSystem(self.normal + references.T @ references)
        return self.factored[key]

    def _increments(self, faulty: Faulty, k: int) -> Floats:
        """Displacement of one pass, as increments of the bin means of the fault-free pass."""
        index = self.passes[k]
        own, now = self.setting.campaign.passes[index], faulty.campaign.passes[index]
        starts = pass_starts(own, self.step)
        if now is own:
            return np.zeros(len(starts) - 1)
        clean = np.arange(len(own.time))
        rows = faulty.rows.get(own.name, clean)
        moved = _unexplained(self.setting, faulty.campaign, index) - self.clean[k][rows]
        drift = self.drifts.get(own.name, own.integrator.drift)
        moved -= drift * ((now.time - now.time[0]) - (own.time[rows] - own.time[0]))
        known, last = np.unique(rows[::-1], return_index=True)  # of a repeated row the last one
        everywhere = np.interp(clean, known, moved[::-1][last])
        count = np.diff(np.append(starts, len(clean)))
        return np.diff(np.add.reduceat(everywhere, starts) / count)

    def _references(self, faulty: Faulty) -> tuple[Floats, Floats]:
        """How much more each reference claims to know, and its displacement, whitened."""
        stiffer, offsets = np.ones(len(self.numbers)), np.zeros(len(self.numbers))
        source = self.setting.source_of(self.setting.campaign.passes[self.passes[0]])
        for i, number in enumerate(self.numbers):
            own = self.setting.campaign.references[number - 1]
            now = faulty.campaign.references[number - 1]
            if now is not own:
                stiffer[i] = _u(own) / _u(now)
                offsets[i] = _off(now, source) - _off(own, source)
        return stiffer, offsets


def other_fields(line: FieldLine, gap: float) -> list[Floats]:
    """Changes of the field to that of another magnet of its kind, several columns a set.

    Parameters
    ----------
    line : FieldLine
        The field.
    gap : float
        Full gap or bore, m.

    Returns
    -------
    list of (size, k) array
        Coefficients of B, T: stronger everywhere, with either end moved, or moved and stretched.
    """
    from scipy.interpolate import CubicSpline

    at = line.spline.middles()
    curve = CubicSpline(at, line.b)
    centre = float(np.sum(at * line.b**2) / np.sum(line.b**2))

    def elsewhere(moved: Floats) -> Floats:
        return np.asarray(curve(np.clip(moved, at[0], at[-1])) - line.b)

    found: list[Floats] = []
    halves: tuple[list[Floats], list[Floats]] = [line.b], [line.b]
    for share in _MOVED:
        for sign in (1.0, -1.0):
            change = elsewhere(at - sign * share * gap)
            low, high = np.where(at < centre, change, 0.0), np.where(at >= centre, change, 0.0)
            longer = elsewhere(centre + (at - centre) * (1.0 - sign * _STRETCHED[share]))
            softer = np.where(at < centre, longer, 0.0), np.where(at >= centre, longer, 0.0)
            found.append(np.column_stack([line.b, low, high]))
            found.append(np.column_stack([line.b, low, high, *softer]))
            halves[0].extend((low, softer[0]))
            halves[1].extend((high, softer[1]))
    # one half alone moved and stretched by anything in between
    found += [np.column_stack(half) for half in halves]
    return found


def _unexplained(setting: Setting, campaign: Campaign, index: int) -> Floats:
    """Flux of a pass less what is claimed of it would read in the true field, V s."""
    one = campaign.passes[index]
    linked = setting.linked(index, one.probe, one.position)
    return one.flux - linked * strength(one, campaign.magnet.current)


def _u(ref: Reference) -> float:
    return ref.u_flux_change if isinstance(ref, FlipReference) else ref.u


def _off(ref: Reference, source: Source) -> float:
    """A reference less what is claimed of it would read in the true field, in its u."""
    if isinstance(ref, PointReference):
        return (ref.field - float(source.field(ref.at))) / ref.u
    if isinstance(ref, ZeroReference):
        return -source.between(ref.start, ref.stop) / (ref.stop - ref.start) / ref.u
    linked = float(flux(source, ref.probe, ref.at))
    return (ref.flux_change - 2.0 * linked) / ref.u_flux_change
