"""Faults of the absolute references."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Final

from fieldmap.bench.faults.kind import FaultKind
from fieldmap.readings.passes import PointReference, ZeroReference

if TYPE_CHECKING:
    import numpy as np

    from fieldmap.bench.faults.setting import Faulty, Setting
    from fieldmap.readings.passes import Reference

__all__ = ["REFERENCE_FAULTS"]


def _misread(setting: Setting, size: float, rng: np.random.Generator) -> Faulty | None:
    """A reference is off by many of its u; a field-free stretch is claimed too confidently."""
    if not setting.campaign.references:
        return None
    number = int(rng.integers(len(setting.campaign.references)))
    ref = setting.campaign.references[number]
    off = size * rng.choice([-1.0, 1.0])
    changed: Reference
    if isinstance(ref, PointReference):
        changed = replace(ref, field=ref.field + off * ref.u)
    elif isinstance(ref, ZeroReference):
        changed = replace(ref, u=ref.u / size)
    else:
        changed = replace(ref, flux_change=ref.flux_change + off * ref.u_flux_change)
    return _with_reference(setting, number, changed)


def _misplaced(setting: Setting, size: float, rng: np.random.Generator) -> Faulty | None:
    """A reference was taken elsewhere than stated."""
    if not setting.campaign.references:
        return None
    number = int(rng.integers(len(setting.campaign.references)))
    ref = setting.campaign.references[number]
    off = size * setting.gap * rng.choice([-1.0, 1.0])
    changed: Reference
    if isinstance(ref, ZeroReference):
        inward = -abs(off) if ref.start + ref.stop > 0 else abs(off)
        changed = replace(ref, start=ref.start + inward, stop=ref.stop + inward)
    else:
        changed = replace(ref, at=ref.at + off)
    return _with_reference(setting, number, changed)


def _with_reference(setting: Setting, number: int, changed: Reference) -> Faulty:
    given = setting.campaign.references
    references = (*given[:number], changed, *given[number + 1 :])
    where = f"[[references]] {number + 1}"
    return setting.whole().with_campaign(where, references=references)


REFERENCE_FAULTS: Final = (
    FaultKind(
        "reference-misread",
        "a reference is off by many of its u, or a field-free stretch claimed too confidently",
        (1.0, 5.0, 30.0, 300.0, 10000.0),
        "u of the reference",
        _misread,
        "redundancy of probes",
        "a wire's level, a second reference or a flip disagrees; the only reference of coil "
        "passes is believed",
    ),
    FaultKind(
        "reference-misplaced",
        "a reference was taken elsewhere than stated",
        (1e-3, 1e-2, 0.1, 1.0, 3.0),
        "gaps",
        _misplaced,
        "redundancy of probes",
        "as for a reading that is off, where the field differs between the two places",
    ),
)
