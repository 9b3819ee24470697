"""Attributes of a map: units and names of its variables, provenance of the whole."""

from __future__ import annotations

import json
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

from fieldmap.readings.passes import FlipReference, PointReference
from fieldmap.readings.probe import Wire
from fieldmap.version import __version__

if TYPE_CHECKING:
    from collections.abc import Sequence

    import xarray as xr

    from fieldmap.estimate.findings import Finding
    from fieldmap.estimate.fit import PassFit
    from fieldmap.estimate.mapped_line import MappedLine
    from fieldmap.readings.passes import Campaign, Reference
    from fieldmap.readings.probe import Probe

__all__ = ["FORMAT", "describe"]

FORMAT = "fieldmap-map/1"


def describe(
    dataset: xr.Dataset,
    campaign: Campaign,
    lines: Sequence[MappedLine],
    findings: Sequence[Finding],
) -> None:
    """Attributes: units and names of the variables, provenance of the whole."""
    component = campaign.magnet.component
    along = campaign.axis.travel
    labels: dict[str, tuple[str, str]] = {
        "B": ("T", f"flux density, component {component}"),
        "B_se": ("T", f"standard uncertainty of the flux density, component {component}"),
        "n_readings": ("1", "number of readings nearest to the grid point"),
        "coefficient": ("T", "coefficients of the cubic B-spline of the flux density"),
        "coefficient_covariance": ("T2", "covariance of coefficient"),
        "nuisance": ("1", "drifts, gains and position errors, each in its unit listed in lines"),
        "nuisance_covariance": ("1", "covariance of nuisance"),
        "shared_covariance": ("T", "covariance between coefficient and nuisance"),
        "mapped_range": ("m", f"lowest and highest recorded position along {along}"),
        "knots": ("1", "first knot in m, knot spacing in m, number of coefficients of B"),
        "residual": ("1", "whitened residual of the bin increments"),
        "residual_position": ("m", f"position along {along} of the residual"),
        "residual_pass": ("1", "index of the pass in the list of passes"),
        "x": ("m", "transverse position x of the line"),
        "y": ("m", "transverse position y of the line"),
        "z": ("m", f"position along the travel, {along}"),
    }
    for name, (units, long_name) in labels.items():
        dataset[name].attrs = {"units": units, "long_name": long_name}
    dataset["B"].attrs["ancillary_variables"] = "B_se n_readings"
    gathered = [*findings, *(remark for line in lines for remark in line.findings)]
    dataset.attrs = {
        "Conventions": "CF-1.11",
        "format": FORMAT,
        "fieldmap_version": __version__,
        "title": f"Field map: {campaign.name}",
        "source": "moving-probe scans with a voltage integrator",
        "campaign": json.dumps(_campaign_facts(campaign)),
        "lines": json.dumps([_line_facts(line) for line in lines]),
        "passes": json.dumps([_pass_facts(one) for line in lines for one in line.fit.passes]),
        "findings": json.dumps([finding.as_dict() for finding in dict.fromkeys(gathered)]),
    }


def _campaign_facts(campaign: Campaign) -> dict[str, Any]:
    probes = {one.probe.name: one.probe for one in campaign.passes}
    probes |= {r.probe.name: r.probe for r in campaign.references if isinstance(r, FlipReference)}
    integrators = {one.integrator.name: one.integrator for one in campaign.passes}
    return {
        "name": campaign.name,
        "sha256": campaign.sha256,
        "magnet": asdict(campaign.magnet),
        "axis": asdict(campaign.axis),
        "stage": asdict(campaign.stage),
        "probes": [_probe_facts(probe) for probe in probes.values()],
        "integrators": [asdict(integrator) for integrator in integrators.values()],
        "references": [_reference_facts(one) for one in campaign.references],
        "limits": [asdict(limit) for limit in campaign.limits],
    }


def _probe_facts(probe: Probe) -> dict[str, Any]:
    return {"kind": "wire" if isinstance(probe, Wire) else "coil", **asdict(probe)}


def _reference_facts(reference: Reference) -> dict[str, Any]:
    """A reference; the probe of a flip by its name."""
    if isinstance(reference, FlipReference):
        return {"kind": "flip", **asdict(reference), "probe": reference.probe.name}
    kind = "point" if isinstance(reference, PointReference) else "zero"
    return {"kind": kind, **asdict(reference)}


def _line_facts(line: MappedLine) -> dict[str, Any]:
    unknowns = [{**asdict(u), "unit": f"{u.sd!r} {u.unit}"} for u in line.fit.unknowns]
    references = list(line.references)
    return {"x": line.x, "y": line.y, "unknowns": unknowns, "references": references}


def _pass_facts(one: PassFit) -> dict[str, Any]:
    measured = one.one
    return {
        "name": measured.name,
        "sha256": measured.sha256,
        "probe": measured.probe.name,
        "integrator": measured.integrator.name,
        "record": measured.record,
        "x": measured.x,
        "y": measured.y,
        "from": float(measured.position[0]),
        "to": float(measured.position[-1]),
        "duration": float(measured.time[-1] - measured.time[0]),
        "readings": len(measured.time),
        "walk_noise": one.level.walk,
        "walk_stated": one.level.walk_known,
        "read_noise": one.level.read,
        "read_stated": one.level.read_known,
        "chi_square": one.square,
        "freedom": one.freedom,
        "corrections": [correction.as_entry() for correction in measured.corrections],
    }
