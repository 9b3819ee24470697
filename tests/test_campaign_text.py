"""The campaign file as text: what is said, what is left out, what is escaped."""

from __future__ import annotations

import tomllib
from dataclasses import fields, replace

import pytest

from fieldmap.bench import campaign_text as module
from fieldmap.bench.campaign_text import campaign_text
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
)
from fieldmap.readings.sections import RESULT_UNITS

WIRE = Wire("wire", 20, 0.05)
MAIN = Integrator("main")
OUT = PlannedPass("out", WIRE, MAIN, 0.0, 0.6, speed=0.05, rate=50.0)
PLAN = Campaign(
    "trial", Magnet("dipole", "By", gap=0.03), Axis("z", (0.0, 0.5), (0.1, 0.2)), planned=(OUT,)
)


def parsed(campaign=PLAN, layout=None):
    return tomllib.loads(campaign_text(campaign, [], layout))


def test_the_least_campaign():
    assert parsed() == {
        "format": "fieldmap-campaign/1",
        "name": "trial",
        "magnet": {"kind": "dipole", "component": "By", "gap": "30 mm"},
        "axis": {"travel": "z", "integrate": ["0 mm", "500 mm"], "flat": ["100 mm", "200 mm"]},
        "probes": {"wire": {"kind": "wire", "turns": 20, "active_length": "50 mm"}},
        "integrators": {"main": {"kind": "digital"}},
        "passes": [
            {
                "from": "0 mm",
                "to": "600 mm",
                "speed": "50 mm/s",
                "rate": "50 Hz",
                "probe": "wire",
            }
        ],
    }


def test_zero_that_says_something_is_written():
    silent = replace(MAIN, read_noise=0.0, walk_noise=0.0, u_drift=0.0)
    section = parsed(replace(PLAN, planned=(replace(OUT, integrator=silent),)))["integrators"]
    assert set(section["main"]) == {"kind", "read_noise", "walk_noise", "u_drift"}


def test_what_moves_the_gain_of_a_probe():
    warm = replace(
        WIRE,
        u_tilt=2e-3,
        temperature_coefficient=1.7e-5,
        reference_temperature=0.0,
        u_temperature=0.5,
    )
    section = parsed(replace(PLAN, planned=(replace(OUT, probe=warm),)))["probes"]["wire"]
    assert section["u_tilt"] == "2 mrad"
    assert section["temperature_coefficient"] == "0.000017 1/K"
    assert section["reference_temperature"] == "0 degC"
    assert section["u_temperature"] == "0.5 K"


def test_tails_known_otherwise_are_written_even_if_zero():
    axis = replace(PLAN.axis, tail_in=0.0, u_tail_in=0.0, tail_out=-2e-5, u_tail_out=1e-6)
    section = parsed(replace(PLAN, axis=axis))["axis"]
    assert section["tail_in"] == section["u_tail_in"] == "0 T m"
    assert section["tail_out"] == "-0.00002 T m"
    assert section["u_tail_out"] == "0.000001 T m"


def test_integrators_are_named_where_there_are_several():
    second = replace(OUT, integrator=Integrator("second"))
    passes = parsed(replace(PLAN, planned=(OUT, second)))["passes"]
    assert [one["integrator"] for one in passes] == ["main", "second"]


@pytest.mark.parametrize("name", ["a b", 'q"q', "b\\s", "ü", "dot.ted", "del\x7f", "x]\n[y"])
def test_names_are_escaped(name):
    named = replace(OUT, probe=replace(WIRE, name=name))
    raw = parsed(replace(PLAN, name=name, planned=(named,)))
    assert raw["name"] == name
    assert list(raw["probes"]) == [name]
    assert raw["passes"][0]["probe"] == name


def test_a_probe_of_a_flip_is_described():
    coil = Coil("coil", "round", 0.3, window=0.01)
    raw = parsed(replace(PLAN, references=(FlipReference(coil, 0.1, 0.3, 1e-6, x=0.0),)))
    assert raw["probes"]["coil"]["shape"] == "round"
    assert raw["references"] == [
        {
            "kind": "flip",
            "probe": "coil",
            "at": "100 mm",
            "flux_change": "0.3 V s",
            "u_flux_change": "1000 nV s",
            "x": "0 mm",
        }
    ]


@pytest.mark.parametrize("result", RESULT_UNITS)
def test_every_result_can_be_limited(result):
    (limit,) = parsed(replace(PLAN, limits=(Limit(result, 0.2, None),)))["limits"]
    assert limit["result"] == result
    assert set(limit) == {"result", "lower"}


def test_the_rule_of_a_limit_is_told_where_it_is_a_special_one():
    limit = Limit("central_field", None, 1.0, k=3.0, guard=0.0)
    (written,) = parsed(replace(PLAN, limits=(limit,)))["limits"]
    assert (written["k"], written["guard"]) == (3.0, 0.0)


def test_layout_is_told():
    layout = TableLayout(
        delimiter=";",
        decimal=",",
        skip_lines=2,
        header=False,
        rate=100.0,
        per_count=5e-6,
        columns={"position": ColumnSpec(2), "flux": ColumnSpec(3, "uV s")},
    )
    assert parsed(layout=layout)["table"] == {
        "delimiter": ";",
        "decimal": ",",
        "skip_lines": 2,
        "header": False,
        "rate": "100 Hz",
        "per_count": "5 um",
        "position": {"column": 2},
        "flux": {"column": 3, "unit": "uV s"},
    }
    assert "table" not in parsed(layout=TableLayout())


def test_no_field_of_a_record_is_forgotten():
    # a new field of a record needs a new line in the writer
    handled = {
        Wire: {entry.field for entry in module._WIRE + module._WARM}
        | {"name", "turns", "polarity"},
        Coil: {entry.field for entry in module._COIL + module._WARM}
        | {"name", "shape", "polarity"},
        Integrator: {entry.field for entry in module._INTEGRATOR} | {"name", "kind"},
        Stage: {entry.field for entry in module._STAGE} | {"u_scale"},
        PlannedPass: {entry.field for entry in module._PLANNED + module._LINE}
        | {"name", "probe", "integrator", "record"},
        PointReference: {entry.field for entry in module._POINT} | {"x", "y"},
        ZeroReference: {entry.field for entry in module._ZERO} | {"x", "y"},
        FlipReference: {entry.field for entry in module._FLIP} | {"probe", "x", "y"},
        Magnet: {"kind", "component", "gap", "iron_length", "current"},
        Axis: {entry.field for entry in module._AXIS} | {"travel", "integrate", "flat"},
        Limit: {"result", "lower", "upper", "k", "guard"},
        TableLayout: {
            *("delimiter", "decimal", "skip_lines", "header", "rate", "per_count", "columns"),
        },
    }
    for record, names in handled.items():
        assert {one.name for one in fields(record)} == names, record.__name__
