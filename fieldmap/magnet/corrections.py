"""What each correction does to the results: how they would change were it not made.

A nuisance that the estimate finds (a drift, a lag, the ratio of two gains …) corrects all results
at once. Taken for zero instead, it would leave the others to explain the readings, and a result
would move by ``-cov(q, η)/var(η)·η̂``: the conditional mean of the joint estimate. So no new solve
is needed, and the uncertainty of the correction is ``|cov(q, η)|/u(η)``. A nuisance that the
readings do not tell has a correction of zero with just that uncertainty.

What is applied to the readings before they are fitted (current and temperature of each reading,
the droop of an analog integrator) is judged by solving again without it.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.map import map_axis, map_lines, map_magnet
from fieldmap.estimate.provenance import map_joint, map_probes, map_unknowns
from fieldmap.estimate.stitch import stitch
from fieldmap.magnet.budget import UNKNOWN_CAUSES
from fieldmap.magnet.functionals import line_functionals
from fieldmap.progress import Tell, silent
from fieldmap.readings.probe import Wire

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping, Sequence

    import xarray as xr

    from fieldmap.estimate.parameters import Nuisance
    from fieldmap.estimate.provenance import Joint
    from fieldmap.magnet.functional import Functional
    from fieldmap.readings.passes import Axis, Campaign, Pass

__all__ = ["Correction", "Corrections", "corrections", "reading_corrections"]

Floats = npt.NDArray[np.float64]

TOGETHER: Final = "all together"


@dataclass(frozen=True, eq=False)
class Correction:
    """One correction and what it does.

    Parameters
    ----------
    cause : str
        In words.
    where : str
        Pass or probe; empty where all share it, ``"all together"`` for several of one kind.
    value, u_value : float
        What was found of it, SI; nan where it is no single number.
    unit : str
        SI unit of it; empty likewise.
    shift : mapping of str to float
        By the key of a result: the result without this correction less the result, SI.
    u : mapping of str to float
        Standard uncertainty of each shift; nan where the readings were solved again.
    """

    cause: str
    where: str
    value: float
    u_value: float
    unit: str
    shift: Mapping[str, float]
    u: Mapping[str, float]


@dataclass(frozen=True, eq=False)
class Corrections:
    """All corrections of one line.

    Parameters
    ----------
    results : mapping of str to Functional
        The results as they are.
    items : tuple of Correction
        In the order of the unknowns.
    """

    results: Mapping[str, Functional]
    items: tuple[Correction, ...]

    def largest_first(self, result: str) -> tuple[Correction, ...]:
        """Corrections in the order of what they do to one result."""
        return tuple(sorted(self.items, key=lambda one: -abs(one.shift[result])))


def corrections(
    fmap: xr.Dataset,
    campaign: Campaign | None = None,
    *,
    axis: Axis | None = None,
    line: int = 0,
    tell: Tell = silent,
) -> Corrections:
    """How each result of a line would change without each correction.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch` or `load_map`.
    campaign : Campaign, optional
        The readings of the map. With them, what was applied to the readings is judged, too; each
        takes a new solve, and only where it was used.
    axis : Axis, optional
        Limits and flat window; those kept in the map if not given.
    line : int
        Index of the line.
    tell : callable, optional
        Told in a few words what is solved next.

    Returns
    -------
    Corrections

    Examples
    --------
    >>> import fieldmap
    >>> from fieldmap.shipped import demo_folder
    >>> fmap = fieldmap.stitch(fieldmap.load(demo_folder() / "foreign_tables"))
    >>> found = corrections(fmap)
    >>> first = found.largest_first("integrated_field")[0]
    >>> first.cause, first.where
    ('integrator drift', 'pass_03.csv')
    """
    axis = axis or map_axis(fmap)
    results = line_functionals(map_lines(fmap)[line], axis, map_magnet(fmap).gap)
    items = _of_unknowns(fmap, line, results)
    if campaign is not None:
        items += reading_corrections(campaign, fmap, results, axis=axis, line=line, tell=tell)
    return Corrections(results, tuple(items))


def reading_corrections(
    campaign: Campaign,
    fmap: xr.Dataset,
    results: Mapping[str, Functional],
    *,
    axis: Axis,
    line: int = 0,
    tell: Tell = silent,
) -> list[Correction]:
    """Corrections that are applied to the readings, by solving again without each.

    Parameters
    ----------
    campaign : Campaign
        The readings.
    fmap : xarray.Dataset
        Their map: its knots are used again.
    results : mapping of str to Functional
        Results of the map.
    axis : Axis
        Limits and flat window.
    line : int
        Index of the line.
    tell : callable, optional
        As for `corrections`.

    Returns
    -------
    list of Correction
        Empty where nothing was applied.
    """
    found = []
    spacing = float(fmap["knots"].values[..., 1][np.isfinite(fmap["knots"].values[..., 1])].min())
    for cause, without in _READINGS.items():
        passes = tuple(without(one, campaign) for one in campaign.passes)
        if all(new is old for new, old in zip(passes, campaign.passes, strict=True)):
            continue
        tell(f"solving without the {cause}")
        plain = stitch(replace(campaign, passes=passes), knot_spacing=spacing)
        other = line_functionals(map_lines(plain)[line], axis, map_magnet(plain).gap)
        shift = {
            key: other[key].value - one.value if key in other else math.nan
            for key, one in results.items()
        }
        nothing = dict.fromkeys(results, math.nan)
        found.append(Correction(cause, "", math.nan, math.nan, "", shift, nothing))
    return found


def _of_unknowns(
    fmap: xr.Dataset, line: int, results: Mapping[str, Functional]
) -> list[Correction]:
    """One correction a nuisance, and one for all of a kind where there are several."""
    joint, unknowns = map_joint(fmap, line), map_unknowns(fmap, line)
    wires = {probe.name for probe in map_probes(fmap) if isinstance(probe, Wire)}
    groups: dict[str, list[int]] = {}
    for i, unknown in enumerate(unknowns):
        groups.setdefault(unknown.kind, []).append(i)
    items = [_correction(joint, unknowns, [i], results, wires) for i in range(len(unknowns))]
    several = [group for group in groups.values() if len(group) > 1]
    return items + [_correction(joint, unknowns, group, results, wires) for group in several]


def _correction(
    joint: Joint,
    unknowns: Sequence[Nuisance],
    group: list[int],
    results: Mapping[str, Functional],
    wires: set[str],
) -> Correction:
    """The correction by some nuisances at once."""
    size = len(joint.values) - len(unknowns)
    index = size + np.array(group)
    spread = joint.covariance[np.ix_(index, index)]
    found = joint.values[index]
    shift, u = {}, {}
    for key, one in results.items():
        shared = one.gradient @ joint.covariance[:size, index]
        weights = np.linalg.solve(spread, shared)
        shift[key] = -float(weights @ found)
        u[key] = math.sqrt(max(float(weights @ shared), 0.0))
    first = unknowns[group[0]]
    if len(group) > 1:
        return Correction(_kind(first), TOGETHER, math.nan, math.nan, "", shift, u)
    scale = first.sd
    return Correction(
        cause=_cause(first, wires),
        where=first.where,
        value=float(found[0]) * scale,
        u_value=math.sqrt(float(spread[0, 0])) * scale,
        unit=first.unit,
        shift=shift,
        u=u,
    )


def _cause(unknown: Nuisance, wires: set[str]) -> str:
    if unknown.kind == "gain":
        return "active length" if unknown.where in wires else "effective area"
    return _kind(unknown)


def _kind(unknown: Nuisance) -> str:
    return UNKNOWN_CAUSES.get(unknown.kind, "gain of probe")


def _without_current(one: Pass, campaign: Campaign) -> Pass:
    used = one.current is not None and campaign.magnet.current is not None
    return replace(one, current=None) if used else one


def _without_temperature(one: Pass, _: Campaign) -> Pass:
    used = one.temperature is not None and one.probe.temperature_coefficient != 0
    return replace(one, temperature=None) if used else one


def _with_droop(one: Pass, _: Campaign) -> Pass:
    """The pass as the integrator showed it: `fieldmap.readings.records.undo_droop` undone."""
    leak = one.integrator.leak_time if one.integrator.kind == "analog" else None
    if leak is None or one.record != "cumulative":
        return one
    half = np.diff(one.time) / (2 * leak)
    shown = [float(one.flux[0])]
    for step, share in zip(np.diff(one.flux).tolist(), half.tolist(), strict=True):
        shown.append((step + shown[-1] * (1 - share)) / (1 + share))
    return replace(one, flux=np.array(shown))


_READINGS: Final[dict[str, Callable[[Pass, Campaign], Pass]]] = {
    "current of each reading": _without_current,
    "temperature of each reading": _without_temperature,
    "droop of the integrator": _with_droop,
}
