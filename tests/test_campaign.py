"""Campaign files: the example of the design, every key, and one sentence for each mistake."""

import hashlib
import re
from dataclasses import asdict

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from fieldmap.errors import InputError
from fieldmap.readings import (
    RESULT_UNITS,
    Axis,
    Coil,
    FlipReference,
    Integrator,
    Limit,
    Magnet,
    PointReference,
    Stage,
    Wire,
    ZeroReference,
    load,
)

TABLE = "time [s],position [mm],flux [uV s]\n0.00,-600,0\n0.01,-599,2\n0.02,-598,3\n"

EXAMPLE = """\
format = "fieldmap-campaign/1"
name = "Bending magnet 3, 85 A"

[magnet]
kind = "dipole"
component = "By"
gap = "30 mm"
iron_length = "400 mm"
current = "85 A"

[axis]
travel = "z"
integrate = ["-600 mm", "600 mm"]
flat = ["-50 mm", "50 mm"]

[probes.wire]
kind = "wire"
turns = 20
active_length = "50.00 mm"
u_active_length = "0.02 mm"
width = "0.4 mm"

[probes.coil]
kind = "coil"
shape = "rectangular"
effective_area = "0.3000 m^2"
u_effective_area = "0.00006 m^2"
window = "10 mm"

[integrators.main]
kind = "digital"
read_noise = "50 nV s"
walk_noise = "200 nV s s^-0.5"
drift = "0 V s/s"
u_drift = "1e-6 V s/s"
resolution = "1 nV s"
full_scale = "0.5 V s"
leak_time = "4000 s"
max_voltage = "5 V"

[stage]
u_scale = "20e-6"
u_position = "5 um"
u_offset = "0.05 mm"
u_lag = "2 ms"

[[passes]]
file = "pass_01.csv"
probe = "wire"
integrator = "main"
x = "0 mm"
y = "0 mm"
record = "cumulative"

[[references]]
kind = "point"
at = "0 mm"
field = "0.52718 T"
u = "0.00001 T"

[[references]]
kind = "zero"
from = "580 mm"
to = "600 mm"
u = "5 uT"

[[references]]
kind = "flip"
probe = "coil"
at = "0 mm"
flux_change = "0.31631 V s"
u_flux_change = "2e-6 V s"

[[limits]]
result = "magnetic_length"
nominal = "381.0 mm"
tolerance = "0.5 mm"
"""

SHORT = """\
format = "fieldmap-campaign/1"
name = "Short"
[magnet]
kind = "other"
component = "Bz"
gap = "1 mm"
[axis]
travel = "z"
integrate = ["-600 mm", "600 mm"]
flat = ["-50 mm", "50 mm"]
[probes.wire]
kind = "wire"
turns = 1
active_length = "50 mm"
[[passes]]
file = "pass_01.csv"
probe = "wire"
"""


@pytest.fixture
def bench(tmp_path):
    """Give a folder with one pass and a function that writes a campaign there and loads it."""
    (tmp_path / "pass_01.csv").write_text(TABLE)

    def written(content, name="campaign.toml"):
        path = tmp_path / name
        path.write_bytes(content if isinstance(content, bytes) else content.encode())
        return load(path)

    written.folder = tmp_path
    return written


def sentence(bench, content):
    with pytest.raises(InputError) as error:
        bench(content)
    assert "\n" not in str(error.value)
    return str(error.value)


def changed(old, new, content=EXAMPLE):
    assert content.count(old) >= 1, old
    return content.replace(old, new, 1)


class TestExample:
    def test_every_section_comes_in_si(self, bench):
        campaign = bench(EXAMPLE)
        assert campaign.name == "Bending magnet 3, 85 A"
        assert campaign.magnet == Magnet("dipole", "By", 0.03, 0.4, 85.0)
        assert campaign.axis == Axis("z", (-0.6, 0.6), (-0.05, 0.05))
        assert campaign.stage == Stage(20e-6, 5e-6, 0.05e-3, 2e-3, 0.0)
        wire = Wire("wire", 20.0, 0.05, 0.02e-3, 0.4e-3, 1)
        coil = Coil("coil", "rectangular", 0.3, 6e-5, 0.01, 1)
        assert campaign.passes[0].probe == wire
        assert campaign.passes[0].integrator == Integrator(
            "main", "digital", 50e-9, 200e-9, 0.0, 1e-6, 1e-9, 0.5, 4000.0, 5.0
        )
        assert campaign.references == (
            PointReference(0.0, 0.52718, 1e-5),
            ZeroReference(0.58, 0.6, 5e-6),
            FlipReference(coil, 0.0, 0.31631, 2e-6),
        )
        (limit,) = campaign.limits
        assert limit.result == "magnetic_length"
        assert (limit.lower, limit.upper) == pytest.approx((0.3805, 0.3815), rel=1e-15)
        assert campaign.planned == ()

    def test_passes_bring_their_readings_and_hashes(self, bench):
        campaign = bench(EXAMPLE)
        (only,) = campaign.passes
        np.testing.assert_array_equal(only.position, [-0.6, -0.599, -0.598])
        np.testing.assert_array_equal(only.flux, [0.0, 2e-6, 3e-6])
        assert (only.name, only.x, only.y, only.record) == ("pass_01.csv", 0.0, 0.0, "cumulative")
        assert only.source == (bench.folder / "pass_01.csv").resolve()
        assert only.sha256 == hashlib.sha256(TABLE.encode()).hexdigest()
        assert campaign.sha256 == hashlib.sha256(EXAMPLE.encode()).hexdigest()
        assert campaign.path == bench.folder / "campaign.toml"

    def test_a_folder_stands_for_its_campaign_file(self, bench):
        bench(EXAMPLE)
        assert load(bench.folder).name == load(str(bench.folder)).name == "Bending magnet 3, 85 A"

    def test_byte_order_mark_and_windows_line_ends(self, bench):
        content = b"\xef\xbb\xbf" + EXAMPLE.replace("\n", "\r\n").encode()
        assert bench(content).magnet.gap == 0.03


class TestOptions:
    def test_what_is_left_out_has_its_default(self, bench):
        campaign = bench(SHORT)
        assert campaign.stage == Stage()
        assert campaign.magnet == Magnet("other", "Bz", 0.001, None, None)
        assert campaign.passes[0].integrator == Integrator("main")
        assert campaign.references == campaign.limits == campaign.planned == ()

    def test_extra_keys(self, bench):
        content = SHORT.replace("turns = 1", "turns = 1.5\npolarity = -1")
        content = content.replace('probe = "wire"\n', 'probe = "wire"\nx = "1 mm"\ny = "-2 mm"\n')
        content += '[stage]\nu_backlash = "3 um"\n[integrators.lab]\nkind = "analog"\n'
        content += (
            '[[references]]\nkind = "zero"\nfrom = "0 m"\nto = "1 m"\nu = "1 uT"\nx = "1 mm"\n'
        )
        campaign = bench(content)
        only = campaign.passes[0]
        assert (only.probe.polarity, only.probe.turns, only.x, only.y) == (-1, 1.5, 0.001, -0.002)
        assert only.probe.gain == pytest.approx(-0.075)
        assert campaign.stage.u_backlash == 3e-6
        assert only.integrator == Integrator("lab", "analog")
        assert (campaign.references[0].x, campaign.references[0].y) == (0.001, None)

    @pytest.mark.parametrize(
        ("record", "column", "flux"),
        [
            ("increments", "dflux [V s]", [1.0, 3.0, 6.0]),
            ("voltage", "voltage [V]", [0.0, 0.015, 0.04]),
        ],
    )
    def test_records(self, bench, record, column, flux):
        table = f"time [s],position [m],{column}\n0.00,0,1\n0.01,1,2\n0.02,2,3\n"
        (bench.folder / "pass_01.csv").write_text(table)
        only = bench(SHORT.replace("[[passes]]", f'[[passes]]\nrecord = "{record}"')).passes[0]
        np.testing.assert_allclose(only.flux, flux)
        assert only.record == record

    def test_droop_of_an_analog_integrator_is_undone(self, bench):
        content = SHORT + '[integrators.a]\nkind = "analog"\nleak_time = "10 s"\n'
        (bench.folder / "pass_01.csv").write_text(
            "time [s],position [m],flux [V s]\n0,0,1\n1,1,1\n3,2,1\n"
        )
        np.testing.assert_allclose(bench(content).passes[0].flux, [1.0, 1.1, 1.3])

    def test_tables_for_all_passes_and_for_one(self, bench):
        (bench.folder / "a.csv").write_text("pos;I\n0;1,5\n10;2,5\n20;3,5\n")
        (bench.folder / "b.csv").write_text("I;pos\n1,5;0\n2,5;10\n3,5;20\n")
        content = SHORT.replace('file = "pass_01.csv"', 'file = "a.csv"').replace(
            "[[passes]]",
            '[table]\ndelimiter = ";"\ndecimal = ","\nrate = "2 Hz"\n'
            'position = {column = "pos", unit = "mm"}\nflux = {column = 2, unit = "mV s"}\n'
            "[[passes]]",
        )
        content += '[[passes]]\nfile = "b.csv"\nprobe = "wire"\n'
        content += '[passes.table]\nrate = "4 Hz"\nflux = {column = 1, unit = "mV s"}\n'
        first, second = bench(content).passes
        np.testing.assert_array_equal(first.flux, [1.5e-3, 2.5e-3, 3.5e-3])
        np.testing.assert_array_equal(second.flux, first.flux)
        np.testing.assert_array_equal(second.position, [0.0, 0.01, 0.02])
        np.testing.assert_array_equal(first.time, [0.0, 0.5, 1.0])
        np.testing.assert_array_equal(second.time, [0.0, 0.25, 0.5])

    def test_planned_passes(self, bench):
        content = SHORT.replace(
            'file = "pass_01.csv"',
            'from = "600 mm"\nto = "-600 mm"\nspeed = "20 mm/s"\nrate = "100 Hz"\ndwell = "10 s"',
        )
        content += '[[passes]]\nfile = "pass_01.csv"\nprobe = "wire"\n'
        campaign = bench(content)
        (planned,) = campaign.planned
        assert (planned.name, planned.start, planned.stop) == ("planned pass 1", 0.6, -0.6)
        assert (planned.speed, planned.rate, planned.dwell) == (0.02, 100.0, 10.0)
        assert planned.probe is campaign.passes[0].probe
        assert len(campaign.passes) == 1

    def test_files_in_folders_below(self, bench):
        (bench.folder / "run 1").mkdir()
        (bench.folder / "run 1" / "p.csv").write_text(TABLE)
        for name in ("run 1/p.csv", r"run 1\\p.csv", "./run 1/p.csv"):
            only = bench(SHORT.replace("pass_01.csv", name)).passes[0]
            assert only.source == (bench.folder / "run 1" / "p.csv").resolve()

    @pytest.mark.parametrize(
        ("keys", "limit"),
        [
            ('result = "integrated_field"\nlower = "0.2 T m"', (0.2, None)),
            ('result = "central_field"\nupper = "500 mT"', (None, 0.5)),
            ('result = "homogeneity"\nlower = "0"\nupper = "1e-4"', (0.0, 1e-4)),
            ('result = "homogeneity"\nupper = 1e-4', (None, 1e-4)),
            ('result = "peak_position"\nnominal = "-1 mm"\ntolerance = "1 mm"', (-0.002, 0.0)),
        ],
    )
    def test_limits(self, bench, keys, limit):
        (made,) = bench(f"{SHORT}[[limits]]\n{keys}\n").limits
        assert (made.lower, made.upper) == limit

    @pytest.mark.parametrize(
        ("keys", "rule"),
        [
            ("", (None, 1.0)),
            ("k = 3\nguard = 0.5", (3, 0.5)),
            ("guard = 0", (None, 0)),
        ],
    )
    @pytest.mark.parametrize("ends", ['upper = "1 T"', 'nominal = "1 T"\ntolerance = "1 mT"'])
    def test_rule_of_a_limit(self, bench, keys, rule, ends):
        (made,) = bench(f'{SHORT}[[limits]]\nresult = "central_field"\n{ends}\n{keys}\n').limits
        assert (made.k, made.guard) == rule

    @pytest.mark.parametrize(
        ("keys", "words"),
        [
            ("k = 0", "key 'k': found 0, expected a value above zero"),
            ("guard = -1", "key 'guard': found -1, expected zero or a value above it"),
            ('guard = "1"', "key 'guard': found '1', expected a number"),
            ("k = nan", "key 'k'"),
        ],
    )
    def test_refuses_a_rule_that_is_none(self, bench, keys, words):
        entry = f'[[limits]]\nresult = "central_field"\nupper = "1 T"\n{keys}\n'
        with pytest.raises(InputError, match=re.escape(words)):
            bench(SHORT + entry)

    def test_every_result_may_have_a_limit(self, bench):
        units = {"1": "1", "m": "mm", "T": "mT", "T m": "T m"}
        entries = [
            f'[[limits]]\nresult = "{result}"\nupper = "1 {units[unit]}"\n'
            for result, unit in RESULT_UNITS.items()
        ]
        assert len(bench(SHORT + "".join(entries)).limits) == len(RESULT_UNITS) == 14


MISTAKES = [
    ("gap", "gab", ("[magnet]: found the unknown key 'gab', expected one of 'kind', "
     "'component', 'gap', 'iron_length', 'current'; write 'gap' if that is meant")),
    ('gap = "30 mm"\n', "",
     "[magnet]: found no key 'gap', expected the keys 'kind', 'component', 'gap'; add it"),
    ('gap = "30 mm"', 'gap = "0 mm"',
     "[magnet], key 'gap': found '0 mm', expected a value above zero"),
    ('gap = "30 mm"', "gap = 30",
     ("[magnet], key 'gap': found the number 30 without a unit, expected a quantity in m "
     'written as text, such as "30 mm"; write the unit, in quotes')),
    ('kind = "dipole"', 'kind = "dipol"',
     ("[magnet], key 'kind': found 'dipol', expected one of 'dipole', 'quadrupole', "
     "'solenoid', 'other'; write 'dipole' if that is meant")),
    ('component = "By"', "component = 2",
     "[magnet], key 'component': found 2, expected a text; write it in quotes"),
    ('component = "By"', 'component = ""',
     "[magnet], key 'component': found '', expected a text of 1 to 200 printable characters"),
    ('name = "Bending magnet 3, 85 A"', r'name = "a\nb"',
     "key 'name': found 'a\\nb', expected a text of 1 to 200 printable characters"),
    ('travel = "z"', 'travel = "w"',
     "[axis], key 'travel': found 'w', expected one of 'x', 'y', 'z', 's'"),
    ('["-600 mm", "600 mm"]', '["600 mm", "-600 mm"]',
     ("[axis], key 'integrate': found ['600 mm', '-600 mm'], expected the smaller value first; "
     "exchange or mend the two")),
    ('["-600 mm", "600 mm"]', '["-600 mm"]',
     ("[axis], key 'integrate': found a list of 1, expected a list of two quantities in m, "
     'such as ["-50 mm", "50 mm"]')),
    ('["-50 mm", "50 mm"]', '"50 mm"',
     ("[axis], key 'flat': found '50 mm', expected a list of two quantities in m, such as "
     '["-50 mm", "50 mm"]')),
    ('["-50 mm", "50 mm"]', '["-50 mm", "700 mm"]',
     ("[axis], key 'flat': found from -0.05 m to 0.7 m, expected a window inside integrate, "
     "-0.6 m to 0.6 m; mend one of the two")),
    ("turns = 20", 'turns = "20"',
     ("[probes.wire], key 'turns': found '20', expected a number; write it without quotes and "
     "unit")),
    ("turns = 20", "turns = 0",
     "[probes.wire], key 'turns': found 0, expected a value above zero"),
    ("turns = 20", "turns = nan",
     "[probes.wire], key 'turns': found nan, expected a finite number"),
    ("turns = 20", "turns = true",
     ("[probes.wire], key 'turns': found true, expected a number; write it without quotes and "
     "unit")),
    ("turns = 20", "turns = 20\npolarity = 2",
     "[probes.wire], key 'polarity': found 2, expected one of 1, -1"),
    ('active_length = "50.00 mm"', 'active_length = "-50 mm"',
     ("[probes.wire], key 'active_length': found '-50 mm', expected a value above zero; give "
     "its size, and set polarity = -1 if the probe turns the sign")),
    ('u_active_length = "0.02 mm"', 'u_active_length = "-0.02 mm"',
     ("[probes.wire], key 'u_active_length': found '-0.02 mm', expected zero or a value above "
     "it")),
    ('kind = "wire"', 'kind = "wier"',
     ("[probes.wire], key 'kind': found 'wier', expected one of 'wire', 'coil'; write 'wire' "
     "if that is meant")),
    ('kind = "wire"\n', "",
     "[probes.wire]: found no key 'kind', expected kind = one of 'wire', 'coil'; add it"),
    ('shape = "rectangular"', 'shape = "square"',
     "[probes.coil], key 'shape': found 'square', expected one of 'rectangular', 'round'"),
    ('effective_area = "0.3000 m^2"', 'effective_area = "0.3 m"',
     ("[probes.coil], key 'effective_area': found '0.3 m', which is not a unit of the "
     "dimension of 'm^2', expected a quantity in m^2 written as text, such as "
     '"0.3000 m^2"')),
    ('window = "10 mm"\n', "",
     ("[probes.coil]: found no key 'window', expected the keys 'kind', 'shape', "
      "'effective_area', 'window'; add it")),
    ('kind = "digital"', 'kind = "numeric"',
     "[integrators.main], key 'kind': found 'numeric', expected one of 'digital', 'analog'"),
    ('read_noise = "50 nV s"', 'read_noise = "-50 nV s"',
     ("[integrators.main], key 'read_noise': found '-50 nV s', expected zero or a value above "
     "it")),
    ('walk_noise = "200 nV s s^-0.5"', 'walk_noise = "200 nV s"',
     ("[integrators.main], key 'walk_noise': found '200 nV s', which is not a unit of the "
     "dimension of 'V s s^-0.5', expected a quantity in V s s^-0.5 written as text, such as "
     '"200 nV s s^-0.5"')),
    ('u_position = "5 um"', 'u_positon = "5 um"',
     ("[stage]: found the unknown key 'u_positon', expected one of 'u_scale', 'u_position', "
     "'u_offset', 'u_lag', 'u_backlash'; write 'u_position' if that is meant")),
    ('u_scale = "20e-6"', "u_scale = -20e-6",
     "[stage], key 'u_scale': found -2e-05, expected zero or a value above it"),
    ('probe = "wire"', 'probe = "wir"',
     ("[[passes]] 1, key 'probe': found 'wir', expected a probe among 'wire', 'coil'; write "
     "'wire' if that is meant")),
    ('integrator = "main"', 'integrator = "second"',
     "[[passes]] 1, key 'integrator': found 'second', expected an integrator among 'main'"),
    ('record = "cumulative"', 'record = "increment"',
     ("[[passes]] 1, key 'record': found 'increment', expected one of 'cumulative', "
     "'increments', 'voltage'; write 'increments' if that is meant")),
    ('file = "pass_01.csv"\n', "",
     "[[passes]] 1: found no key 'file', expected the keys 'file', 'probe'; add it"),
    ('file = "pass_01.csv"', 'file = "pass_01.csv"\nspeed = "1 mm/s"\nrate = "1 Hz"',
     ("[[passes]] 1: found 'file' beside 'rate', 'speed', expected 'file' for a measured "
     "pass, or 'from', 'to', 'speed', 'rate' for a planned one; delete one or the other")),
    ('file = "pass_01.csv"', 'speed = "1 mm/s"',
     ("[[passes]] 1: found no key 'from', expected the keys 'from', 'to', 'speed', 'rate', "
      "'probe'; add it")),
    ('x = "0 mm"', 'z = "0 mm"',
     ("[[passes]] 1: found the unknown key 'z', expected one of 'file', 'probe', "
     "'integrator', 'record', 'x', 'y', 'table'; mend or delete it")),
    ('kind = "point"', 'kind = "dot"',
     "[[references]] 1, key 'kind': found 'dot', expected one of 'point', 'zero', 'flip'"),
    ('u = "0.00001 T"', 'u = "0 T"',
     "[[references]] 1, key 'u': found '0 T', expected a value above zero"),
    ('to = "600 mm"', 'to = "500 mm"',
     ("[[references]] 2: found 'from' 0.58 m and 'to' 0.5 m, expected 'from' below 'to'; "
     "exchange or mend the two")),
    ('probe = "coil"', 'probe = "wire"',
     ("[[references]] 3, key 'probe': found 'wire', which is no coil, expected a coil; name a "
     "coil")),
    ('probe = "coil"', 'probe = "coils"',
     ("[[references]] 3, key 'probe': found 'coils', expected a probe among 'wire', 'coil'; "
     "write 'coil' if that is meant")),
    ('u_flux_change = "2e-6 V s"', 'u_flux_change = "-2e-6 V s"',
     "[[references]] 3, key 'u_flux_change': found '-2e-6 V s', expected a value above zero"),
    ('result = "magnetic_length"', 'result = "magnetic_lenght"',
     ("[[limits]] 1, key 'result': found 'magnetic_lenght', expected a result among "
     "'integrated_field', 'integrated_field_total', 'central_field', 'magnetic_length', "
     "'boundary_in', 'boundary_out', 'magnetic_centre', 'peak_field', 'peak_position', "
     "'homogeneity', 'tail_in', 'tail_out', 'fringe_integral_in', 'fringe_integral_out'; "
     "write 'magnetic_length' if that is meant")),
    ('nominal = "381.0 mm"', 'nominal = "381.0 T"',
     ("[[limits]] 1, key 'nominal': found '381.0 T', which is not a unit of the dimension of "
     "'m', expected a quantity in m written as text, such as \"30 mm\"")),
    ('tolerance = "0.5 mm"', 'tolerance = "-0.5 mm"',
     "[[limits]] 1, key 'tolerance': found '-0.5 mm', expected a value above zero"),
    ('tolerance = "0.5 mm"\n', "",
     ("[[limits]] 1: found the keys 'nominal', expected 'nominal' and 'tolerance', or 'lower' "
     "or 'upper' or both; write one of these")),
    ('nominal = "381.0 mm"\ntolerance = "0.5 mm"', 'lower = "2 mm"\nupper = "1 mm"',
     ("[[limits]] 1: found 'lower' 0.002 and 'upper' 0.001, expected 'lower' below 'upper'; "
     "exchange or mend the two")),
    ('nominal = "381.0 mm"\ntolerance = "0.5 mm"\n', "",
     ("[[limits]] 1: found no limit, expected 'nominal' and 'tolerance', or 'lower' or "
     "'upper' or both; write one of these")),
    ("[stage]", "[stages]",
     ("found the unknown key 'stages', expected one of 'format', 'name', 'magnet', 'axis', "
     "'probes', 'integrators', 'stage', 'table', 'passes', 'references', 'limits', "
     "'corrections'; write 'stage' if that is meant")),
    ("[[passes]]", "[passes]",
     ("key 'passes': found a table, expected a list; write each entry under double square "
     "brackets")),
    ('name = "Bending magnet 3, 85 A"', "name = 1979-05-27",
     "key 'name': found the date 1979-05-27, expected a text; write it in quotes"),
]  # fmt: skip


class TestRefusals:
    """Each mistake in the example: what is changed, and the sentence it brings."""

    @pytest.mark.parametrize(("old", "new", "expected"), MISTAKES)
    def test_keys(self, bench, old, new, expected):
        join = ", " if expected.startswith(("[", "key")) else ": "
        assert sentence(bench, changed(old, new)) == f"campaign.toml{join}{expected}."

    @pytest.mark.parametrize(
        ("line", "expected"),
        [
            ("", ("found no such key, expected 'fieldmap-campaign/1'; write format = "
             '"fieldmap-campaign/1" in the first line')),
            ('format = "fieldmap/1"', ("found 'fieldmap/1', expected 'fieldmap-campaign/1'; write "
             'format = "fieldmap-campaign/1" in the first line')),
            ('format = "fieldmap-campaign/2"', ("found 'fieldmap-campaign/2', expected "
             "'fieldmap-campaign/1'; use a version of the kit that reads this format")),
        ],
    )  # fmt: skip
    def test_format(self, bench, line, expected):
        content = changed('format = "fieldmap-campaign/1"', line)
        assert sentence(bench, content) == f"campaign.toml, key 'format': {expected}."

    def test_nothing_to_measure_with(self, bench):
        content = SHORT.replace("[probes.wire]", "[probes]\n[other]")
        assert "found the unknown key 'other'" in sentence(bench, content)
        content = SHORT[: SHORT.index("[probes.wire]")] + "[probes]\n" + SHORT[SHORT.index("[[") :]
        assert sentence(bench, content) == (
            "campaign.toml, [probes]: found no probe, expected at least one section such as "
            "[probes.wire]; describe the probe."
        )
        assert sentence(bench, SHORT.replace("[probes.wire]", "[probes]")) == (
            "campaign.toml, [probes.kind]: found 'wire', expected a table of keys; write it as a "
            "[section] of its own."
        )

    def test_no_passes(self, bench):
        content = "passes = []\n" + SHORT[: SHORT.index("[[")]
        assert sentence(bench, content) == (
            "campaign.toml, [[passes]]: found no pass, expected at least one entry under "
            "[[passes]]; add the passes."
        )
        assert sentence(bench, SHORT[: SHORT.index("[[")]) == (
            "campaign.toml: found no key 'passes', expected the keys 'format', 'name', 'magnet', "
            "'axis', 'probes', 'passes'; add it."
        )

    def test_two_integrators_and_none_named(self, bench):
        content = SHORT + "[integrators.a]\n[integrators.b]\n"
        assert sentence(bench, content) == (
            "campaign.toml, [[passes]] 1, key 'integrator': found no such key, expected an "
            "integrator among 'a', 'b'; add it."
        )

    def test_the_same_file_twice(self, bench):
        content = SHORT + '[[passes]]\nfile = "./pass_01.csv"\nprobe = "wire"\n'
        assert sentence(bench, content) == (
            "campaign.toml, [[passes]] 2, key 'file': found './pass_01.csv', named already in "
            "[[passes]] 1, expected each file once; delete one entry."
        )

    def test_the_same_limit_twice(self, bench):
        content = EXAMPLE + '[[limits]]\nresult = "magnetic_length"\nupper = "1 m"\n'
        assert sentence(bench, content) == (
            "campaign.toml, [[limits]] 2, key 'result': found 'magnetic_length' again, expected "
            "each result once; join the two."
        )

    @pytest.mark.parametrize(
        "name",
        ["/etc/passwd", "../pass_01.csv", "a/../../b.csv", r"C:\\data\\p.csv", r"..\\p.csv",
         r"\\\\server\\p.csv", "C:p.csv", "up/p.csv"],
    )  # fmt: skip
    def test_files_outside_the_folder(self, bench, name):
        (bench.folder / "up").symlink_to(bench.folder.parent, target_is_directory=True)
        message = sentence(bench, SHORT.replace("pass_01.csv", name))
        assert message.startswith("campaign.toml, [[passes]] 1, key 'file': found '")
        assert message.endswith(
            "expected a path within the folder of the campaign file; put the file there and name "
            "it relative to that folder."
        )

    def test_a_loop_of_links(self, bench):
        (bench.folder / "loop").symlink_to("loop")
        assert "expected a" in sentence(bench, SHORT.replace("pass_01.csv", "loop/p.csv"))

    def test_errors_of_a_pass_name_its_file(self, bench):
        (bench.folder / "pass_01.csv").write_text(TABLE.replace("-599", "x"))
        assert sentence(bench, SHORT).startswith(
            "pass_01.csv, line 3, column 'position': found 'x'"
        )
        message = sentence(bench, SHORT.replace("pass_01.csv", "pass_02.csv"))
        assert message.startswith("pass_02.csv: found no such file")

    def test_errors_of_a_table_section_name_the_pass(self, bench):
        content = SHORT + "[passes.table]\ndelimeter = ';'\n"
        assert sentence(bench, content).startswith(
            "campaign.toml, [[passes]] 1, [table]: found the unknown key 'delimeter'"
        )
        (bench.folder / "pass_01.csv").write_text("I;x\n1;2\n")
        content = SHORT + "[passes.table]\nflux = {column = 1, unit = 'V s'}\nrate = '1 Hz'\n"
        assert "set delimiter = ';' in [table]" in sentence(bench, content)

    @pytest.mark.parametrize(
        ("old", "new", "expected"),
        [
            ('to = "-6 m"', 'to = "6 m"', ("found 'from' equal to 'to', expected two different "
             "positions; mend one of the two.")),
            ('rate = "1 Hz"', 'rate = "1e12 Hz"', ("found a travel that takes 1.2e+13 readings, "
             "expected 3 to 1e+08; mend 'speed', 'rate' or 'dwell'.")),
            ('rate = "1 Hz"', 'rate = "0.1 Hz"', ("found a travel that takes 1.2 readings, "
             "expected 3 to 1e+08; mend 'speed', 'rate' or 'dwell'.")),
        ],
    )  # fmt: skip
    def test_planned_passes(self, bench, old, new, expected):
        planned = 'from = "6 m"\nto = "-6 m"\nspeed = "1 m/s"\nrate = "1 Hz"'
        content = SHORT.replace('file = "pass_01.csv"', planned.replace(old, new))
        assert sentence(bench, content) == f"campaign.toml, [[passes]] 1: {expected}"


class TestRefusedFiles:
    def test_missing(self, tmp_path):
        with pytest.raises(InputError) as error:
            load(tmp_path)
        path = str(tmp_path / "campaign.toml")
        assert str(error.value) == (
            f"campaign.toml: found no such file, expected a file at {path!r}; mend the name."
        )

    def test_syntax(self, bench):
        assert sentence(bench, changed("turns = 20", "turns = 20 mm")) == (
            "campaign.toml, line 18, column 12: found text that is not TOML (Expected newline or "
            "end of document after a statement), expected a campaign file in TOML; mend the line."
        )

    def test_a_key_twice(self, bench):
        message = sentence(bench, changed("turns = 20", "turns = 20\nturns = 21"))
        assert message.startswith("campaign.toml, line 19, column 11: found text that is not TOML")

    def test_depth_and_length(self, bench):
        assert "not TOML (a value too deep or too long)" in sentence(bench, "a = " + "[" * 10**5)
        assert "not TOML (a value too deep or too long)" in sentence(bench, "a = " + "9" * 10**4)

    def test_encoding(self, bench):
        assert sentence(bench, b"# ok\n# \xb5\n") == (
            "campaign.toml, line 2: found the byte 0xb5, which is not UTF-8, expected text in "
            "UTF-8; save it in UTF-8."
        )

    def test_empty_and_huge(self, bench):
        assert sentence(bench, "").startswith("campaign.toml: found an empty file")
        assert sentence(bench, b"#" * 4_000_001) == (
            "campaign.toml: found 4000001 bytes, expected at most 4000000; choose another file."
        )


KEYS = sorted({line.split(" = ")[0] for line in EXAMPLE.splitlines() if " = " in line})
VALUES = st.sampled_from(
    ['""', '"x"', '"1"', '"1 m"', '"-1 mm"', '"nan m"', "0", "-1", "1e400", "nan", "true", "[]",
     "{}", '["1 m", "2 m"]', "1979-05-27", '"9**9**9 m"', '"1e308 km"', '"pass_01.csv"']
)  # fmt: skip


def test_tails_known_otherwise(bench):
    tails = 'tail_in = "12 uT m"\nu_tail_in = "1 uT m"\ntail_out = "0 T m"\nu_tail_out = "0 T m"\n'
    axis = bench(SHORT.replace("[probes.wire]", tails + "[probes.wire]")).axis
    assert axis == Axis("z", (-0.6, 0.6), (-0.05, 0.05), 12e-6, 1e-6, 0.0, 0.0)
    assert bench(SHORT).axis == Axis("z", (-0.6, 0.6), (-0.05, 0.05))


@pytest.mark.parametrize(
    ("line", "expected"),
    [
        (
            'tail_in = "12 uT m"',
            (
                "campaign.toml, [axis]: found 'tail_in' alone, expected 'tail_in' and 'u_tail_in' "
                "together; add the other one."
            ),
        ),
        (
            'u_tail_out = "1 uT m"',
            (
                "campaign.toml, [axis]: found 'u_tail_out' alone, expected 'tail_out' and "
                "'u_tail_out' together; add the other one."
            ),
        ),
        ('tail_in = "12 uT"', "key 'tail_in': found '12 uT'"),
        ('u_tail_in = "-1 uT m"', "key 'u_tail_in': found '-1 uT m', expected zero or a value"),
    ],
)
def test_a_tail_comes_with_its_uncertainty(bench, line, expected):
    assert expected in sentence(bench, SHORT.replace("[probes.wire]", line + "\n[probes.wire]"))


@settings(
    deadline=None,
    max_examples=150,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)
@given(line=st.integers(0, EXAMPLE.count("\n") - 1), key=st.sampled_from(KEYS), value=VALUES)
def test_any_line_exchanged_is_a_campaign_or_one_sentence(bench, line, key, value):
    lines = EXAMPLE.splitlines()
    lines[line] = f"{key} = {value}"
    message = "campaign.toml"
    try:
        campaign = bench("\n".join(lines))
    except InputError as error:
        message = str(error)
    else:
        numbers = [value for value in asdict(campaign.magnet).values() if isinstance(value, float)]
        assert np.isfinite(numbers).all()
        assert all(isinstance(limit, Limit) for limit in campaign.limits)
    named = str(value).strip('"')  # a file that is not there is named as it was written
    assert message.startswith(("campaign.toml", "pass_01.csv", f"{named}: "))
    assert "\n" not in message


def test_what_moves_the_gain_and_the_window_of_a_probe(tmp_path):
    extra = (
        'window = "10 mm"\nu_window = "0.05 mm"\nu_tilt = "3 mrad"\n'
        'temperature_coefficient = "17e-6 1/K"\nreference_temperature = "295.15 K"\n'
        'u_temperature = "500 mK"'
    )
    (tmp_path / "campaign.toml").write_text(
        EXAMPLE.replace('window = "10 mm"', extra), encoding="utf-8"
    )
    (tmp_path / "pass_01.csv").write_text(TABLE, encoding="utf-8")
    campaign = load(tmp_path / "campaign.toml")
    (coil,) = {one.probe for one in campaign.references if isinstance(one, FlipReference)}
    found = (coil.u_window, coil.u_tilt, coil.temperature_coefficient, coil.u_temperature)
    assert found == pytest.approx((5e-5, 3e-3, 17e-6, 0.5))
    assert coil.reference_temperature == pytest.approx(22.0)


def test_a_temperature_without_a_unit_is_one_sentence(tmp_path):
    extra = 'window = "10 mm"\nreference_temperature = "22 mm"'
    (tmp_path / "campaign.toml").write_text(
        EXAMPLE.replace('window = "10 mm"', extra), encoding="utf-8"
    )
    (tmp_path / "pass_01.csv").write_text(TABLE, encoding="utf-8")
    with pytest.raises(InputError, match=r"reference_temperature.*'mm'.*'degC' or 'K'"):
        load(tmp_path / "campaign.toml")
