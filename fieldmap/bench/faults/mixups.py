"""Faults of the desk: files, columns, units and descriptions mixed up."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.bench.faults.kind import FaultKind
from fieldmap.readings.probe import Coil, Wire

if TYPE_CHECKING:
    from fieldmap.bench.faults.setting import Faulty, Setting
    from fieldmap.bench.faults.table import Table
    from fieldmap.readings.probe import Probe

__all__ = ["MIXUPS"]

_POWERS: Final = (10.0, 100.0, 1e3, 1e6, 1e9)
_RELATIVE: Final = (1e-4, 1e-3, 1e-2, 0.1, 0.5)
# of the units that the columns are written in: s, mm and µV s
_MILLI: Final = 1e-3
_MICRO: Final = 1e-6


def _swapped(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """Columns under each other's names."""
    swap = (_time_for_position, _position_for_flux, _time_for_flux)
    kind = round(size) - 1
    if kind < len(swap):
        index = setting.pick(rng)
        return setting.whole().with_table(index, swap[kind](setting.whole().table(index)))
    return setting.whole().with_tables(lambda _, table: swap[kind - len(swap)](table))


def _time_for_position(table: Table) -> Table:
    """Seconds read as millimetres and the other way round."""
    return replace(table, time=table.position / _MILLI, position=table.time * _MILLI)


def _position_for_flux(table: Table) -> Table:
    """Millimetres read as microvolt seconds (microvolts) and the other way round."""
    return replace(
        table, position=table.samples / _MICRO * _MILLI, samples=table.position / _MILLI * _MICRO
    )


def _time_for_flux(table: Table) -> Table:
    """Seconds read as microvolt seconds and the other way round."""
    return replace(table, time=table.samples / _MICRO, samples=table.time * _MICRO)


def _flux_unit(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """Flux of one pass in a wrong unit."""
    index, factor = setting.pick(rng), size ** rng.choice([-1.0, 1.0])
    return setting.whole().with_table(index, _times(setting.whole().table(index), factor))


def _flux_unit_everywhere(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """Flux of all passes in a wrong unit."""
    factor = size ** rng.choice([-1.0, 1.0])
    return setting.whole().with_tables(lambda _, table: _times(table, factor))


def _polarity_everywhere(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """So many passes have their leads turned round; from five on all have."""
    passes = len(setting.campaign.passes)
    count = passes if size >= 5 else min(round(size), passes)
    made = setting.whole()
    for index in rng.permutation(passes)[:count].tolist():
        made = made.with_table(index, _times(made.table(index), -1.0))
    return made


def _times(table: Table, factor: float) -> Table:
    return replace(table, samples=table.samples * factor, rest=table.rest * factor)


def _other_probe(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """One pass names a probe that did not travel."""
    index = setting.pick(rng)
    own = setting.campaign.passes[index].probe
    others = [one.probe for one in setting.campaign.passes if one.probe.name != own.name]
    if size >= 1:
        named = others[0] if others else _of_other_kind(own, setting)
    else:
        factor = (1.0 + size) ** rng.choice([-1.0, 1.0])
        named = replace(_larger(own, factor), name=f"{own.name} 2")
        named = _widened(named, size, setting)
    return setting.whole().with_pass(index, probe=named)


def _of_other_kind(own: Probe, setting: Setting) -> Probe:
    """A wire for a coil, a coil for a wire, of a usual size."""
    name = f"{own.name} 2"
    if isinstance(own, Coil):
        return Wire(name, turns=10, active_length=0.05, u_active_length=1e-5)
    return Coil(name, "rectangular", 0.1, u_effective_area=2e-5, window=0.3 * setting.gap)


def _larger(probe: Probe, factor: float) -> Probe:
    """A probe described as larger by a factor."""
    if isinstance(probe, Coil):
        return replace(probe, effective_area=probe.effective_area * factor)
    return replace(probe, active_length=probe.active_length * factor)


def _widened(probe: Probe, size: float, setting: Setting) -> Probe:
    """A probe described as longer along the travel by a share; of a wire, by that of the gap."""
    if isinstance(probe, Coil):
        return replace(probe, window=probe.window * (1.0 + size))
    return replace(probe, width=probe.width + size * setting.gap)


def _area(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """The effective area, or the active length, of a probe is stated wrongly."""
    probe = _some_probe(setting, rng)
    return setting.whole().with_probe(_larger(probe, (1.0 + size) ** rng.choice([-1.0, 1.0])))


def _window(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """The window of a coil, or the width of a wire, is stated wrongly."""
    return setting.whole().with_probe(_widened(_some_probe(setting, rng), size, setting))


def _tilt_everywhere(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """A probe leans in every pass, and in its flips: as if its size were stated too large."""
    return setting.whole().with_probe(_larger(_some_probe(setting, rng), 1.0 / np.cos(size)))


def _some_probe(setting: Setting, rng: np.random.Generator) -> Probe:
    return setting.campaign.passes[setting.pick(rng)].probe


def _other_file(setting: Setting, size: float, rng: np.random.Generator) -> Faulty | None:
    """The file of another pass stands in the place of one; the further, the less they share."""
    passes = setting.campaign.passes
    index = setting.pick(rng)
    own = passes[index]
    middle = own.position.mean()
    others = sorted(
        (i for i in range(len(passes)) if i != index and passes[i].record == own.record),
        key=lambda i: (abs(passes[i].position.mean() - middle), passes[i].probe != own.probe, i),
    )
    if not others:
        return None
    other = others[min(int((size - 1.0) / 5.0 * len(others)), len(others) - 1)]
    table = replace(setting.whole().table(other), origin=own)
    return setting.whole().with_table(index, table, structural=True)


def _duplicated(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """One pass is listed again and again under other names."""
    one = setting.campaign.passes[setting.pick(rng)]
    copies = tuple(replace(one, name=f"copy {i + 1} of {one.name}") for i in range(round(size)))
    passes = (*setting.campaign.passes, *copies)
    where = ", ".join((one.name, *(copy.name for copy in copies)))
    return setting.whole().with_campaign(where, passes=passes, structural=True)


MIXUPS: Final = (
    FaultKind(
        "swapped-columns",
        "two columns stand under each other's names",
        (1.0, 2.0, 3.0, 4.0, 5.0),
        "1 time and position, 2 position and flux, 3 time and flux, of one pass; 4, 5 as 1, 2 in "
        "all passes",
        _swapped,
        "file",
        "time runs backwards, or the probe travels as no stage does",
    ),
    FaultKind(
        "flux-unit",
        "the flux of one pass is off by a power of ten",
        _POWERS,
        "factor or divisor",
        _flux_unit,
        "overlap",
        "the gain of the pass disagrees with all others",
    ),
    FaultKind(
        "flux-unit-everywhere",
        "the flux of all passes is off by a power of ten",
        _POWERS,
        "factor or divisor",
        _flux_unit_everywhere,
        "reference",
        "a reference on the field disagrees; without one the field is off by that power, and "
        "only an engineer who knows what to expect sees it",
    ),
    FaultKind(
        "polarity-several",
        "several passes, or all, have their leads turned round",
        (1.0, 2.0, 3.0, 4.0, 5.0),
        "passes; 5: all",
        _polarity_everywhere,
        "reference",
        "passes disagree in sign, or all with the reference; without one the sign of the field "
        "is a matter of how the leads were connected",
    ),
    FaultKind(
        "other-probe",
        "one pass names a probe that did not travel",
        (1e-4, 1e-3, 1e-2, 0.1, 1.0),
        "relative, of gain and window; 1: a probe of another kind",
        _other_probe,
        "overlap",
        "the gain of the pass disagrees with all others",
    ),
    FaultKind(
        "area-everywhere",
        "the effective area or the active length of a probe is stated wrongly",
        _RELATIVE,
        "relative",
        _area,
        "redundancy of probes",
        "a second probe or a reference on the field disagrees; without one every field of the "
        "map is off by that share",
    ),
    FaultKind(
        "window-misstated",
        "the window of a coil, or the width of a wire, is stated wrongly",
        (1e-3, 1e-2, 0.05, 0.2, 0.5),
        "relative; of a wire, in gaps",
        _window,
        "redundancy of probes",
        "another probe disagrees in the fringe; alone, the fringe is a little too sharp",
    ),
    FaultKind(
        "tilt-everywhere",
        "a probe leans in every pass",
        (0.003, 0.01, 0.03, 0.1, 0.5),
        "rad",
        _tilt_everywhere,
        "redundancy of probes",
        "as a wrong effective area",
    ),
    FaultKind(
        "other-file",
        "the file of another pass stands in the place of one",
        (1.0, 2.0, 3.0, 4.0, 5.0),
        "from the nearest to the furthest stretch",
        _other_file,
        "file",
        "the same readings stand twice; where probes differ, gains disagree",
    ),
    FaultKind(
        "duplicated-pass",
        "one pass is listed several times",
        (1.0, 2.0, 4.0, 8.0, 16.0),
        "copies",
        _duplicated,
        "file",
        "the same readings stand twice",
    ),
)
