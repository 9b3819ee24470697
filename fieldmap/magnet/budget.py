"""The uncertainty budget: which cause contributes how much to the uncertainty of a result.

The estimate weighs every reading, reference and prior; each of them is an independent source of
error with a stated or estimated variance. The variance that one source gives to a result is its
own variance times the square of the result's sensitivity to it, and these variances add up to
the square of the quoted uncertainty: nothing is left over, and no correlation is neglected,
because all sources are independent and everything else is computed from them.

What the readings themselves determine appears under their noise. A drift that two passes tell
well, say, contributes through the noise of those passes and not through its wide prior.

Source: JCGM 100:2008, 5.1 and 5.2; the sensitivities are those of the generalised least squares
of JCGM 102:2011 and of its smoothness prior.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.map import map_axis, map_lines, map_magnet, map_passes
from fieldmap.estimate.provenance import (
    line_reference_numbers,
    map_evidence,
    map_integrators,
    map_joint,
    map_probes,
    map_references,
    map_unknowns,
)
from fieldmap.magnet.functional import covariance
from fieldmap.magnet.functionals import line_functionals
from fieldmap.readings.probe import Wire

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    import xarray as xr

    from fieldmap.estimate.parameters import Nuisance
    from fieldmap.magnet.functional import Functional
    from fieldmap.readings.passes import Axis

__all__ = ["Budget", "Budgets", "Contribution", "budget"]

Floats = npt.NDArray[np.float64]
Evaluation = Literal["A", "B"]

NOISE_CAUSES = {"walk": "integrator walk", "read": "read noise", "jitter": "position jitter"}
UNKNOWN_CAUSES = {
    "drift": "integrator drift",
    "scale": "position scale",
    "offset": "position offset",
    "lag": "trigger lag",
    "backlash": "backlash",
    "window": "coil window",
    "tilt": "probe tilt",
    "temperature": "probe temperature",
    "pass factor": "factor of a pass",
    "pass lag": "lag of a pass",
    "pass shift": "shift of a pass",
    "step": "step in the flux",
}
SMOOTHNESS = "smoothness of the profile"


@dataclass(frozen=True)
class Contribution:
    """What one source of error gives to the uncertainty of a result.

    Parameters
    ----------
    cause : str
        In words.
    where : str
        Pass, probe or reference it belongs to; empty where all share it.
    evaluation : {"A", "B"}
        By statistics of these readings (A) or otherwise (B), as in JCGM 100:2008, 4.2 and 4.3.
    u : float
        Standard uncertainty it would give alone, in the unit of the result.
    """

    cause: str
    where: str
    evaluation: Evaluation
    u: float


@dataclass(frozen=True)
class Budget:
    """The budget of one result.

    Parameters
    ----------
    result : str
        Key of the result.
    value : float
        SI.
    unit : str
        SI unit as text.
    contributions : tuple of Contribution
        Independent of each other.

    Examples
    --------
    >>> parts = (Contribution("read noise", "", "A", 3e-6), Contribution("scale", "", "B", 4e-6))
    >>> whole = Budget("magnetic_length", 0.4, "m", parts)
    >>> round(whole.u, 9), round(whole.share(parts[1]), 2)
    (5e-06, 0.64)
    """

    result: str
    value: float
    unit: str
    contributions: tuple[Contribution, ...]

    @property
    def u(self) -> float:
        """Combined standard uncertainty: root of the sum of squares."""
        return math.hypot(*(one.u for one in self.contributions))

    def share(self, one: Contribution) -> float:
        """Share of a contribution in the variance; 0 where there is none."""
        return one.u**2 / self.u**2 if self.u > 0 else 0.0

    def by_cause(self) -> tuple[Contribution, ...]:
        """Contributions of one cause and kind of evaluation together, largest first."""
        groups: dict[tuple[str, Evaluation], list[Contribution]] = {}
        for one in self.contributions:
            groups.setdefault((one.cause, one.evaluation), []).append(one)
        gathered = [_together(group) for group in groups.values()]
        return tuple(sorted(gathered, key=lambda one: -one.u))


@dataclass(frozen=True, eq=False)
class Budgets:
    """Budgets of all results of one line.

    Parameters
    ----------
    results : dict of str to Budget
        By the keys of the results.
    correlation : (n, n) array
        Correlation coefficients of the results, in their order; nan beside an exact one.
    """

    results: dict[str, Budget]
    correlation: Floats

    def __getitem__(self, result: str) -> Budget:
        return self.results[result]


def budget(fmap: xr.Dataset, *, axis: Axis | None = None, line: int = 0) -> Budgets:
    """Take the uncertainty of every result apart.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch`, `reconstruct` or `load_map`; raw passes are not needed.
    axis : Axis, optional
        Limits and flat window; those kept in the map if not given.
    line : int
        Index of the line.

    Returns
    -------
    Budgets
        Each budget sums to the uncertainty that `evaluate` gives.

    Raises
    ------
    RefusedError
        Limits or flat window outside the mapped range.

    Examples
    --------
    >>> import fieldmap
    >>> from fieldmap.shipped import demo_folder
    >>> fmap = fieldmap.stitch(fieldmap.load(demo_folder() / "gap_dipole" / "campaign.toml"))
    >>> found = budget(fmap)["magnetic_length"]
    >>> found.by_cause()[0].cause
    'position scale'
    """
    profile = map_lines(fmap)[line]
    results = line_functionals(profile, axis or map_axis(fmap), map_magnet(fmap).gap)
    spread = covariance(profile, results)
    u = np.sqrt(np.diagonal(spread))
    with np.errstate(invalid="ignore", divide="ignore"):
        correlation = spread / np.outer(u, u)
    taken_apart = _apart(fmap, line)
    return Budgets(
        {key: Budget(key, one.value, one.unit, taken_apart(one)) for key, one in results.items()},
        correlation,
    )


def _apart(fmap: xr.Dataset, line: int) -> Callable[[Functional], tuple[Contribution, ...]]:
    """A function that takes a result of one line apart."""
    evidence, joint = map_evidence(fmap, line), map_joint(fmap, line)
    size = evidence.size
    noises = _noise_names(fmap, line)
    references = _reference_names(fmap, line)
    unknowns = _unknown_names(fmap, line)

    def contributions(one: Functional) -> tuple[Contribution, ...]:
        direction = joint.covariance[:, :size] @ one.gradient
        variances = [
            (name, variance)
            for cause, by_pass in evidence.noise_variances(direction).items()
            for name, variance in zip(noises[cause], by_pass.tolist(), strict=True)
        ]
        other = (
            (references, evidence.reference_variances(direction)),
            (unknowns, evidence.prior_variances(direction)),
        )
        for names, those in other:
            variances += zip(names, those.tolist(), strict=True)
        explained = sum(variance for _, variance in variances)
        left = max(float(one.gradient @ direction[:size]) - explained, 0.0)
        variances.append(((SMOOTHNESS, "", "A"), left))
        variances += [(_aside(cause), u**2) for cause, u in one.besides.items()]
        return tuple(
            Contribution(*name, math.sqrt(variance)) for name, variance in variances if variance > 0
        )

    return contributions


Name = tuple[str, str, Evaluation]


def _noise_names(fmap: xr.Dataset, line: int) -> dict[str, list[Name]]:
    """Names of the noise of each pass of a line, by its cause."""
    profile = map_lines(fmap)[line]
    passes = [one for one in map_passes(fmap) if (one["x"], one["y"]) == (profile.x, profile.y)]

    def name(cause: str, one: dict[str, object]) -> Name:
        stated = cause == "jitter" or bool(one[f"{cause}_stated"])
        return NOISE_CAUSES[cause], str(one["name"]), "B" if stated else "A"

    return {cause: [name(cause, one) for one in passes] for cause in NOISE_CAUSES}


def _reference_names(fmap: xr.Dataset, line: int) -> list[Name]:
    facts = map_references(fmap)
    names: list[Name] = []
    for number in line_reference_numbers(fmap, line):
        kind = facts[number - 1]["kind"]
        names.append((f"{kind} reference", f"[[references]] {number}", "B"))
    return names


def _unknown_names(fmap: xr.Dataset, line: int) -> list[Name]:
    wires = {probe.name for probe in map_probes(fmap) if isinstance(probe, Wire)}
    states_drift = {one.name: one.u_drift is not None for one in map_integrators(fmap)}
    integrator_of = {one["name"]: one["integrator"] for one in map_passes(fmap)}

    def name(unknown: Nuisance) -> Name:
        if unknown.kind == "gain":
            cause = "active length" if unknown.where in wires else "effective area"
            return cause, unknown.where, "B"
        if unknown.kind == "step":  # its prior is as wide as the flux: the readings tell it
            return UNKNOWN_CAUSES[unknown.kind], unknown.where, "A"
        stated = unknown.kind != "drift" or states_drift[integrator_of[unknown.where]]
        return UNKNOWN_CAUSES[unknown.kind], unknown.where, "B" if stated else "A"

    return [name(unknown) for unknown in map_unknowns(fmap, line)]


def _aside(cause: str) -> Name:
    """Name of what does not come from the profile: a search in these readings, or a law."""
    return cause, "", "A" if cause.startswith("search") else "B"


def _together(group: Sequence[Contribution]) -> Contribution:
    places = list(dict.fromkeys(one.where for one in group if one.where))
    where = " and ".join(places) if len(places) <= 2 else f"{places[0]} and {len(places) - 1} more"
    u = math.hypot(*(one.u for one in group))
    return Contribution(group[0].cause, where, group[0].evaluation, u)
