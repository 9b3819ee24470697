"""The demo campaigns: magnets and benches of an invented shop, with the true fields.

The shop of Reedbank winds and tests small magnets to order. Its magnets, its benches and its
readings are made up; sizes and noise are what such a bench would show.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

import numpy as np

from fieldmap.bench.bench_errors import Noise
from fieldmap.bench.sources import EngeMagnet, Slot, Solenoid, TanhMagnet
from fieldmap.readings.layout import ColumnSpec, TableLayout
from fieldmap.readings.passes import (
    Axis,
    Campaign,
    Limit,
    Magnet,
    PlannedPass,
    ZeroReference,
)
from fieldmap.readings.probe import Coil, Integrator, Probe, Stage, Wire

if TYPE_CHECKING:
    from collections.abc import Mapping

    from fieldmap.bench.sources import Source
    from fieldmap.bench.twin import History
    from fieldmap.readings.passes import Floats

__all__ = ["DEMOS", "Demo"]


@dataclass(frozen=True)
class Demo:
    """One demo campaign before it is measured.

    Parameters
    ----------
    folder : str
        Name of its folder.
    seed : int
        Of its own random numbers.
    about : str
        What it shows.
    source : Source
        The true field.
    plan : Campaign
        What is planned.
    points : tuple of (float, float)
        Where another magnetometer reads the field, m, and its standard uncertainty, T.
    layout : TableLayout, optional
        How its tables are laid out.
    preamble : tuple of str
        Lines at their head.
    units : mapping of str to str
        Units of their columns, where not the usual ones.
    noise : mapping of str to Noise
        True noise of integrators of which the campaign file says nothing.
    current : callable, optional
        Current of the supply, A, against time from the start of a pass, s.
    """

    folder: str
    seed: int
    about: str
    source: Source
    plan: Campaign
    points: tuple[tuple[float, float], ...] = ()
    layout: TableLayout | None = None
    preamble: tuple[str, ...] = ()
    units: Mapping[str, str] = field(default_factory=dict)
    noise: Mapping[str, Noise] = field(default_factory=dict)
    current: History | None = None


def _passes(
    probe: Probe,
    integrator: Integrator,
    travels: list[tuple[float, float]],
    *,
    speed: float,
    rate: float,
    dwell: float,
) -> tuple[PlannedPass, ...]:
    """Plan passes of one probe from and to the positions given (m, m/s, Hz, s)."""
    return tuple(
        PlannedPass(f"planned pass {number}", probe, integrator, start, stop, speed, rate, dwell)
        for number, (start, stop) in enumerate(travels, 1)
    )


def _limit(result: str, nominal: float, tolerance: float) -> Limit:
    """Limit of a result by its nominal value and tolerance."""
    return Limit(result, nominal - tolerance, nominal + tolerance)


def _gap_dipole() -> Campaign:
    """Plan three overlapping stretches, each by wire and by coil, in both directions."""
    wire = Wire("wire", turns=20, active_length=50e-3, u_active_length=0.02e-3, width=0.4e-3)
    coil = Coil("coil", "rectangular", effective_area=0.3, u_effective_area=0.6e-4, window=10e-3)
    main = Integrator(
        "main",
        read_noise=50e-9,
        walk_noise=200e-9,
        u_drift=1e-6,
        resolution=1e-9,
        full_scale=0.5,
        max_voltage=5.0,
    )
    wire_travels = [(-0.48, -0.06), (0.21, -0.21), (0.06, 0.48)]
    coil_travels = [(0.48, 0.06), (-0.21, 0.21), (-0.06, -0.48)]
    planned = _passes(wire, main, wire_travels, speed=0.04, rate=50.0, dwell=3.0)
    planned += _passes(coil, main, coil_travels, speed=0.03, rate=50.0, dwell=2.0)
    return Campaign(
        name="Reedbank bending magnet B3, 85 A",
        magnet=Magnet("dipole", "By", gap=0.03, iron_length=0.4, current=85.0),
        axis=Axis("z", (-0.45, 0.45), (-0.05, 0.05)),
        stage=Stage(u_scale=20e-6, u_position=4e-6, u_offset=0.05e-3, u_lag=1e-3, u_backlash=4e-6),
        planned=planned,
        limits=(
            _limit("magnetic_length", 0.426, 0.5e-3),
            _limit("integrated_field", 0.2216, 0.3e-3),
        ),
    )


GAP_DIPOLE = Demo(
    folder="gap_dipole",
    seed=1203,
    about="iron dipole, 30 mm gap, Enge fringes that differ at its two ends",
    source=EngeMagnet(
        0.52,
        length=0.426,
        gap=0.03,
        coefficients_in=(0.478959, 1.911289, -1.185953, 1.630554, -1.082657, 0.318111),
        coefficients_out=(0.4512, 1.8837, -1.1204, 1.5561, -1.0317, 0.3042),
    ),
    plan=_gap_dipole(),
    points=((0.0, 10e-6),),
)


def _solenoid_fringe() -> Campaign:
    """Plan five overlapping coil passes; the level comes from where the field has died away."""
    coil = Coil("coil", "round", effective_area=0.12, u_effective_area=0.3e-4, window=12e-3)
    main = Integrator("main", read_noise=40e-9, walk_noise=120e-9, u_drift=1e-6, resolution=1e-9)
    travels = [(-1.25, -0.55), (-0.05, -0.75), (-0.35, 0.35), (0.75, 0.05), (0.55, 1.25)]
    far = 50e-6  # an estimate of the far field there, which is 36 uT in the mean
    return Campaign(
        name="Reedbank solenoid S1, 100 A",
        magnet=Magnet("solenoid", "Bz", gap=0.08, current=100.0),
        axis=Axis("z", (-1.2, 1.2), (-0.03, 0.03)),
        stage=Stage(u_scale=20e-6, u_position=5e-6, u_offset=0.1e-3, u_lag=1e-3),
        planned=_passes(coil, main, travels, speed=0.05, rate=25.0, dwell=3.0),
        references=(ZeroReference(1.15, 1.25, far), ZeroReference(-1.25, -1.15, far)),
        limits=(_limit("central_field", 0.2426, 0.5e-3),),
    )


def _settling(time: Floats) -> Floats:
    """Give the current of a supply that settles after each start, with five digits after it, A."""
    return np.round(100.0 - 0.02 * np.exp(-time / 6.0), 4)


def _slot() -> Campaign:
    """Plan four wire passes in steps of 60 um, both ways over either half."""
    wire = Wire("wire", turns=4, active_length=6e-3, u_active_length=5e-6, width=0.1e-3)
    main = Integrator("main", read_noise=20e-9, walk_noise=50e-9, u_drift=1e-6, resolution=1e-9)
    travels = [(-0.025, 0.005), (-0.005, 0.025), (0.025, -0.005), (0.005, -0.025)]
    planned = _passes(wire, main, travels, speed=1.5e-3, rate=25.0, dwell=3.0)
    return Campaign(
        name="Reedbank slot magnet P7",
        magnet=Magnet("other", "By", gap=1.2e-3),
        axis=Axis("z", (-0.02, 0.02), (-0.5e-3, 0.5e-3)),
        stage=Stage(u_scale=50e-6, u_position=2e-6, u_offset=10e-6, u_lag=2e-3, u_backlash=3e-6),
        planned=tuple(replace(one, record="increments") for one in planned),
    )


def _foreign_tables() -> Campaign:
    """Plan three wire passes on an old bench, its integrator's noise unknown."""
    wire = Wire("wire", turns=10, active_length=40e-3, u_active_length=0.02e-3)
    old = Integrator("old", u_drift=1e-6, resolution=1e-8)
    travels = [(-0.16, 0.06), (0.16, -0.06), (-0.06, 0.16)]
    return Campaign(
        name="Reedbank steering magnet C2",
        magnet=Magnet("dipole", "By", gap=0.024, iron_length=0.08),
        axis=Axis("z", (-0.15, 0.15), (-0.01, 0.01)),
        stage=Stage(u_scale=50e-6, u_position=5e-6, u_offset=0.1e-3, u_lag=2e-3),
        planned=_passes(wire, old, travels, speed=0.02, rate=20.0, dwell=2.5),
    )


SOLENOID_FRINGE = Demo(
    folder="solenoid_fringe",
    seed=1204,
    about="solenoid on its axis, out to where its field has died away, with a settling supply",
    source=Solenoid(radius=0.04, length=0.3, turns=600, current=100.0),
    plan=_solenoid_fringe(),
    current=_settling,
)

SLOT = Demo(
    folder="slot",
    seed=1205,
    about="slot of 1.2 mm between two permanent-magnet blocks, stage in micrometres",
    source=Slot(1.2, width=10e-3, height=10e-3, length=8e-3, gap=1.2e-3),
    plan=_slot(),
    points=((-0.018, 50e-6),),
    units={"position": "um"},
)

FOREIGN_TABLES = Demo(
    folder="foreign_tables",
    seed=1206,
    about="small dipole whose tables are laid out as another bench writes them",
    source=TanhMagnet(0.18, length=0.102, lam=0.016),
    plan=_foreign_tables(),
    layout=TableLayout(
        delimiter=";",
        decimal=",",
        columns={
            "time": ColumnSpec("T", "s"),
            "position": ColumnSpec(3, "mm"),
            "flux": ColumnSpec("Int", "uV s"),
        },
    ),
    preamble=(
        "Bench 2, log of one travel",
        "Integrator: old; range 10 mV s",
        "Columns: T; Int; Pos",
    ),
    noise={"old": Noise(walk=300e-9, read=100e-9)},
)

DEMOS = (GAP_DIPOLE, SOLENOID_FRINGE, SLOT, FOREIGN_TABLES)
