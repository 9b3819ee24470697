"""Hostile input by hand: one sentence or the right numbers, nothing read or written elsewhere."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from dataclasses import replace

import h5py
import numpy as np
import pytest
import xarray as xr
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

import fieldmap
from fieldmap.cli import main
from fieldmap.errors import FieldmapError, InputError, RefusedError
from fieldmap.estimate.map import check_map
from fieldmap.estimate.seal import SEAL, content_digest
from fieldmap.estimate.store import load_map, save_map
from fieldmap.magnet.budget import budget
from fieldmap.magnet.comparison import compare
from fieldmap.magnet.comparison.design_profile import read_design
from fieldmap.readings import text_table
from fieldmap.readings.guess import guess_table
from fieldmap.readings.layout import TableLayout, read_layout
from fieldmap.readings.tables import preview_table, read_table
from fieldmap.readings.toml_text import parse_toml
from fieldmap.show import budget_plots, explore_plots, figures
from fieldmap.show.budget import budget_html
from fieldmap.show.markup import findings_html, results_html, verdicts_html
from fieldmap.show.panels.settings import Settings
from fieldmap.show.report import report_html
from tests.study.fuzz_cases import check_page, check_table
from tests.study.hostile_seeds import COARSE, make_seeds, small_campaign

HEAD = "time [s],position [mm],flux [uV s]\n"
ROWS = "0,0,0\n1,1,1\n2,2,2\n"
NAMES = (
    "<script>alert(1)</script>", "=cmd()", "$\\frac{", "$x^{2", "\\input{/etc/passwd}", "![a](b)",
    "%s{0}`id`", '"><img src=x onerror=a>',
)  # fmt: skip


@pytest.fixture(scope="module")
def seeds(tmp_path_factory):
    return make_seeds(tmp_path_factory.mktemp("sound"))


@pytest.fixture
def folder(seeds, tmp_path):
    for file in seeds.folder.glob("pass_*.csv"):
        (tmp_path / file.name).write_bytes(file.read_bytes())
    (tmp_path / "campaign.toml").write_bytes(seeds.campaign)
    return tmp_path


def sentence(error: FieldmapError) -> str:
    text = str(error)
    assert text.isprintable()
    assert len(text) < 3000
    return text


def refused(call, *arguments) -> str:
    with pytest.raises(FieldmapError) as caught:
        call(*arguments)
    return sentence(caught.value)


def changed(folder, old: str, new: str):
    path = folder / "campaign.toml"
    text = path.read_text(encoding="utf-8")
    assert old in text
    path.write_text(text.replace(old, new, 1), encoding="utf-8")
    return path


def put(tmp_path, data, name="pass.csv"):
    path = tmp_path / name
    path.write_bytes(data if isinstance(data, bytes) else data.encode())
    return path


# --- campaign files


@pytest.mark.parametrize(
    "more",
    [
        "x = " + "[" * 100_000,
        "x = " + "{a = " * 100_000,
        "a." * 200_000 + "a = 1",
        "[" + "a." * 200_000 + "a]",
        "x = " + "9" * 100_000,
        "x = 1" + "0" * 5000,
        'name = "twice"',
        "[magnet]\n[magnet]",
        "\x00",
        "x = 1e400",
        "x = nan",
    ],
    ids=lambda more: more[:12],
)
def test_campaigns_that_are_no_campaigns(folder, more):
    path = folder / "campaign.toml"
    path.write_text(path.read_text(encoding="utf-8") + f"\n{more}\n", encoding="utf-8")
    assert refused(fieldmap.load, folder).startswith("campaign.toml")


def test_a_dotted_key_takes_no_square_of_its_length():
    with pytest.raises(ValueError, match="at line 2"):
        parse_toml("a = 1\n" + "b." * 1_000_000 + "c = 1")
    assert parse_toml("# " + "." * 1000 + "\na.b = 1") == {"a": {"b": 1}}


@pytest.mark.parametrize("code", ["utf-16", "utf-16-le", "utf-32", "latin-1"])
def test_campaigns_in_other_encodings(folder, seeds, code):
    text = seeds.campaign.decode().replace("shop", "Spulenmaß")
    (folder / "campaign.toml").write_bytes(text.encode(code))
    assert "campaign.toml" in refused(fieldmap.load, folder)


def test_a_byte_order_mark_is_tolerated(folder, seeds):
    (folder / "campaign.toml").write_bytes(b"\xef\xbb\xbf" + seeds.campaign)
    assert fieldmap.load(folder).magnet.gap == 0.03


@pytest.mark.parametrize(
    "number", ["1e308", "1e400", "nan", "inf", "-inf", "1e9999", "9" * 119, "0x10", "1_0", "1,5"]
)
def test_huge_numbers_with_units(folder, number):
    changed(folder, 'gap = "30 mm"', f'gap = "{number} m"')
    assert "key 'gap'" in refused(fieldmap.load, folder)


@pytest.mark.parametrize(
    "name",
    ["../pass.csv", "/etc/passwd", "/dev/zero", "C:\\\\x", "\\\\\\\\host\\\\x", "a/../../x",
     "~", ".", "x" * 999, "a/" * 499, "a\\nb", "a\\u001b[31m", "a\\u0000", "link.csv",
     "pipe.csv", "loop.csv", "inner", "inner/link.csv"],
)  # fmt: skip
def test_names_that_lead_elsewhere(folder, name):
    (folder / "link.csv").symlink_to("/etc/hostname")
    (folder / "loop.csv").symlink_to("loop.csv")
    os.mkfifo(folder / "pipe.csv")
    (folder / "inner").mkdir()
    (folder / "inner" / "link.csv").symlink_to(folder.parent)
    changed(folder, '"pass_01.csv"', f'"{name}"')
    refused(fieldmap.load, folder)


@pytest.mark.parametrize("verb", ["reduce", "report", "export"])
@pytest.mark.parametrize("name", ["/dev/zero", "/dev/null", "no\x1b[31m\nway", "y" * 300, "\udcff"])
def test_commands_on_names_that_are_none(tmp_path, capsys, verb, name):
    out = tmp_path / "out"
    assert main([verb, name, "--out", str(out / "t.csv" if verb == "export" else out)]) == 2
    said = capsys.readouterr().err
    assert said.count("\n") == 1
    assert said.rstrip("\n").isprintable()
    assert "fault of its own" not in said
    assert not out.exists()


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ('window = "10 mm"', 'window = "1e6 m"'),
        ('gap = "30 mm"', 'gap = "1e-300 m"'),
        ('gap = "30 mm"', 'gap = "1e300 m"'),
        ('effective_area = "0.3 m^2"', 'effective_area = "1e-300 m^2"'),
        ('field = "0.49 T"', 'field = "1e300 T"'),
        ('u_lag = "2 ms"', 'u_lag = "1e200 s"'),
        ('walk_noise = "200 nV s s^-0.5"', 'walk_noise = "1e200 V s s^-0.5"'),
        ('integrate = ["-120 mm", "120 mm"]', 'integrate = ["-1e300 m", "1e300 m"]'),
    ],
    ids=lambda text: text[:24],
)
def test_extreme_campaigns_are_solved_or_refused(folder, capsys, old, new):
    changed(folder, old, new)
    code = main(["reduce", str(folder), "--out", str(folder / "out")])
    said = capsys.readouterr().err
    assert (code == 0 and not said) or (code == 2 and said.count("\n") == 1)
    assert "fault of its own" not in said


# --- tables in text


@pytest.mark.parametrize(
    "cell",
    ["nan", "inf", "-inf", "1e400", "1e4294967297", "1e18446744073709551617", "9" * 5000, "true",
     "False", "0x10", "1_0", "", "--1", "1e", "=1+1", "=cmd()", "@SUM(A1)", "1 2", "\u0661",
     "\uff11", "<b>", "$x$", "10**5000", "__import__('os')"],
)  # fmt: skip
def test_cells_that_are_no_numbers(tmp_path, cell):
    text = refused(read_table, put(tmp_path, HEAD + f"0,0,{cell}\n" + ROWS))
    assert text.startswith("pass.csv, line 2")


@pytest.mark.parametrize(
    "cell",
    ["0." + "0" * 400 + "1e401", "1" + "0" * 320 + "e-320", "12345678901234567890.123456789",
     "0.1234567890123456789", "1e20", "1e-300", "+1", "1.", ".5", "0e999999999", "1e-4294967297",
     '"1.5"'],
)  # fmt: skip
def test_unusual_numbers_are_what_they_say(tmp_path, cell):
    found = read_table(put(tmp_path, HEAD + f"0,0,{cell}\n" + ROWS.replace("0,0,0\n", "")))
    expected = float(cell.strip('"')) * 1e-6
    np.testing.assert_allclose(found.samples[0], expected, rtol=1e-14, atol=1e-307)


@pytest.mark.parametrize(
    "data",
    [
        (HEAD + ROWS).encode("utf-16"),
        (HEAD + ROWS).encode("utf-16-le"),
        (HEAD + ROWS).encode("utf-32"),
        (HEAD + ROWS + "0,0,µ\n").encode("latin-1"),
        (HEAD + ROWS).encode() + b"\x00",
        (HEAD + ROWS).encode() + (HEAD + ROWS).encode("utf-16-le"),
        b"x" * 1_000_000,
        b"," * 1_000_000,
        HEAD.encode() + b"0,0," + b"9" * 1_000_000 + b"\n1,1,1\n2,2,2\n",
        ",".join(["time [s]"] * 1_000_000).encode(),
        HEAD.replace("position", "time").encode() + ROWS.encode(),
        HEAD.replace("flux", "fl\x1b[31mux").encode() + ROWS.encode(),
        HEAD.replace("mm", "\x1b]0;t\x07").encode() + ROWS.encode(),
        HEAD.replace("mm", "m" * 50_000).encode() + ROWS.encode(),
        HEAD.replace("mm", "<script>").encode() + ROWS.encode(),
        HEAD.replace("mm", "$\\frac{").encode() + ROWS.encode(),
    ],
    ids=range(16),
)
def test_tables_that_are_none(tmp_path, data):
    path = put(tmp_path, data)
    assert refused(read_table, path).startswith("pass.csv")


def test_claims_of_a_layout(tmp_path):
    path = put(tmp_path, HEAD + ROWS)
    assert "skip_lines" in refused(read_table, path, TableLayout(skip_lines=10**12))
    assert preview_table(path, TableLayout(skip_lines=10**12)).rows == ()
    assert "key 'rate'" in refused(read_layout, {"rate": "1e308 Hz"}, "[table]")
    assert read_table(path, read_layout({"rate": "1e15 Hz"}, "[table]")).time[-1] == 2e-15


@pytest.mark.parametrize("planned", ["1e14 s", "1e18 s", "1e300 s"])
def test_planned_passes_that_never_end(folder, planned):
    plan = f'from = "0 m"\nto = "1 m"\nspeed = "1 mm/s"\nrate = "1 kHz"\ndwell = "{planned}"'
    changed(folder, 'file = "pass_01.csv"', plan)
    assert refused(fieldmap.load, folder).startswith("campaign.toml, [[passes]] 1")


@pytest.mark.parametrize("name", ["a" + " " * 60_000 + "x", "(" * 60_000, "a_in " * 12_000])
def test_long_headings_are_guessed_at_quickly(tmp_path, name):
    path = put(tmp_path, f"{name},b,c\n1,2,3\n2,3,4\n3,4,5\n")
    code = f"import fieldmap.readings.guess as g; g.guess_table({str(path)!r})"
    done = subprocess.run(
        [sys.executable, "-c", code],
        timeout=60,
        check=False,
    )
    assert done.returncode == 0


@settings(max_examples=60, deadline=None, suppress_health_check=list(HealthCheck))
@given(st.lists(st.tuples(*[st.text("0123456789+-.eE nainf\"',;_#x", max_size=9)] * 3), max_size=6))
def test_accepted_tables_say_what_their_text_says(tmp_path_factory, rows):
    text = HEAD + ROWS + "".join(",".join(cells) + "\n" for cells in rows)
    path = put(tmp_path_factory.mktemp("t"), text)
    try:
        found = read_table(path)
    except InputError as error:
        sentence(error)
    else:
        check_table(found, text.encode(), TableLayout())


def test_quoted_cells_are_read_as_quickly_as_plain_ones(tmp_path):
    rows = "".join(f'"{i}","{i}.5","{i}e-3"\n' for i in range(20_000))
    found = read_table(put(tmp_path, HEAD + rows))
    assert found.position[-1] == 19.9995
    hidden = read_table(put(tmp_path, HEAD.strip() + ",note\n" + '0,0,0,"a,b"\n' * 4))
    assert hidden.samples.tolist() == [0.0] * 4
    assert "closed quotes" in refused(read_table, put(tmp_path, HEAD + '0,"0\n1,1",1\n' + ROWS))


def test_text_is_told_from_other_bytes_piece_by_piece(monkeypatch):
    monkeypatch.setattr(text_table, "_PIECE", 3)
    whole = "aé𝔘b𝔘𝔘".encode()
    assert text_table.plain_text(whole, "t.csv") == whole
    assert "line 1: found the byte 0xff" in refused(text_table.plain_text, b"ab\xff", "t.csv")
    assert "which is not UTF-8" in refused(text_table.plain_text, whole[:-1], "t.csv")


# --- NetCDF and HDF5


def columns(root, size=3, **more):
    for name, unit in (("time", "s"), ("position", "m"), ("flux", "V s")):
        if name not in root:
            root.create_dataset(name, data=np.arange(float(size)), **more)
        root[name].attrs["units"] = unit


@pytest.mark.parametrize("depth", ["root", "group", "behind a soft link"])
def test_external_links_are_not_followed(tmp_path, depth):
    with h5py.File(tmp_path / "secret.h5", "w") as root:
        columns(root)
    path = tmp_path / "pass.nc"
    with h5py.File(path, "w") as root:
        outside = h5py.ExternalLink(str(tmp_path / "secret.h5"), "flux")
        if depth == "root":
            root["flux"] = outside
        else:
            root.create_group("inner")["flux"] = outside
        if depth == "behind a soft link":
            root["flux"] = h5py.SoftLink("/inner/flux")
        for name in ("time", "position"):
            root[name] = np.arange(3.0)
    assert "data kept in another file" in refused(read_table, path)


def test_a_soft_link_within_the_file_is_followed(tmp_path):
    with h5py.File(tmp_path / "pass.nc", "w") as root:
        columns(root.create_group("inner"))
        for name in ("time", "position", "flux"):
            root[name] = h5py.SoftLink(f"/inner/{name}")
    assert read_table(tmp_path / "pass.nc").samples.tolist() == [0.0, 1.0, 2.0]


def bomb(path, size=2 * 10**9, chunk=10**6):
    with h5py.File(path, "w") as root:
        for name in ("time", "position", "flux"):
            root.create_dataset(name, (size,), "f8", chunks=(chunk,), compression="gzip")
        columns(root)
        root.attrs["format"] = "fieldmap-map/1"


@pytest.mark.parametrize("read", [read_table, load_map, read_design])
def test_bombs_are_not_unpacked(tmp_path, read):
    bomb(tmp_path / "bomb.nc")
    assert "bytes" in refused(read, tmp_path / "bomb.nc") or read is read_design


def test_a_chunk_that_is_larger_than_what_it_holds(tmp_path):
    with h5py.File(tmp_path / "pass.nc", "w") as root:
        for name in ("time", "position", "flux"):
            root.create_dataset(name, (3,), "f8", chunks=(2 * 10**8,), maxshape=(None,))
        columns(root)
    assert "declared in a file of" in refused(read_table, tmp_path / "pass.nc")


@pytest.mark.parametrize("read", [read_table, preview_table])
def test_values_that_cannot_be_unpacked(tmp_path, read):
    path = tmp_path / "pass.nc"
    with h5py.File(path, "w") as root:
        root.create_dataset("flux", data=np.arange(1000.0), compression="gzip", chunks=(1000,))
        columns(root, 1000)
        chunk = root["flux"].id.get_chunk_info(0)
    data = bytearray(path.read_bytes())
    data[chunk.byte_offset : chunk.byte_offset + 40] = b"\xff" * 40
    path.write_bytes(data)
    assert "a damaged NetCDF file" in refused(read, path)


@pytest.mark.parametrize("kind", ["text", "objects", "compound", "complex", "square", "scalar"])
def test_columns_of_other_types(tmp_path, kind):
    made = {
        "text": np.array([b"1", b"2", b"3"]),
        "compound": np.zeros(3, dtype=[("a", "f8")]),
        "complex": np.zeros(3, dtype=complex),
        "square": np.zeros((3, 3)),
        "scalar": np.float64(1.0),
    }
    path = tmp_path / "pass.nc"
    with h5py.File(path, "w") as root:
        if kind == "objects":
            root.create_dataset("flux", (3,), dtype=h5py.vlen_dtype(np.float64))
        else:
            root["flux"] = made[kind]
        columns(root)
    refused(read_table, path)


@pytest.mark.parametrize("at", range(4, 40, 4))
def test_counts_in_a_classic_header(tmp_path, seeds, at):
    for claim in (b"\x7f\xff\xff\xff", b"\xff\xff\xff\xff", b"\x00\x98\x96\x80"):
        path = put(tmp_path, seeds.classic[:at] + claim + seeds.classic[at + 4 :], "pass.nc")
        try:
            assert np.isfinite(read_table(path).samples).all()
        except InputError as error:
            sentence(error)


# --- maps


def test_every_flipped_bit_of_a_map_is_noticed_or_harmless(tmp_path, seeds):
    rng = np.random.default_rng(7)
    noticed = 0
    for _ in range(8):
        torn = bytearray(seeds.map)
        torn[rng.integers(len(torn))] ^= 1 << int(rng.integers(8))
        try:
            found = load_map(put(tmp_path, bytes(torn), "map.nc"))
        except InputError as error:
            noticed += "map.nc" in sentence(error)
        else:
            assert found.identical(seeds.fmap)
    assert noticed >= 4


def test_a_changed_coefficient_is_told(tmp_path, seeds):
    path = put(tmp_path, seeds.map, "map.nc")
    with h5py.File(path, "a") as root:
        root["coefficient"][0, 0, 20] *= 1 + 1e-15
    text = refused(load_map, path)
    assert "a map that has changed since it was written" in text
    assert "fieldmap.save_map" in text


def test_a_map_changed_by_hand_is_told_and_can_be_saved(tmp_path, seeds):
    changed_map = seeds.fmap.assign_attrs(title="Mine")
    changed_map.to_netcdf(tmp_path / "map.nc", engine="h5netcdf")
    assert f"a map without '{SEAL}'" in refused(load_map, tmp_path / "map.nc")
    save_map(changed_map, tmp_path / "map.nc")
    back = load_map(tmp_path / "map.nc")
    assert back.attrs["title"] == "Mine"
    assert SEAL not in back.attrs


def test_the_digest_sees_every_part(seeds):
    fmap = seeds.fmap
    digest = content_digest(fmap)
    others = [
        fmap.assign_attrs(title="x"),
        fmap.assign(B=fmap["B"] + 0.0 * 1),
        fmap.drop_vars("residual"),
        fmap.rename_vars(residual="rest"),
        fmap.assign(knots=fmap["knots"].astype("f4")),
    ]
    others[1]["B"].values[0, 0, 3] = np.nextafter(fmap["B"].values[0, 0, 3], 1.0)
    assert len({digest, *map(content_digest, others)}) == len(others) + 1
    assert content_digest(fmap.assign_attrs({SEAL: "x"})) == digest


@pytest.mark.parametrize(
    ("name", "change"),
    [
        ("campaign", lambda facts: facts.update(name=17)),
        ("campaign", lambda facts: facts.update(name="\ud800")),
        ("campaign", lambda facts: facts["magnet"].update(gap="30 mm")),
        ("campaign", lambda facts: facts["magnet"].update(gap=float("nan"))),
        ("campaign", lambda facts: facts["axis"].update(flat=[0.01, -0.01])),
        ("campaign", lambda facts: facts["axis"].update(integrate=["a", "b"])),
        ("campaign", lambda facts: facts["limits"][0].update(result="magnetic_lenght")),
        ("campaign", lambda facts: facts["limits"][0].update(lower="1")),
        ("campaign", lambda facts: facts["probes"][0].update(turns=None)),
        ("campaign", lambda facts: facts["probes"][0].pop("turns")),
        ("lines", lambda facts: facts[0].update(unknowns=None)),
        ("lines", lambda facts: facts[0].update(references=[99])),
        ("lines", lambda facts: facts[0]["unknowns"][0].update(sd=0)),
        ("lines", lambda facts: facts[0]["unknowns"][0].update(kind="drift", where="no.csv")),
        ("passes", lambda facts: facts[0].update(readings=1.5)),
        ("passes", lambda facts: facts[0].update(walk_noise=1e400)),
        ("findings", lambda facts: facts.append({"code": 1})),
        ("findings", lambda facts: facts.append([])),
    ],
)
def test_facts_of_the_wrong_kind(seeds, name, change):
    facts = json.loads(seeds.fmap.attrs[name])
    change(facts)
    forged = seeds.fmap.assign_attrs({name: json.dumps(facts)})
    assert refused(check_map, forged, "map.nc").startswith("map.nc: ")


@pytest.mark.parametrize("text", ["{", "[" * 100_000, "9" * 5000, "NaN", "null", '"x"', "\x00"])
@pytest.mark.parametrize("name", ["campaign", "lines", "passes", "findings"])
def test_facts_that_are_no_json(seeds, name, text):
    refused(check_map, seeds.fmap.assign_attrs({name: text}), "map.nc")
    refused(check_map, seeds.fmap.assign_attrs({name: 17}), "map.nc")


@pytest.mark.parametrize(
    "name",
    ["coefficient", "coefficient_covariance", "nuisance", "knots", "mapped_range", "z",
     "residual", "design", "increment_line"],
)  # fmt: skip
@pytest.mark.parametrize("kind", ["nan", "huge", "text", "complex", "another dimension", "missing"])
def test_arrays_of_the_wrong_kind(seeds, name, kind):
    forged, one = seeds.fmap.copy(deep=True), seeds.fmap[name]
    values, dims = one.values.astype({"text": str, "complex": complex}.get(kind, float)), one.dims
    if kind in {"nan", "huge"}:
        values.flat[values.size // 2] = np.nan if kind == "nan" else 1e308
    if kind == "missing":
        forged = forged.drop_vars(name)
    elif kind == "another dimension":
        forged = forged.drop_vars(name).assign({name: (tuple(f"{d}_3" for d in dims), values)})
    else:
        forged[name] = (dims, values)
    refused(check_map, forged, "map.nc")


# --- what people and programs see


@pytest.fixture(scope="module")
def named():
    """A campaign in which every name is hostile, and its map."""
    plain, name = small_campaign(), " ".join(NAMES)
    passes = []
    for i, one in enumerate(plain.passes):
        probe = replace(one.probe, name=f"{name} {one.probe.name}")
        integrator = replace(one.integrator, name=name)
        passes.append(replace(one, name=f"{name} {i}", probe=probe, integrator=integrator))
    magnet = replace(plain.magnet, component=name)
    campaign = replace(plain, name=name, passes=tuple(passes), magnet=magnet)
    return campaign, fieldmap.stitch(campaign, knot_spacing=COARSE)


def test_names_are_words_in_reports_tables_and_exports(tmp_path, named, capsys):
    page = report_html(named[1])
    check_page(page)
    assert "&lt;script&gt;" in page
    save_map(named[1], tmp_path / "map.nc")
    assert main(["export", str(tmp_path / "map.nc"), "--out", str(tmp_path / "t.csv")]) == 0
    rows = (tmp_path / "t.csv").read_text(encoding="utf-8").splitlines()
    assert all(row[0] in "#-0123456789p" for row in rows)
    assert all(line.isprintable() for line in capsys.readouterr().out.split("\n"))


def test_names_are_words_in_results_and_budgets(named):
    results = fieldmap.evaluate(named[1])
    whole = results_html(results) + findings_html(results.findings)
    whole += verdicts_html(results, named[0].limits)
    whole += "".join(budget_html(one) for one in budget(named[1]).results.values())
    check_page(whole)


def test_names_start_no_formula_in_a_figure(named):
    campaign, fmap = named
    pictures = (
        figures.passes_picture(campaign),
        figures.profile_picture(fmap),
        figures.uncertainty_picture(fmap),
        figures.residuals_picture(fmap),
        figures.overlaps_picture(fmap),
        explore_plots.readings_picture(campaign.passes),
        explore_plots.agreement_picture(fmap, 0, 1),
        budget_plots.budget_picture(fmap),
    )
    for one in pictures:
        check_page(one._repr_html_())


def test_control_characters_of_a_forged_map_reach_no_terminal(tmp_path, seeds, capsys):
    facts = json.loads(seeds.fmap.attrs["campaign"]) | {"name": "a\x1b[31m\nb\u202e"}
    findings = [{"code": "x\x1b", "severity": "warn", "where": "\x07", "text": "t\n\x1b[0m."}]
    forged = seeds.fmap.assign_attrs(campaign=json.dumps(facts), findings=json.dumps(findings))
    save_map(forged, tmp_path / "map.nc")
    for verb, out in (("report", tmp_path / "out"), ("export", tmp_path / "t.csv")):
        assert main([verb, str(tmp_path / "map.nc"), "--out", str(out)]) == 0
        told = capsys.readouterr()
        assert all(line.isprintable() for line in (told.out + told.err).split("\n"))
    assert "\x1b" not in (tmp_path / "t.csv").read_text(encoding="utf-8")
    assert "\x1b" not in (tmp_path / "out" / "report.html").read_text(encoding="utf-8")


def test_sentences_hold_no_control_characters():
    assert str(InputError("a\nb", "\x1b[31m", "é")) == "a\\nb: found \\x1b[31m, expected é."
    assert str(RefusedError("code", "\u202e", "\udc80.")) == "\\u202e: \\udc80."


# --- settings and profiles


@pytest.mark.parametrize(
    "text",
    ["", "{", "[" * 100_000, "17", "null", '{"format": 1}', "9" * 5000, "NaN", "\x00", "\ufeff{}",
     '{"format": "fieldmap-panel/1", "a": ' + "[" * 100_000, "x" * 2_000_000],
)  # fmt: skip
def test_settings_of_a_panel_that_are_none(tmp_path, text):
    (tmp_path / "campaign.panel.json").write_text(text, encoding="utf-8")
    values, told = Settings().read(tmp_path / "campaign.toml")
    assert values == {}
    assert told.isprintable()
    assert told


def test_settings_in_a_pipe_are_not_waited_for(tmp_path):
    os.mkfifo(tmp_path / "campaign.panel.json")
    assert Settings().read(tmp_path / "campaign.toml")[0] == {}


@pytest.mark.parametrize("value", ["1e308", "-1e308", "1e300", "1e-320", "nan", "1e400", "=cmd()"])
@pytest.mark.parametrize("column", [0, 1, 2])
def test_profiles_with_huge_numbers(tmp_path, seeds, value, column):
    lines = seeds.design.decode().split("\n")
    cells = lines[20].split(",")
    cells[column] = value
    lines[20] = ",".join(cells)
    path = put(tmp_path, "\n".join(lines), "design.csv")
    try:
        found = read_design(path)
        assert np.isfinite(found.line.b).all()
        assert np.isfinite(found.line.covariance).all()
        compare(seeds.fmap, path)
    except FieldmapError as error:
        sentence(error)


@pytest.mark.parametrize("reader", [load_map, read_table, read_design, guess_table])
def test_results_are_read_by_nothing(tmp_path, seeds, reader):
    path = put(tmp_path, seeds.results, "results.json")
    if reader is guess_table:
        assert guess_table(path).columns == {}
    else:
        refused(reader, path)


def test_phantom_dimensions_and_other_files_are_left_alone(folder):
    before = {path: path.read_bytes() for path in folder.glob("*.csv")}
    assert main(["reduce", str(folder), "--out", str(folder / "out")]) == 0
    assert {path: path.read_bytes() for path in folder.glob("*.csv")} == before
    with xr.open_dataset(folder / "out" / "map.nc") as opened:
        assert len(opened.attrs[SEAL]) == 64
