"""Tables as text: headings, cells, and what cannot be written."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.bench.table_text import recorded_samples, table_text
from fieldmap.bench.twin import Recorded
from fieldmap.errors import InputError
from fieldmap.readings import ColumnSpec, Integrator, TableLayout, Wire, make_pass

WIRE = Wire("wire", turns=20, active_length=0.05)
ONE = make_pass([-0.48, -0.4788, 0.0], [0.0, 1.5e-6, -2e-9], [0.0, 0.04, 0.08], probe=WIRE)


def rows(one, *arguments):
    return table_text(one, *arguments).splitlines()


def test_own_layout():
    assert rows(ONE) == [
        '# probe "wire"',
        "time [s],position [mm],flux [uV s]",
        "0,-480,0",
        "0.04,-478.8,1.5",
        "0.08,0,-0.002",
    ]


def test_names_cannot_break_out_of_the_comment():
    named = replace(ONE, probe=replace(WIRE, name='a"\nb'))
    assert rows(named)[0] == '# probe "a\\"\\nb"'


def test_all_columns():
    full = replace(ONE, temperature=np.array([20.0, 20.5, 21.0]), current=np.array([85.0, 85, 85]))
    assert rows(full)[1].endswith(",temperature [degC],current [A]")
    assert rows(full)[3].endswith(",20.5,85")


def test_foreign_layout():
    layout = TableLayout(
        delimiter=";",
        decimal=",",
        columns={"time": ColumnSpec("T", "ms"), "position": ColumnSpec(1), "flux": ColumnSpec(5)},
    )
    assert rows(ONE, layout, ["head"])[:4] == [
        "head",
        "position [mm];T;No;No;flux [uV s]",
        "-480;0;1;1;0",
        "-478,8;40;2;2;1,5",
    ]


def test_units_that_are_no_power_of_ten():
    layout = TableLayout(columns={"position": ColumnSpec("x", "inch")})
    assert rows(ONE, layout)[0] == "time [s],x,flux [uV s]"
    assert float(rows(ONE, layout)[1].split(",")[1]) == pytest.approx(-480 / 25.4, rel=1e-14)


def test_samples_by_the_kind_of_record():
    steps = replace(ONE, record="increments")
    np.testing.assert_allclose(recorded_samples(steps), [0.0, 1.5e-6, -1.502e-6])
    np.testing.assert_array_equal(recorded_samples(ONE), ONE.flux)
    with pytest.raises(InputError, match="not kept"):
        recorded_samples(replace(ONE, record="voltage"))
    leaky = Integrator("old", "analog", leak_time=100.0)
    with pytest.raises(InputError, match="not kept"):
        recorded_samples(replace(ONE, integrator=leaky))


def test_kept_samples_are_used_only_while_they_belong():
    fields = {name: getattr(ONE, name) for name in ("name", "probe", "integrator")}
    kept = Recorded(
        **fields,
        time=ONE.time,
        position=ONE.position,
        flux=ONE.flux,
        record="increments",
        samples=np.array([0.0, 1.5e-6, -1.502e-6]),
    )
    assert recorded_samples(kept) is kept.samples
    np.testing.assert_allclose(recorded_samples(replace(kept, flux=2 * ONE.flux))[1], 3e-6)
    shorter = replace(kept, time=ONE.time[:2], position=ONE.position[:2], flux=ONE.flux[:2])
    np.testing.assert_allclose(recorded_samples(shorter), [0.0, 1.5e-6])
