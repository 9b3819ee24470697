"""The head of a table, as it stands and as it is read."""

import numpy as np
import pytest

from fieldmap.errors import InputError
from fieldmap.readings import load
from fieldmap.readings.layout import ColumnSpec, TableLayout
from fieldmap.readings.preview import open_head, raw_lines
from fieldmap.shipped import demo_folder

FOREIGN = demo_folder() / "foreign_tables"
LAYOUT = TableLayout(
    delimiter=";",
    decimal=",",
    skip_lines=3,
    columns={
        "time": ColumnSpec("T", "s"),
        "position": ColumnSpec(3, "mm"),
        "flux": ColumnSpec("Int", "uV s"),
    },
)


def test_the_head_is_read_as_the_campaign_reads_the_table():
    head = open_head(FOREIGN / "pass_01.csv", LAYOUT)
    assert head.whole
    assert [one.text for one in head.headings] == ["T", "Int", "position"]
    columns, one = head.columns("flux"), load(FOREIGN).passes[0]
    np.testing.assert_array_equal(columns["position"], one.position)
    np.testing.assert_array_equal(columns["flux"], one.flux)


def test_a_large_file_is_read_up_to_a_line(tmp_path):
    path = tmp_path / "large.csv"
    lines = "".join(f"{i},{i},0\n" for i in range(30_000))
    path.write_text("time [s],position [mm],flux [uV s]\n" + lines, encoding="utf-8")
    head = open_head(path, TableLayout())
    time = head.columns("flux")["time"]
    assert not head.whole
    assert 4000 < len(time) < 30_000
    np.testing.assert_array_equal(time, np.arange(len(time)))


def test_a_rate_in_place_of_times(tmp_path):
    path = tmp_path / "bench.csv"
    path.write_text("position [mm],flux [uV s]\n0,0\n1,1\n2,2\n", encoding="utf-8")
    time = open_head(path, TableLayout(rate=10.0)).columns("flux")["time"]
    np.testing.assert_allclose(time, [0.0, 0.1, 0.2])


def test_errors_name_the_line(tmp_path):
    path = tmp_path / "bench.csv"
    path.write_text("time [s],position [mm],flux [uV s]\n0,0,0\n1,x,1\n2,2,2\n", encoding="utf-8")
    with pytest.raises(InputError, match=r"bench.csv, line 3, column 'position': found 'x'"):
        open_head(path, TableLayout()).columns("flux")


def test_lines_as_they_stand(tmp_path):
    path = tmp_path / "bench.csv"
    path.write_text("a\tb\x07<script>\n" + 300 * "x" + "\n" + 20 * "1\n", encoding="utf-8")
    lines = raw_lines(path)
    assert len(lines) == 12
    assert lines[0] == "a→b·<script>"
    assert lines[1] == 159 * "x" + "…"


def test_variables_of_netcdf(tmp_path):
    import xarray as xr

    columns = {"time": ("r", np.arange(3.0), {"units": "s"}), "flux": ("r", np.arange(3.0))}
    xr.Dataset(columns).to_netcdf(tmp_path / "pass.nc", engine="h5netcdf")
    assert raw_lines(tmp_path / "pass.nc") == ("time [s]", "flux [no unit]")
