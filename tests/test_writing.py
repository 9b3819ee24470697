"""Campaigns written and read back are the same; nothing is overwritten unasked."""

from __future__ import annotations

import tomllib
from dataclasses import replace

import numpy as np
import pytest

from fieldmap.bench.bench_errors import Errors
from fieldmap.bench.sources import TanhMagnet
from fieldmap.bench.twin import record
from fieldmap.bench.writing import write_campaign
from fieldmap.errors import InputError
from fieldmap.readings import (
    Axis,
    Campaign,
    Coil,
    ColumnSpec,
    FlipReference,
    Integrator,
    Limit,
    Magnet,
    PlannedPass,
    PointReference,
    Stage,
    TableLayout,
    Wire,
    ZeroReference,
    load,
    make_pass,
)

WIRE = Wire("wire", 20, 0.05, u_active_length=2e-5, width=0.4e-3, polarity=-1)
COIL = Coil('coil "α"\\', "round", 0.3, u_effective_area=6e-5, window=0.01)
MAIN = Integrator("main", read_noise=5e-8, walk_noise=2e-7, u_drift=1e-6, resolution=1e-9)
OLD = Integrator(
    "old",
    "analog",
    read_noise=0.0,
    walk_noise=1 / 3 * 1e-7,
    drift=-1e-6,
    full_scale=0.5,
    leak_time=4000.0,
    max_voltage=5.0,
)
STAGE = Stage(u_scale=2e-5, u_position=5e-6, u_offset=5e-5, u_lag=2e-3, u_backlash=4e-6)
MAGNET = TanhMagnet(0.5, 0.3, 0.03)
OUT = PlannedPass("out", WIRE, MAIN, -0.3, 0.3, speed=0.05, rate=30.0, dwell=1.0)


def planned_campaign(*planned):
    return Campaign(
        name='Trial "magnet", 85 A',
        magnet=Magnet("dipole", "By", gap=0.03, iron_length=0.27, current=85.0),
        axis=Axis("z", (-0.25, 0.25), (-0.05, 1 / 30)),
        stage=STAGE,
        planned=planned,
        references=(
            PointReference(0.0, 0.52718, 1e-5),
            ZeroReference(0.28, 0.3, 5e-6, x=0.0, y=-0.001),
            FlipReference(COIL, 0.01, 0.31631, 2e-6),
        ),
        limits=(
            Limit("magnetic_length", 0.381 - 0.5e-3, 0.381 + 0.5e-3),
            Limit("integrated_field", 0.2, None),
            Limit("homogeneity", None, 1e-4),
            Limit("central_field", 0.1, 1 / 3),
        ),
    )


def measured_campaign(*planned, **options):
    plan = planned_campaign(*planned)
    return record(plan, MAGNET, np.random.default_rng(1), Errors(), **options)


def assert_same_readings(loaded, original):
    for name in ("time", "position", "flux", "temperature", "current"):
        mine, theirs = getattr(original, name), getattr(loaded, name)
        if mine is None:
            assert theirs is None
        else:
            largest = np.abs(mine).max()
            np.testing.assert_allclose(theirs, mine, rtol=4e-16, atol=1e-15 * largest)
    for name in ("name", "probe", "integrator", "x", "y", "record"):
        assert getattr(loaded, name) == getattr(original, name)


EVERY_RECORD = [replace(OUT, record=how) for how in ("cumulative", "increments", "voltage")]


def test_measured_campaign_reads_back(tmp_path):
    passes = [*EVERY_RECORD, replace(OUT, probe=COIL, integrator=OLD, x=0.01, y=-0.002)]
    written = measured_campaign(*passes)
    loaded = load(write_campaign(written, tmp_path / "new"))
    for name in ("name", "magnet", "axis", "stage", "references", "limits", "planned"):
        assert getattr(loaded, name) == getattr(written, name)
    for mine, theirs in zip(written.passes, loaded.passes, strict=True):
        assert_same_readings(theirs, mine)


def test_planned_campaign_reads_back(tmp_path):
    plan = planned_campaign(
        replace(OUT, name="planned pass 1"),
        replace(OUT, name="planned pass 2", probe=COIL, record="voltage", x=0.01, start=1 / 3),
    )
    loaded = load(write_campaign(plan, tmp_path))
    assert loaded.planned == plan.planned
    assert loaded.passes == ()
    assert [path.name for path in tmp_path.iterdir()] == ["campaign.toml"]


def test_half_measured_campaign_reads_back(tmp_path):
    half = replace(measured_campaign(OUT), planned=(replace(OUT, name="planned pass 2"),))
    loaded = load(write_campaign(half, tmp_path))
    assert loaded.planned == half.planned
    assert_same_readings(loaded.passes[0], half.passes[0])


def test_loaded_campaign_can_be_written_again(tmp_path):
    passes = [replace(OUT, record=how) for how in ("cumulative", "increments")]
    first = write_campaign(measured_campaign(*passes), tmp_path / "a")
    second = write_campaign(load(first), tmp_path / "b")
    assert first.read_bytes() == second.read_bytes()
    for mine, theirs in zip(load(first).passes, load(second).passes, strict=True):
        assert_same_readings(theirs, mine)


def test_every_column_reads_back(tmp_path):
    written = measured_campaign(
        *EVERY_RECORD,
        current=lambda time: 85.0 - 0.1 * np.exp(-time),
        temperature=lambda time: 20.0 + 0.1 * time,
    )
    loaded = load(write_campaign(written, tmp_path))
    for mine, theirs in zip(written.passes, loaded.passes, strict=True):
        assert_same_readings(theirs, mine)


def test_file_is_laid_out_as_people_write_it(tmp_path):
    file = write_campaign(measured_campaign(OUT), tmp_path)
    text = file.read_text()
    raw = tomllib.loads(text)
    assert raw["format"] == "fieldmap-campaign/1"
    assert raw["magnet"]["gap"] == "30 mm"
    assert raw["integrators"]["main"]["walk_noise"] == "200 nV s s^-0.5"
    assert raw["stage"]["u_position"] == "5 um"
    assert raw["limits"][0] == {
        "result": "magnetic_length",
        "nominal": "381 mm",
        "tolerance": "0.5 mm",
    }
    assert raw["limits"][1] == {"result": "integrated_field", "lower": "0.2 T m"}
    assert "drift" not in raw["integrators"]["main"]
    lines = (tmp_path / "pass_01.csv").read_text().splitlines()
    assert lines[:2] == ['# probe "wire"', "time [s],position [mm],flux [uV s]"]
    assert lines[2].startswith("0,-300,")


FOREIGN = TableLayout(
    delimiter=";",
    decimal=",",
    columns={
        "time": ColumnSpec("T", "s"),
        "position": ColumnSpec(4, "um"),
        "flux": ColumnSpec("Int", "mV s"),
        "voltage": ColumnSpec("U", "uV"),
        "temperature": ColumnSpec("Temp", "K"),
    },
)


def test_tables_of_another_bench_read_back(tmp_path):
    warm = {"temperature": lambda time: 20.0 + 0.5 * time}
    written = measured_campaign(OUT, replace(OUT, record="voltage"), **warm)
    head = ("Bench 2", "a line; with, all sorts", "")
    loaded = load(write_campaign(written, tmp_path, layout=FOREIGN, preamble=head))
    for mine, theirs in zip(written.passes, loaded.passes, strict=True):
        np.testing.assert_allclose(theirs.temperature, mine.temperature, rtol=1e-13)
        assert_same_readings(replace(theirs, temperature=None), replace(mine, temperature=None))
    lines = (tmp_path / "pass_01.csv").read_text().splitlines()
    assert tuple(lines[:3]) == head
    assert lines[3] == "T;Int;Temp;position"
    assert lines[4].endswith(";-300000")


def test_columns_left_over_hold_the_number_of_the_reading(tmp_path):
    columns = {name: ColumnSpec(i) for name, i in (("time", 3), ("position", 2), ("flux", 5))}
    layout = TableLayout(header=False, columns=columns)
    with pytest.raises(InputError, match="unit"):
        load(write_campaign(measured_campaign(OUT), tmp_path / "a", layout=layout))
    units = {"time": "s", "position": "mm", "flux": "uV s"}
    told = {name: ColumnSpec(spec.column, units[name]) for name, spec in columns.items()}
    written = measured_campaign(OUT)
    layout = replace(layout, columns=told)
    loaded = load(write_campaign(written, tmp_path / "b", layout=layout))
    assert_same_readings(loaded.passes[0], written.passes[0])
    first, second = (tmp_path / "b" / "pass_01.csv").read_text().splitlines()[:2]
    assert first.startswith("1,-300,0,1,")
    assert second.startswith("2,-300,0.0333")


def test_counts_and_rate_read_back(tmp_path):
    layout = TableLayout(rate=30.0, per_count=5e-6)
    written = measured_campaign(OUT, per_count=5e-6)
    loaded = load(write_campaign(written, tmp_path, layout=layout))
    assert_same_readings(loaded.passes[0], written.passes[0])
    assert (tmp_path / "pass_01.csv").read_text().splitlines()[1].startswith("-60000,")


def test_units_of_columns_can_be_chosen(tmp_path):
    written = measured_campaign(OUT)
    file = write_campaign(written, tmp_path, units={"position": "um", "flux": "nV s"})
    assert (tmp_path / "pass_01.csv").read_text().splitlines()[1].endswith("[um],flux [nV s]")
    assert_same_readings(load(file).passes[0], written.passes[0])


def test_plain_names_are_kept_and_others_replaced(tmp_path):
    def named(name):
        return make_pass([0.0, 0.1, 0.2], [0.0, 1.0, 2.0], rate=1.0, probe=WIRE, name=name)

    hostile = ("../out.csv", "scan a.csv", "UP.csv", "up.csv", "pass", ".csv", "a/b.csv")
    passes = tuple(named(name) for name in hostile)
    folder = tmp_path / "inner"
    loaded = load(write_campaign(replace(planned_campaign(), passes=passes), folder))
    names = [one.name for one in loaded.passes]
    assert names[2] == "UP.csv"
    assert names[0] == "pass_01.csv"
    assert len({name.casefold() for name in names}) == len(hostile)
    assert [path.name for path in tmp_path.iterdir()] == ["inner"]


def test_a_replacement_name_avoids_the_names_in_use(tmp_path):
    first, second = measured_campaign(OUT, OUT).passes
    clash = (replace(first, name="b a d"), replace(second, name="pass_01.csv"))
    loaded = load(write_campaign(replace(planned_campaign(), passes=clash), tmp_path))
    assert [one.name for one in loaded.passes] == ["pass_01_.csv", "pass_01.csv"]


def test_a_folder_in_use_is_left_alone(tmp_path):
    (tmp_path / "notes.txt").write_text("mine")
    with pytest.raises(InputError, match="not empty"):
        write_campaign(measured_campaign(OUT), tmp_path)
    assert [path.name for path in tmp_path.iterdir()] == ["notes.txt"]
    write_campaign(measured_campaign(OUT), tmp_path, overwrite=True)
    assert (tmp_path / "notes.txt").read_text() == "mine"
    assert load(tmp_path).name == 'Trial "magnet", 85 A'


def test_a_file_in_place_of_the_folder_is_refused(tmp_path):
    (tmp_path / "file").write_text("mine")
    with pytest.raises(InputError, match="a folder"):
        write_campaign(measured_campaign(OUT), tmp_path / "file")


def test_nothing_is_written_where_something_cannot_be(tmp_path):
    measured = measured_campaign(*EVERY_RECORD)
    stale = replace(measured.passes[2], flux=1.01 * measured.passes[2].flux)
    campaign = replace(measured, passes=(*measured.passes[:2], stale))
    with pytest.raises(InputError, match="samples are not kept"):
        write_campaign(campaign, tmp_path / "new")
    assert not (tmp_path / "new").exists()


def test_a_changed_flux_is_written_where_it_can_be(tmp_path):
    one = measured_campaign(replace(OUT, record="increments")).passes[0]
    changed = replace(one, flux=2.0 * one.flux)
    loaded = load(write_campaign(replace(planned_campaign(), passes=(changed,)), tmp_path))
    np.testing.assert_allclose(loaded.passes[0].flux, changed.flux, atol=1e-14)


def test_two_things_of_one_name_are_refused(tmp_path):
    other = replace(OUT, probe=replace(WIRE, turns=21))
    with pytest.raises(InputError, match="two different probes"):
        write_campaign(planned_campaign(OUT, other), tmp_path / "a")
    other = replace(OUT, integrator=replace(MAIN, drift=1e-6))
    with pytest.raises(InputError, match="two different integrators"):
        write_campaign(planned_campaign(OUT, other), tmp_path / "b")


def test_lines_before_the_header_need_a_layout(tmp_path):
    with pytest.raises(InputError, match="layout"):
        write_campaign(measured_campaign(OUT), tmp_path, preamble=("Bench 2",))
