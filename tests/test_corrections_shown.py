"""Corrections in texts, in the report and at the shell."""

from __future__ import annotations

import json
import tomllib
from dataclasses import replace

import pytest

import fieldmap
from fieldmap.bench.writing import write_campaign
from fieldmap.cli import main
from fieldmap.estimate.findings import Finding
from fieldmap.estimate.provenance import map_corrections
from fieldmap.readings import Correction, corrected, load
from fieldmap.show.corrections import correction_rows, offered, switched_on_text
from fieldmap.show.markup import findings_html
from fieldmap.show.report import report_html
from fieldmap.show.tables import findings_text
from tests.offering import LATE, TURNED, offer, small
from tests.shop import planned

SCANS = planned((-0.4, 0.4), (0.4, -0.4), rate=20.0)


@pytest.fixture(scope="module")
def campaign():
    return small(SCANS)


@pytest.fixture(scope="module")
def fmap(campaign):
    made = [LATE, Correction("step", LATE.where, start=9.0), Correction("factor", LATE.where, 1.0)]
    return fieldmap.stitch(corrected(campaign, made), knot_spacing=0.02)


@pytest.fixture
def bench(campaign, tmp_path):
    write_campaign(campaign, tmp_path / "bench")
    return tmp_path / "bench"


def test_rows(fmap):
    late, step, factor = correction_rows(fmap)
    assert late[:2] == ("pass_02.csv", "read 1 ms late, u = 2 ms")
    assert late[4] == "ms"
    assert float(late[3]) < 2
    assert step[1] == "step of unknown size at 9 s"
    assert step[4] in ("nV·s", "µV·s")
    assert abs(float(step[2])) < 4 * float(step[3])  # there was none
    assert factor == ("pass_02.csv", "flux multiplied by 1, u = 0 %", "1", "0", "")


def test_the_report_has_a_section_of_its_own(fmap, campaign):
    page = report_html(fmap)
    assert "Corrections switched on</h2>" in page
    assert "read 1 ms late, u = 2 ms" in page
    plain = report_html(fieldmap.stitch(campaign, knot_spacing=0.02))
    assert "Corrections switched on" not in plain


def test_text_with_entries_to_keep(fmap):
    text = switched_on_text(fmap, [LATE])
    assert text.startswith("Corrections switched on\npass_02.csv: read 1 ms late, u = 2 ms; found ")
    entries = tomllib.loads(text.partition("campaign file:\n")[2])
    assert entries["corrections"] == [LATE.as_entry()]


def test_findings_say_how_to_switch_it_on():
    finding = Finding(
        "pass-late", "warn", "a<b>.csv", "It is late.", replace(LATE, where="a<b>.csv")
    )
    assert offered([finding, finding]) == [finding.correction]
    text = findings_text([finding])
    assert "--correct a<b>.csv" in " ".join(text.split())
    html = findings_html([finding])
    assert "--correct a&lt;b&gt;.csv" in html
    assert "<b>.csv" not in html


def run(capsys, *arguments):
    code = main([*arguments])
    said = capsys.readouterr()
    return code, said.out, said.err


def test_shell_reduces_again_with_what_is_offered(bench, tmp_path, capsys, monkeypatch):
    offer(monkeypatch, LATE, TURNED)
    out = tmp_path / "out"
    code, said, _ = run(capsys, "reduce", str(bench), "--out", str(out), "--correct", LATE.where)
    assert code == 0
    assert "Corrections switched on\npass_02.csv: read 1 ms late, u = 2 ms; found " in said
    entries = said.partition("campaign file:\n")[2].partition("\nWritten")[0]
    assert tomllib.loads(entries)["corrections"] == [LATE.as_entry()]
    results = json.loads((out / "results.json").read_text(encoding="utf-8"))
    found = {one["code"]: one for one in results["findings"]}
    assert found["corrections-by-hand"]["where"] == LATE.where
    assert found["test-fault"]["correction"] == TURNED.as_entry()  # not asked for
    assert "--correct pass_01.csv" in " ".join(said.split())
    made = map_corrections(fieldmap.load_map(out / "map.nc"))
    assert [one.correction for one in made] == [LATE]
    # what was printed does the same in the campaign file
    with (bench / "campaign.toml").open("a", encoding="utf-8") as file:
        file.write("\n" + entries)
    again = fieldmap.evaluate(fieldmap.stitch(load(bench)))
    assert again.as_dict()["lines"] == results["lines"]


@pytest.mark.parametrize(
    ("where", "words"),
    [
        ("all", "--correct all: found no finding that offers a correction there"),
        ("pass_02.csv", "--correct pass_02.csv: found no finding that offers a correction there"),
        ("pass_2.csv", "--correct: found 'pass_2.csv', expected a pass among"),
    ],
)
def test_shell_says_when_nothing_is_offered(bench, tmp_path, capsys, where, words):
    out = tmp_path / "out"
    code, said, error = run(capsys, "reduce", str(bench), "--out", str(out), "--correct", where)
    assert (code, said) == (2, "")
    assert words in error
    assert error.count("\n") == 1
    assert not out.exists()
