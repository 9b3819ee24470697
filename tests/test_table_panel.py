"""The panel for foreign tables, without browser, kernel or server."""

import shutil
import tomllib

import ipywidgets
import numpy as np
import pytest

from fieldmap.readings import load
from fieldmap.shipped import demo_folder
from fieldmap.show.panels import TablePanel

FOREIGN = demo_folder() / "foreign_tables"
UNITS = {"time": "s", "position": "mm", "flux": "uV s"}


@pytest.fixture(autouse=True)
def _nothing_left_behind(monkeypatch, tmp_path):
    monkeypatch.chdir(tmp_path)
    yield
    ipywidgets.Widget.close_all()


@pytest.fixture
def folder(tmp_path):
    shutil.copytree(FOREIGN, tmp_path / "mine")
    return tmp_path / "mine"


@pytest.fixture
def panel(folder):
    one = TablePanel()
    one.open(folder / "pass_01.csv", folder)
    return one


def fill(panel):
    for name, unit in UNITS.items():
        panel.fields.columns[name].unit.value = unit


def test_a_guess_comes_first(panel):
    fields = panel.fields
    assert (fields.delimiter.value, fields.decimal.value, fields.skip.value) == (";", ",", 3)
    assert fields.header.value
    assert fields.columns["time"].column.value == "T"
    assert fields.columns["flux"].column.value == "Int"
    assert [v for _, v in fields.columns["flux"].column.options] == ["", "T", "Int", "position"]
    assert "Bench 2, log of one travel" in panel.raw.value


def test_what_is_still_missing_is_said(panel):
    assert "column 'T': found no unit" in panel.error
    assert 'role="alert"' in panel.status.value
    assert panel.parsed.value == ""
    fill(panel)
    assert panel.error == ""
    assert "It can be read: 329 readings." in panel.status.value
    assert "position (m)" in panel.parsed.value
    assert ">.16</span>" in panel.parsed.value  # -0.16 m, its point aligned


def test_a_wrong_layout_is_said_at_once_and_taken_back(panel):
    fill(panel)
    panel.fields.decimal.value = "."
    assert "line 5, column 'Int': found '-0,03', expected a number" in panel.error
    assert panel.parsed.value == ""
    panel.fields.decimal.value = ","
    assert panel.error == ""
    panel.fields.skip.value = 0
    assert panel.error
    panel.guess.click()
    assert panel.fields.skip.value == 3


def test_written_and_read_back(panel, folder):
    old = (folder / "campaign.toml").read_text(encoding="utf-8")
    before = load(folder).passes[0].flux
    (folder / "campaign.toml").write_text(old.replace('decimal = ","\n', ""), encoding="utf-8")
    fill(panel)
    panel.write.click()
    assert panel.error == ""
    raw = tomllib.loads((folder / "campaign.toml").read_text(encoding="utf-8"))["table"]
    assert raw == {
        "delimiter": ";",
        "decimal": ",",
        "skip_lines": 3,
        "time": {"column": "T", "unit": "s"},
        "position": {"column": "position", "unit": "mm"},
        "flux": {"column": "Int", "unit": "uV s"},
    }
    assert "The campaign reads now: 3 passes." in panel.told.value
    np.testing.assert_array_equal(load(folder).passes[0].flux, before)
    panel.fields.skip.value = 2
    assert panel.told.value == ""  # what is shown is not what was written


def test_what_cannot_be_read_is_not_written(panel, folder):
    old = (folder / "campaign.toml").read_bytes()
    panel.write.click()
    assert "found no unit" in panel.error
    assert (folder / "campaign.toml").read_bytes() == old
    assert panel.told.value == ""


@pytest.mark.parametrize(
    ("campaign", "words"),
    [
        (str(FOREIGN), "came with the kit"),
        ("", "campaign: found nothing, expected the path"),
        ("nowhere/campaign.toml", "found no such file"),
    ],
)
def test_where_nothing_is_written(panel, campaign, words):
    old = (FOREIGN / "campaign.toml").read_bytes()
    fill(panel)
    panel.campaign.value = campaign
    panel.write.click()
    assert words in panel.error
    assert (FOREIGN / "campaign.toml").read_bytes() == old


def test_a_campaign_that_still_does_not_read_is_said(panel, folder):
    (folder / "pass_02.csv").unlink()
    fill(panel)
    panel.write.click()
    assert "The campaign does not read yet: " in panel.told.value
    assert "pass_02.csv" in panel.told.value


def test_a_rate_counts_and_a_voltage(panel, tmp_path):
    rows = "".join(f"{1000 + 50 * i} {0.1 * (i % 5):.1f}\n" for i in range(40))
    path = tmp_path / "bench.txt"
    path.write_text("counts volts\n" + rows, encoding="utf-8")
    panel.open(path)
    fields = panel.fields
    assert fields.samples.value == "voltage"
    assert fields.columns["position"].column.value == "counts"
    fields.rate.value, fields.per_count.value = "100 Hz", "5 um"
    fields.columns["voltage"].unit.value = "mV"
    assert panel.error == ""
    assert fields.raw() == {
        "delimiter": " ",
        "rate": "100 Hz",
        "position": {"column": "counts", "per_count": "5 um"},
        "voltage": {"column": "volts", "unit": "mV"},
    }
    panel.write.click()
    assert "needs record = &quot;voltage&quot;" in panel.told.value


def test_the_kits_own_layout_needs_nothing(panel):
    panel.open(demo_folder() / "solenoid_fringe" / "pass_01.csv")
    assert panel.error == ""
    assert panel.fields.raw() == {}


def test_without_a_header_columns_go_by_number(panel):
    fill(panel)
    panel.fields.header.value = False
    panel.fields.skip.value = 4
    for name, number in (("time", 1), ("flux", 2), ("position", 3)):
        panel.fields.columns[name].column.value = number
    assert panel.error == ""
    assert panel.fields.raw()["time"] == {"column": 1, "unit": "s"}


@pytest.mark.parametrize("name", ["", "  "])
def test_no_table_named(panel, name):
    panel.path.value = name
    assert "Name a table" in panel.status.value
    assert (panel.raw.value, panel.parsed.value) == ("", "")


@pytest.mark.parametrize("name", ["/", "missing.csv", "a\0b"])
def test_a_table_that_is_none_is_said(panel, name):
    panel.path.value = name
    assert "found" in panel.error
    assert panel.raw.value == ""


def test_nothing_in_a_file_is_taken_for_html(panel, tmp_path):
    path = tmp_path / "evil.csv"
    text = "<script>alert(1)</script>,<img src=x onerror=y>\n1,2\n2,3\n3,4\n"
    path.write_text(text, encoding="utf-8")
    panel.open(path)
    page = panel.raw.value + panel.parsed.value + panel.status.value
    assert "<script" not in page
    assert "<img" not in page


def test_a_failure_of_the_kit_is_shown(panel, monkeypatch, caplog):
    monkeypatch.setattr("fieldmap.show.panels.tables.guess_table", lambda _: 1 / 0)
    panel.guess.click()
    assert "ZeroDivisionError" in panel.error
    assert "alert" in panel.status.value
    assert "looking at the table failed" in caplog.text
