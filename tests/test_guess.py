"""How a table looks: the guess against layouts as benches write them."""

import numpy as np
import pytest

from fieldmap.errors import InputError
from fieldmap.readings import load
from fieldmap.readings.guess import GuessedColumn, guess_table, read_head
from fieldmap.shipped import demo_folder

TIMES = [f"{0.02 * i:.2f}" for i in range(40)]
PLACES = ["-160" if i < 20 else f"{-160 + 0.5 * (i - 20):.1f}" for i in range(40)]
FLUXES = [f"{(7 * i % 11) * 0.3 - 1:.2f}" for i in range(40)]


def rows(*columns, delimiter=",", decimal="."):
    lines = (delimiter.join(cells).replace(".", decimal) for cells in zip(*columns, strict=True))
    return "\n".join([*lines, ""])


def guessed(tmp_path, text, name="bench.txt"):
    path = tmp_path / name
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return guess_table(path)


def numbers(guess):
    """Number or name of the column of each quantity."""
    return {name: one.column for name, one in guess.columns.items()}


def how(guess):
    return guess.delimiter, guess.decimal, guess.skip_lines, guess.header


def test_the_demo_of_foreign_tables():
    found = guess_table(demo_folder() / "foreign_tables" / "pass_01.csv")
    assert how(found) == (";", ",", 3, True)
    assert numbers(found) == {"time": "T", "position": "position", "flux": "Int"}


@pytest.mark.parametrize("name", ["gap_dipole", "slot", "solenoid_fringe"])
def test_the_kits_own_tables(name):
    one = load(demo_folder() / name).passes[0]
    found = guess_table(one.source)
    assert how(found) == (",", ".", 0, True)
    flux = "flux" if one.record == "cumulative" else "dflux"
    assert {"time", "position", flux} <= set(found.columns)
    assert ("current" in found.columns) == (one.current is not None)


def test_semicolons_and_decimal_commas(tmp_path):
    text = "T;Pos;Int\n" + rows(TIMES, PLACES, FLUXES, delimiter=";", decimal=",")
    found = guessed(tmp_path, text)
    assert how(found) == (";", ",", 0, True)
    assert numbers(found) == {"time": "T", "position": "Pos", "flux": "Int"}


def test_tabs_and_units_in_several_forms(tmp_path):
    text = "t/s\tz (mm)\tcoil signal [mV]\n" + rows(TIMES, PLACES, FLUXES, delimiter="\t")
    found = guessed(tmp_path, text)
    assert how(found) == ("\t", ".", 0, True)
    assert found.columns == {
        "time": GuessedColumn("t/s", "s"),
        "position": GuessedColumn("z (mm)", "mm"),
        "voltage": GuessedColumn("coil signal [mV]", "mV"),
    }


def test_blanks_without_a_header(tmp_path):
    text = rows(TIMES, PLACES, FLUXES, delimiter="   ")
    found = guessed(tmp_path, text)
    assert how(found) == (" ", ".", 0, False)
    assert numbers(found) == {"time": 1, "position": 2, "flux": 3}


def test_blanks_with_decimal_commas(tmp_path):
    found = guessed(tmp_path, rows(FLUXES, TIMES, PLACES, delimiter=" ", decimal=","))
    assert how(found) == (" ", ",", 0, False)
    assert numbers(found) == {"time": 2, "position": 3, "flux": 1}


def test_a_header_after_twelve_lines(tmp_path):
    log = "".join(f"line {i}: bench 2, range {i}\n" for i in range(12))
    number = [str(i + 1) for i in range(40)]
    text = log + "n,time_s,pos_mm,phi_uVs\n" + rows(number, TIMES, PLACES, FLUXES)
    found = guessed(tmp_path, text)
    assert how(found) == (",", ".", 12, True)
    assert numbers(found) == {"time": "time_s", "position": "pos_mm", "flux": "phi_uVs"}
    assert found.columns["position"].unit == "mm"


def test_comments_need_no_skipping(tmp_path):
    text = "# bench 2\n\n# range 10\ntime,position,dflux\n" + rows(TIMES, PLACES, FLUXES)
    found = guessed(tmp_path, text)
    assert how(found) == (",", ".", 0, True)
    assert "dflux" in found.columns


def test_a_row_of_units_below_the_names(tmp_path):
    text = "T;Pos;Int\ns;mm;uV s\n" + rows(TIMES, PLACES, FLUXES, delimiter=";", decimal=",")
    found = guessed(tmp_path, text)
    assert how(found) == (";", ",", 2, False)
    assert found.columns == {
        "time": GuessedColumn(1, "s"),
        "position": GuessedColumn(2, "mm"),
        "flux": GuessedColumn(3, "uV s"),
    }


def test_counts_of_an_encoder_and_words_beside_numbers(tmp_path):
    counts = [str(1000 + 50 * i) for i in range(40)]
    text = "time [ms],encoder,U [mV],state\n" + rows(TIMES, counts, FLUXES, ["OK"] * 40)
    found = guessed(tmp_path, text)
    assert found.columns["position"] == GuessedColumn("encoder", "", counts=True)
    assert numbers(found)["voltage"] == "U [mV]"


def test_temperature_and_current(tmp_path):
    text = "time [s],position [mm],flux [uV s],coil temp [degC],supply [A]\n"
    found = guessed(tmp_path, text + rows(TIMES, PLACES, FLUXES, ["20.5"] * 40, ["85.01"] * 40))
    assert numbers(found)["temperature"] == "coil temp [degC]"
    assert numbers(found)["current"] == "supply [A]"


def test_a_delimiter_at_the_end_of_each_row(tmp_path):
    text = "T;Pos;Int;\n" + rows(TIMES, PLACES, FLUXES, [""] * 40, delimiter=";")
    assert numbers(guessed(tmp_path, text)) == {"time": "T", "position": "Pos", "flux": "Int"}


def test_names_that_stand_twice_go_by_number(tmp_path):
    text = "time,pos,pos,flux\n" + rows(TIMES, PLACES, FLUXES, FLUXES)
    assert set(map(type, numbers(guessed(tmp_path, text)).values())) == {int}


@pytest.mark.parametrize("ends", ["\r\n", "\r"])
def test_other_line_ends_and_a_byte_order_mark(tmp_path, ends):
    text = "T;Pos;Int\n" + rows(TIMES, PLACES, FLUXES, delimiter=";", decimal=",")
    found = guessed(tmp_path, b"\xef\xbb\xbf" + text.replace("\n", ends).encode())
    assert how(found) == (";", ",", 0, True)
    assert numbers(found)["time"] == "T"


@pytest.mark.parametrize(
    "text", ["hello\nworld\n", "1\n2\n3\n", '"a\n"b\n', "#\n#\n", ";;;\n;;;\n"]
)
def test_what_is_no_table_gives_the_usual_layout(tmp_path, text):
    found = guessed(tmp_path, text)
    assert how(found) == (",", ".", 0, True)
    assert found.columns == {}


def test_whole_netcdf_files(tmp_path):
    import xarray as xr

    columns = {
        "t": ("r", np.arange(5.0), {"units": "s"}),
        "stage": ("r", np.arange(5.0), {"units": "mm"}),
        "dflux": ("r", np.arange(5.0), {"units": "uV s"}),
    }
    xr.Dataset(columns).to_netcdf(tmp_path / "pass.nc", engine="h5netcdf")
    found = guess_table(tmp_path / "pass.nc")
    assert numbers(found) == {"dflux": "dflux", "time": "t", "position": "stage"}


@pytest.mark.parametrize("data", [b"", b"\0\1\2", b"\xff\xfe1\0", b"1,2\n\xe9,3\n"])
def test_what_cannot_be_read_is_said(tmp_path, data):
    with pytest.raises(InputError, match=r"bench.txt.*: found"):
        guessed(tmp_path, data)


def test_a_missing_file_and_a_folder(tmp_path):
    for path in (tmp_path / "none.csv", tmp_path, "a\0b"):
        with pytest.raises(InputError):
            guess_table(path)


def test_only_the_head_of_a_large_file_is_read(tmp_path, monkeypatch):
    path = tmp_path / "large.csv"
    path.write_text("T;Pos;Int\n" + 20_000 * "0,1;5;2,5\n", encoding="utf-8")
    monkeypatch.setattr("fieldmap.readings.guess.read_bytes", lambda *_: 1 / 0)
    data, whole = read_head(path)
    assert not whole
    assert len(data) <= 65_536
    assert data.endswith(b"\n")
    assert guess_table(path).delimiter == ";"
