"""What a map tells of how it came about: probes, references, unknowns, and the evidence itself."""

from __future__ import annotations

import json
import math
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np
import numpy.typing as npt

from fieldmap.errors import InputError
from fieldmap.estimate.corrected import step_name
from fieldmap.estimate.evidence_labels import line_evidence
from fieldmap.estimate.parameters import Nuisance
from fieldmap.readings.entries import read_correction
from fieldmap.readings.probe import Coil, Integrator, Probe, Stage, Wire

if TYPE_CHECKING:
    import xarray as xr

    from fieldmap.estimate.evidence import Evidence
    from fieldmap.readings.corrections import Correction

__all__ = [
    "Applied",
    "Joint",
    "ReferenceFit",
    "line_reference_numbers",
    "map_corrections",
    "map_evidence",
    "map_integrators",
    "map_joint",
    "map_probes",
    "map_references",
    "map_stage",
    "map_unknowns",
    "reference_fits",
]

Floats = npt.NDArray[np.float64]


class Joint(NamedTuple):
    """Estimate of all unknowns of one line: coefficients of B, then nuisances.

    Parameters
    ----------
    values : (size + m,) array
        T, then nuisances in units of their standard uncertainty before the scan.
    covariance : (size + m, size + m) array
        Their covariance.
    """

    values: Floats
    covariance: Floats


class ReferenceFit(NamedTuple):
    """How the map agrees with one reference on one line.

    Parameters
    ----------
    number : int
        Of the reference, from 1.
    line : int
        Index of the line.
    difference : float
        Map less reference, in standard uncertainties of the reference.
    told : float
        Variance expected of that difference: about 1 where the rest of the campaign tells the
        same much better, about 0 where the reference alone tells it.
    """

    number: int
    line: int
    difference: float
    told: float


def map_joint(fmap: xr.Dataset, line: int = 0) -> Joint:
    """Coefficients and nuisances of one line with their joint covariance.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch` or `load_map`.
    line : int
        Index of the line.

    Returns
    -------
    Joint
    """
    at = _at(fmap, line)
    n, m = int(at["knots"].values[2]), len(_line_facts(fmap, line)["unknowns"])
    shared = at["shared_covariance"].values[:n, :m]
    return Joint(
        np.concatenate([at["coefficient"].values[:n], at["nuisance"].values[:m]]),
        np.block(
            [
                [at["coefficient_covariance"].values[:n, :n], shared],
                [shared.T, at["nuisance_covariance"].values[:m, :m]],
            ]
        ),
    )


def map_evidence(fmap: xr.Dataset, line: int = 0) -> Evidence:
    """Readings, references and priors that one line was estimated from.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch` or `load_map`.
    line : int
        Index of the line.

    Returns
    -------
    Evidence

    Raises
    ------
    InputError
        The map keeps none, or not all of it.
    """
    size = int(_at(fmap, line)["knots"].values[2])
    try:
        return line_evidence(fmap, line, size, len(_line_facts(fmap, line)["unknowns"]))
    except (KeyError, IndexError, ValueError) as error:
        found = f"evidence of the readings that is missing or damaged ({error})"
        raise InputError("map", found, "a whole map", "reduce the campaign again") from error


def reference_fits(fmap: xr.Dataset) -> list[ReferenceFit]:
    """How the map agrees with the absolute references it was made with.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch` or `load_map`.

    Returns
    -------
    list of ReferenceFit
        Line by line.

    Raises
    ------
    InputError
        The map keeps no evidence.
    """
    found = []
    for line in range(len(json.loads(fmap.attrs["lines"]))):
        evidence, joint = map_evidence(fmap, line), map_joint(fmap, line)
        rows = evidence.references
        differences = rows @ evidence.recorded(joint.values) - evidence.reference_target
        true = rows.copy()  # rows on the unknowns at true positions
        true[:, evidence.size :] -= rows[:, : evidence.size] @ evidence.frame
        told = 1 - np.einsum("ij,jk,ik->i", true, joint.covariance, true)
        for number, difference, share in zip(
            line_reference_numbers(fmap, line), differences, told, strict=True
        ):
            found.append(ReferenceFit(number, line, float(difference), max(float(share), 0.0)))
    return found


def map_unknowns(fmap: xr.Dataset, line: int = 0) -> list[Nuisance]:
    """What the nuisances of one line are."""
    return [
        Nuisance(one["kind"], one["where"], one["mean"], one["sd"])
        for one in _line_facts(fmap, line)["unknowns"]
    ]


class Applied(NamedTuple):
    """One correction that a map was made with, and what the readings found of it.

    Parameters
    ----------
    correction : Correction
        As it was switched on.
    value, u : float
        Factor, lag (s), shift (m) or size of the step (V s) that the joint solution found, and
        its standard uncertainty; nan where the correction has no value.
    unit : str
        SI unit of them; empty likewise.
    """

    correction: Correction
    value: float
    u: float
    unit: str


def map_corrections(fmap: xr.Dataset) -> list[Applied]:
    """The corrections that were switched on when the map was made, pass by pass.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch` or `load_map`.

    Returns
    -------
    list of Applied
        Empty where none was.

    Examples
    --------
    >>> import fieldmap
    >>> from fieldmap.readings import Correction, corrected
    >>> from fieldmap.shipped import demo_folder
    >>> campaign = fieldmap.load(demo_folder() / "foreign_tables")
    >>> late = corrected(campaign, [Correction("lag", "pass_01.csv", 0.001, 0.002)])
    >>> found = map_corrections(fieldmap.stitch(late))[0]
    >>> found.correction.kind, found.unit, found.u < 0.002
    ('lag', 's', True)
    """
    applied = []
    for one in json.loads(fmap.attrs["passes"]):
        for entry in one.get("corrections", []):
            correction = read_correction(entry, f"pass '{one['name']}', corrections")
            applied.append(_applied(correction, one["record"], _found(fmap, one["x"], one["y"])))
    return applied


def _found(fmap: xr.Dataset, x: float, y: float) -> dict[tuple[str, str], tuple[float, float]]:
    """Value and standard uncertainty of the nuisances of the line at (x, y), SI."""
    places = [(one["x"], one["y"]) for one in json.loads(fmap.attrs["lines"])]
    line = places.index((x, y))
    unknowns, joint = map_unknowns(fmap, line), map_joint(fmap, line)
    first = len(joint.values) - len(unknowns)
    sd = np.sqrt(np.diagonal(joint.covariance)[first:])
    return {
        (one.kind, one.where): (float(value) * one.sd, float(u) * one.sd)
        for one, value, u in zip(unknowns, joint.values[first:], sd, strict=True)
    }


def _applied(
    one: Correction, record: str, found: dict[tuple[str, str], tuple[float, float]]
) -> Applied:
    """A correction with what was found of it added to what was stated."""
    if one.kind == "factor":
        left, u = found.get(("pass factor", one.where), (0.0, 0.0))
        # the pass reads 1 + left times what it should after the stated factor
        return Applied(one, one.value / (1 + left), u * abs(one.value), "1")
    if one.kind in ("lag", "shift"):
        left, u = found.get((f"pass {one.kind}", one.where), (0.0, 0.0))
        return Applied(one, one.value + left, u, "s" if one.kind == "lag" else "m")
    if (step := step_name(one, record)) is not None:
        return Applied(one, *found.get(("step", step), (math.nan, math.nan)), "V s")
    return Applied(one, math.nan, math.nan, "")


def map_probes(fmap: xr.Dataset) -> list[Probe]:
    """The probes as the campaign states them."""
    kinds = {"wire": Wire, "coil": Coil}
    found: list[Probe] = []
    for facts in _campaign(fmap)["probes"]:
        rest = {key: value for key, value in facts.items() if key != "kind"}
        found.append(kinds[facts["kind"]](**rest))
    return found


def map_integrators(fmap: xr.Dataset) -> list[Integrator]:
    """The integrators as the campaign states them."""
    return [Integrator(**facts) for facts in _campaign(fmap)["integrators"]]


def map_stage(fmap: xr.Dataset) -> Stage:
    """The stage as the campaign states it."""
    return Stage(**_campaign(fmap)["stage"])


def map_references(fmap: xr.Dataset) -> list[dict[str, Any]]:
    """The absolute references as the campaign states them, SI; a flip names its probe."""
    return [dict(facts) for facts in _campaign(fmap)["references"]]


def line_reference_numbers(fmap: xr.Dataset, line: int = 0) -> list[int]:
    """Numbers of the references that bear on a line, from 1, in the order of the evidence."""
    return [int(number) for number in _line_facts(fmap, line)["references"]]


def _campaign(fmap: xr.Dataset) -> dict[str, Any]:
    facts: dict[str, Any] = json.loads(fmap.attrs["campaign"])
    return facts


def _line_facts(fmap: xr.Dataset, line: int) -> dict[str, Any]:
    facts: dict[str, Any] = json.loads(fmap.attrs["lines"])[line]
    return facts


def _at(fmap: xr.Dataset, line: int) -> xr.Dataset:
    facts = _line_facts(fmap, line)
    return fmap.sel(x=facts["x"], y=facts["y"])
