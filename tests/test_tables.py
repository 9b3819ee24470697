"""Pass tables in text: what is read, and one sentence for whatever cannot be read."""

import csv
import hashlib
import os
import tracemalloc

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from fieldmap.errors import InputError
from fieldmap.readings import text_blocks
from fieldmap.readings.layout import ColumnSpec, TableLayout, read_layout
from fieldmap.readings.tables import preview_table, read_table

HEAD = "time [s],position [mm],flux [uV s]\n"
INFINITE = "an infinite value, expected a finite number"
MEND = "mend or delete the row"
ROWS = "0.00,-600.0,0.0\n0.01,-599.5,2.5\n0.02,-599.0,4.0\n"


def write(folder, content, name="pass_01.csv"):
    path = folder / name
    path.write_bytes(content if isinstance(content, bytes) else content.encode())
    return path


def refusal(path, layout=None, **options):
    with pytest.raises(InputError) as error:
        read_table(path, layout, **options)
    assert "\n" not in str(error.value)
    return str(error.value)


def sentence(folder, content, layout=None, **options):
    return refusal(write(folder, content), layout, **options)


def layout_of(**keys):
    return read_layout(keys, "campaign.toml, [table]")


def assert_usual(table):
    np.testing.assert_array_equal(table.time, [0.0, 0.01, 0.02])
    np.testing.assert_array_equal(table.position, [-0.6, -0.5995, -0.599])
    np.testing.assert_array_equal(table.samples, [0.0, 2.5e-6, 4e-6])


class TestKitTables:
    def test_columns_come_in_si(self, tmp_path):
        path = write(tmp_path, "# upstream half\n# outward\n" + HEAD + ROWS)
        table = read_table(path)
        assert_usual(table)
        assert table.temperature is None
        assert table.current is None
        assert table.sha256 == hashlib.sha256(path.read_bytes()).hexdigest()
        assert table.place(2) == "pass_01.csv, line 6"

    @pytest.mark.parametrize(
        "content",
        [
            b"\xef\xbb\xbf" + (HEAD + ROWS).encode(),
            (HEAD + ROWS).replace("\n", "\r\n").encode(),
            (HEAD + ROWS).replace("\n", "\r").encode(),
            (HEAD + ROWS).rstrip().encode(),
            ("\n# c\n\n" + HEAD + "# µ\n\n" + ROWS + "\n\n").encode(),
            (HEAD + ROWS.replace("\n", "\n  # within\n\n")).encode(),
            (HEAD + ROWS.replace(",", " , ")).encode(),
            (HEAD + ROWS.replace("\n", ",\n")).encode(),
            (HEAD.replace("\n", ",remark\n") + ROWS.replace("\n", ",ok # 1\n")).encode(),
            (HEAD.replace("\n", ",remark\n") + ROWS.replace("\n", ',"a, b"\n')).encode(),
            (HEAD + ROWS.replace("2.5", '"2.5"')).encode(),
            (HEAD.replace("\n", ",valid\n") + ROWS.replace("\n", ",True\n")).encode(),
            (HEAD.replace("uV s", "µV s") + ROWS).encode(),
            (HEAD.replace(" [", "[") + ROWS).encode(),
        ],
    )
    def test_spellings_of_the_same_table(self, tmp_path, content):
        assert_usual(read_table(write(tmp_path, content)))

    def test_order_and_further_columns_do_not_matter(self, tmp_path):
        text = "flux [V s],note,temperature [K],position [m],current [A],time [ms]\n"
        text += "1,a,273.15,0.1,85,0\n2,b,274.15,0.2,85,10\n3,c,275.15,0.3,86,20\n"
        table = read_table(write(tmp_path, text))
        np.testing.assert_array_equal(table.samples, [1.0, 2.0, 3.0])
        np.testing.assert_array_equal(table.time, [0.0, 0.01, 0.02])
        np.testing.assert_allclose(table.temperature, [0.0, 1.0, 2.0], atol=1e-12)
        np.testing.assert_array_equal(table.current, [85.0, 85.0, 86.0])

    @pytest.mark.parametrize(
        ("samples", "unit"), [("flux", "uV s"), ("dflux", "uV s"), ("voltage", "uV")]
    )
    def test_each_record_has_its_column(self, tmp_path, samples, unit):
        path = write(tmp_path, HEAD.replace("flux [uV s]", f"{samples} [{unit}]") + ROWS)
        np.testing.assert_array_equal(read_table(path, samples=samples).samples[1], 2.5e-6)


class TestForeignTables:
    def test_every_key_of_the_table_section(self, tmp_path):
        text = "Bench 7\nrun;3\nT;Date;Enc;Int;Temp;Amp\n"
        text += "0,00;1.5.;0;0,0;20,5;85\n0,01;1.5.;100;2,5;20,5;85\n0,02;1.5.;200;4,0;20,5;85\n"
        layout = layout_of(
            delimiter=";",
            decimal=",",
            skip_lines=2,
            header=True,
            time={"column": "T", "unit": "s"},
            position={"column": 3, "per_count": "5 um"},
            flux={"column": "Int", "unit": "uV s"},
            temperature={"column": "Temp", "unit": "degC"},
            current={"column": "Amp", "unit": "A"},
        )
        table = read_table(write(tmp_path, text), layout)
        np.testing.assert_array_equal(table.time, [0.0, 0.01, 0.02])
        np.testing.assert_allclose(table.position, [0.0, 5e-4, 1e-3], rtol=1e-15)
        np.testing.assert_array_equal(table.samples, [0.0, 2.5e-6, 4e-6])
        np.testing.assert_array_equal(table.temperature, [20.5] * 3)
        np.testing.assert_array_equal(table.current, [85.0] * 3)

    def test_columns_by_number_and_rate(self, tmp_path):
        layout = layout_of(
            delimiter=" ",
            header=False,
            rate="100 Hz",
            position={"column": 1, "unit": "mm"},
            flux={"column": 2, "unit": "uV s"},
        )
        text = "  -600.0   0.0 x\n-599.5\t2.5  y \n\n# pause\n -599.0 4.0 z\n"
        assert_usual(read_table(write(tmp_path, text), layout))

    def test_both_spellings_of_counts(self, tmp_path):
        path = write(tmp_path, HEAD.replace("[mm]", "[counts]") + ROWS)
        for layout in (
            layout_of(per_count="-1 mm"),
            layout_of(position={"per_count": "-1 mm"}),
            layout_of(position={"column": 2}, per_count="-1 mm"),
        ):
            np.testing.assert_allclose(read_table(path, layout).position, [0.6, 0.5995, 0.599])

    def test_units_may_stand_in_header_and_layout_alike(self, tmp_path):
        path = write(tmp_path, HEAD + ROWS)
        assert_usual(read_table(path, layout_of(position={"column": 2, "unit": "mm"})))
        assert refusal(path, layout_of(position={"column": "position", "unit": "cm"})) == (
            "pass_01.csv, column 'position': found the unit [mm] in the heading and 'cm' in "
            "[table], expected the same unit; mend the one that is wrong."
        )

    def test_blanks_in_a_header_of_blanks(self, tmp_path):
        text = (HEAD + ROWS).replace(",", "  ")
        assert_usual(read_table(write(tmp_path, text), TableLayout(delimiter=" ")))

    @pytest.mark.parametrize("delimiter", ["\t", "|", ";", ":"])
    def test_delimiters(self, tmp_path, delimiter):
        text = (HEAD + ROWS).replace(",", delimiter)
        assert_usual(read_table(write(tmp_path, text), TableLayout(delimiter=delimiter)))


class TestRefusedFiles:
    def test_missing(self, tmp_path):
        path = tmp_path / "pass_09.csv"
        assert refusal(path) == (
            f"pass_09.csv: found no such file, expected a file at {str(path)!r}; mend the name."
        )

    def test_a_folder(self, tmp_path):
        assert refusal(tmp_path, name="passes") == (
            "passes: found a folder or a device, expected a file; name the file itself."
        )

    @pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="no pipes on this system")
    def test_a_pipe_is_not_waited_for(self, tmp_path):
        os.mkfifo(tmp_path / "pipe.csv")
        assert "found a folder or a device, expected a file" in refusal(tmp_path / "pipe.csv")

    def test_a_name_with_a_zero_byte(self, tmp_path):
        assert "expected a" in refusal(tmp_path / "a\0b.csv", name="a.csv")

    def test_empty(self, tmp_path):
        assert sentence(tmp_path, b"") == (
            "pass_01.csv: found an empty file, expected a table of readings; record the pass again."
        )

    @pytest.mark.parametrize("content", ["# only\n# comments\n", HEAD, "\n\n", "# c\n" + HEAD])
    def test_no_rows(self, tmp_path, content):
        assert sentence(tmp_path, content) == (
            "pass_01.csv: found no rows of readings, expected a header row and rows; record the "
            "pass again, or set header = false in [table] if there is no header."
        )

    def test_all_lines_skipped(self, tmp_path):
        assert sentence(tmp_path, HEAD + ROWS, TableLayout(skip_lines=10**9)) == (
            "pass_01.csv: found no rows of readings, expected a header row and rows; lower "
            "skip_lines = 1000000000 in [table] if it is too large."
        )

    def test_binary(self, tmp_path):
        assert sentence(tmp_path, b"\x89PNG\r\n\x1a\n\0\0\0\rIHDR") == (
            "pass_01.csv: found binary data (a zero byte at offset 8), expected a table in text or "
            "NetCDF; save it as CSV in UTF-8."
        )

    def test_utf_16(self, tmp_path):
        assert sentence(tmp_path, (HEAD + ROWS).encode("utf-16")) == (
            "pass_01.csv: found text in UTF-16, expected text in UTF-8; save it as CSV in UTF-8."
        )

    def test_latin_1(self, tmp_path):
        text = "# run\n" + HEAD.replace("uV", "µV") + ROWS
        assert sentence(tmp_path, text.encode("latin-1")) == (
            "pass_01.csv, line 2: found the byte 0xb5, which is not UTF-8, expected text in UTF-8; "
            "save it as CSV in UTF-8."
        )

    @pytest.mark.parametrize(("count", "found"), [(1, "1 reading"), (2, "2 readings")])
    def test_too_few_readings(self, tmp_path, count, found):
        rows = "".join(ROWS.splitlines(keepends=True)[:count])
        assert sentence(tmp_path, HEAD + rows) == (
            f"pass_01.csv: found {found}, expected three or more; record the pass again or leave "
            "it out."
        )

    def test_a_first_line_without_end(self, tmp_path):
        assert sentence(tmp_path, b"1" * 200_000) == (
            "pass_01.csv, line 1: found 200000 characters without a line end, expected a table "
            "row; choose another file."
        )

    def test_very_many_columns(self, tmp_path):
        assert sentence(tmp_path, b"," * 20_000 + b"\n1\n") == (
            "pass_01.csv, line 1: found 20001 columns, expected at most 10000; choose another file."
        )


class TestRefusedColumns:
    def test_missing_with_what_there_is_and_the_nearest(self, tmp_path):
        assert sentence(tmp_path, HEAD.replace("position", "Positon") + ROWS) == (
            "pass_01.csv: found no column 'position' among 'time [s]', 'Positon [mm]', "
            "'flux [uV s]', expected a column 'position' for position; write 'Positon' if that "
            "is meant."
        )

    def test_another_delimiter(self, tmp_path):
        assert sentence(tmp_path, (HEAD + ROWS).replace(",", ";")) == (
            "pass_01.csv: found no column 'time' among 'time [s];position [mm];flux [uV s]', "
            "expected a column 'time' for time; set delimiter = ';' in [table]."
        )

    def test_another_record(self, tmp_path):
        text = HEAD.replace("flux", "dflux") + ROWS
        assert sentence(tmp_path, text).endswith(
            "set record = 'increments' for this pass to use 'dflux'."
        )
        text = HEAD.replace("flux [uV s]", "voltage [mV]") + ROWS
        assert sentence(tmp_path, text).endswith(
            "set record = 'voltage' for this pass to use 'voltage'."
        )
        assert sentence(tmp_path, HEAD + ROWS, samples="voltage").endswith(
            "set record = 'cumulative' for this pass to use 'flux'."
        )

    def test_no_clock(self, tmp_path):
        text = "position [mm],flux [uV s]\n0,0\n1,1\n2,2\n"
        assert sentence(tmp_path, text) == (
            "pass_01.csv: found no column 'time' among 'position [mm]', 'flux [uV s]', expected a "
            "column 'time' for time; add it, or give the readings per second as rate in [table]."
        )

    def test_many_columns_are_not_all_listed(self, tmp_path):
        text = ",".join(f"c{i}" for i in range(40)) + "\n" + ",".join("1" * 40) + "\n"
        assert "'c11' and 28 more, expected" in sentence(tmp_path, text)

    def test_twice(self, tmp_path):
        text = "time [s],position [mm],position [m],flux [V s]\n" + "1,2,3,4\n" * 3
        assert sentence(tmp_path, text) == (
            "pass_01.csv: found the column 'position' more than once (numbers 2 and 3), expected "
            "it once; rename one, or give its number in [table]."
        )

    def test_no_unit(self, tmp_path):
        assert sentence(tmp_path, HEAD.replace(" [mm]", "") + ROWS) == (
            "pass_01.csv, column 'position': found no unit, expected a unit such as 'm'; write "
            "'position [m]' in the header, or give the unit in [table]."
        )

    def test_a_wrong_unit(self, tmp_path):
        assert sentence(tmp_path, HEAD.replace("uV s", "uV") + ROWS) == (
            "pass_01.csv, column 'flux': found the unit 'uV', which is not a unit of the dimension "
            "of 'V s', expected a unit such as 'V s'."
        )

    def test_a_number_beyond_the_table(self, tmp_path):
        assert sentence(tmp_path, HEAD + ROWS, layout_of(flux={"column": 7, "unit": "V s"})) == (
            "pass_01.csv, column 7 for 'flux': found 3 columns, expected at least 7; mend [table]."
        )

    def test_one_column_for_two(self, tmp_path):
        layout = layout_of(header=False, rate="1 Hz", position={"column": 1, "unit": "mm"},
                           flux={"column": 1, "unit": "V s"})  # fmt: skip
        assert sentence(tmp_path, ROWS, layout) == (
            "pass_01.csv: found the column 'number 1' for 'position' and for 'flux', expected a "
            "column for each; mend [table]."
        )

    def test_no_number_without_a_header(self, tmp_path):
        layout = TableLayout(header=False, rate=1.0, columns={"position": ColumnSpec(1, "mm")})
        assert sentence(tmp_path, ROWS, layout) == (
            "pass_01.csv: found no column for 'flux', expected a column number in [table], since "
            'it says header = false; name it in [table], as in flux = {column = 2, unit = "V s"}.'
        )

    def test_counts_with_a_unit(self, tmp_path):
        assert sentence(tmp_path, HEAD + ROWS, layout_of(per_count="5 um")) == (
            "pass_01.csv, column 'position': found the unit [mm] in the heading beside per_count "
            "in [table], expected counts; delete per_count, or mend the heading."
        )


class TestRefusedRows:
    @pytest.mark.parametrize(
        ("row", "found", "remedy"),
        [
            ("0.03,-598.5,abc", "'abc', expected a number", MEND),
            ("0.03,-598.5,", "a blank cell, expected a number", MEND),
            ("0.03,-598.5,nan", "'nan', expected a number", MEND),
            ("0.03,-598.5,NaN", "'NaN', expected a number", MEND),
            ("0.03,-598.5,-inf", INFINITE, MEND),
            ("0.03,-598.5,Infinity", INFINITE, MEND),
            ("0.03,-598.5,1e999", INFINITE, MEND),
            ("0.03,-598.5,true", "'true', expected a number", MEND),
            ("0.03,-598.5,FALSE", "'FALSE', expected a number", MEND),
            ("0.03,-598.5,N/A", "'N/A', expected a number", MEND),
            ("0.03,-598.5,0x1F", "'0x1F', expected a number", MEND),
            ("0.03,-598.5,1_000", "'1_000', expected a number", MEND),
            ("0.03,-598.5,1.2.3", "'1.2.3', expected a number", MEND),
            ("0.03,-598.5,=1+1", "'=1+1', expected a number", MEND),
            ('0.03,-598.5,"6,5"', "'6,5', expected a number",
             "set decimal = ',' in [table] if that is the decimal mark"),
        ],
    )  # fmt: skip
    def test_a_cell_that_is_no_number(self, tmp_path, row, found, remedy):
        text = "# outward\n" + HEAD + ROWS + f"\n# break\n{row}\n" + "0.04,-598.0,7\n"
        assert (
            sentence(tmp_path, text)
            == f"pass_01.csv, line 8, column 'flux': found {found}; {remedy}."
        )

    @pytest.mark.parametrize(
        ("row", "found"),
        [
            ("0.03,-598.5", "2 cells"),
            ("0.03-598.56.5", "1 cell"),
            ("0.03,-598.5,6.5,7", "4 cells"),
            ('0.03,-598.5,"6.5",7', "4 cells"),
        ],
    )
    def test_a_ragged_row(self, tmp_path, row, found):
        assert sentence(tmp_path, HEAD + ROWS + row + "\n0.04,1,1\n") == (
            f"pass_01.csv, line 5: found {found}, expected 3 as in the rows above; mend or delete "
            "the row."
        )

    @pytest.mark.parametrize("row", ["0.03,-598.5,6", "0.03,-598.5,6,ok,ok", "0.03,-598.5"])
    def test_a_ragged_row_where_the_last_column_is_not_read(self, tmp_path, row):
        text = HEAD.replace("\n", ",note\n") + ROWS.replace("\n", ",ok\n")
        message = sentence(tmp_path, text + row + "\n" + "0.04,-598,7,ok\n")
        assert message.startswith(
            f"pass_01.csv, line 5: found {row.count(',') + 1} cells, expected 4"
        )

    def test_a_first_row_unlike_the_header(self, tmp_path):
        assert sentence(tmp_path, "# c\n" + HEAD + "1,2\n" + ROWS) == (
            "pass_01.csv, line 3: found 2 cells, expected 3 as in the header; mend the row or the "
            "header."
        )

    def test_a_row_of_units_below_the_header(self, tmp_path):
        layout = layout_of(time={"column": 1, "unit": "s"}, position={"column": 2, "unit": "mm"},
                           flux={"column": 3, "unit": "uV s"})  # fmt: skip
        assert sentence(tmp_path, "t,x,I\ns,mm,uVs\n" + ROWS, layout) == (
            "pass_01.csv, line 2, column 't': found 's', expected a number; mend or delete the row."
        )

    def test_an_open_quote(self, tmp_path):
        assert sentence(tmp_path, HEAD + ROWS + '0.03,-598.5,"6.5\n0.04,-598,7\n') == (
            "pass_01.csv, line 5: found a quoted cell that cannot be read (unexpected end of "
            "data), expected closed quotes; mend or delete the row."
        )
        assert sentence(tmp_path, 'time [s],"position [mm],flux [V s]\n' + ROWS) == (
            "pass_01.csv, line 1: found a quoted cell that cannot be read (unexpected end of "
            "data), expected closed quotes; mend the line."
        )

    def test_a_very_long_line(self, tmp_path):
        assert sentence(tmp_path, HEAD + ROWS + "1," * 300_000 + "\n") == (
            "pass_01.csv, line 5: found 600001 characters in one line, expected a row of a table; "
            "mend or delete the row."
        )

    def test_decimal_commas_cut_the_rows(self, tmp_path):
        text = (HEAD + ROWS).replace(",", ";").replace(".", ",")
        assert sentence(tmp_path, text, TableLayout(delimiter=";")) == (
            "pass_01.csv, line 2, column 'time': found '0,00', expected a number; set decimal = "
            "',' in [table] if that is the decimal mark."
        )
        text = (HEAD + ROWS).replace(",", ";")
        layout = TableLayout(delimiter=";", decimal=",")
        assert sentence(tmp_path, text, layout).endswith(
            "found '0.00', expected a number; set decimal = '.' in [table] if that is the decimal "
            "mark."
        )

    def test_time_that_runs_backwards(self, tmp_path):
        assert sentence(tmp_path, "#\n" + HEAD + ROWS + "\n0.015,-598,1\n") == (
            "pass_01.csv, line 7, column 'time': found 0.015 s after 0.02 s, expected time that "
            "never runs backwards; sort or mend the rows."
        )

    def test_time_may_stand_still(self, tmp_path):
        path = write(tmp_path, HEAD + ROWS + "0.02,-599,4\n")
        assert read_table(path).time[-1] == 0.02

    def test_lines_are_counted_alike_for_all_line_ends(self, tmp_path):
        for end in ("\n", "\r\n", "\r"):
            text = (HEAD + ROWS + "x,1,2\n").replace("\n", end)
            assert sentence(tmp_path, text).startswith("pass_01.csv, line 5, column 'time'")


class TestBlocks:
    """Large files are parsed in blocks: the seams must not show."""

    @pytest.fixture(autouse=True)
    def _small_blocks(self, monkeypatch):
        monkeypatch.setattr(text_blocks, "_BLOCK", 64)

    def rows(self, count):
        return [f"{i * 0.01:.2f},{i * 0.5:.1f},{i * i}" for i in range(count)]

    def test_all_rows_in_order(self, tmp_path):
        text = HEAD + "\n\n".join(self.rows(1000)) + "\n" * 200
        table = read_table(write(tmp_path, text))
        np.testing.assert_array_equal(table.samples, np.arange(1000) ** 2 / 1e6)
        assert table.place(999) == "pass_01.csv, line 2000"

    @pytest.mark.parametrize("bad", ["1,2", "1,2,3,4", "1,2,x", "1,2,3,", "1,2,"])
    @pytest.mark.parametrize("row", [3, 40, 41, 42, 43, 44, 45, 99])
    def test_a_bad_row_anywhere(self, tmp_path, bad, row):
        rows = self.rows(100)
        rows[row] = bad
        message = sentence(tmp_path, HEAD + "\n".join(rows))
        assert message.startswith(f"pass_01.csv, line {row + 2}")

    @pytest.mark.parametrize("row", range(20, 30))
    def test_a_long_and_a_short_row_do_not_cancel(self, tmp_path, row):
        rows = [f"{line},a,b" for line in self.rows(100)]
        rows[row] += ",c"
        rows[row + 1] = rows[row + 1][:-2]
        message = sentence(tmp_path, HEAD.replace("\n", ",note,note\n") + "\n".join(rows))
        assert message.startswith(f"pass_01.csv, line {row + 2}: found 6 cells, expected 5")


def test_memory_stays_near_the_size_of_the_file(tmp_path):
    rows = "".join(f"{i * 1e-3:.3f},{i * 0.01:.4f},{i * 0.1:.4f}\n" for i in range(300_000))
    path = write(tmp_path, HEAD + rows)
    read_table(path)  # imports
    tracemalloc.start()
    read_table(path)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert peak < 4 * path.stat().st_size


finite = st.floats(-1e9, 1e9)
WITH_FILES = settings(deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])


@settings(
    deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture], max_examples=40
)
@given(
    rows=st.lists(st.tuples(finite, finite), min_size=3, max_size=30),
    marks=st.tuples(st.sampled_from(",;\t| "), st.sampled_from(".,")),
    end=st.sampled_from(["\n", "\r\n", "\r"]),
    header=st.booleans(),
)
def test_what_is_written_is_read(tmp_path, rows, marks, end, header):
    delimiter, decimal = marks
    if delimiter == decimal:
        delimiter = ";"
    lines = ["position [m];flux [V s]".replace(";", delimiter)] if header else []
    lines += [delimiter.join(repr(v).replace(".", decimal) for v in row) for row in rows]
    # a last number that is written shorter than others needs a line break: see test_last_line.py
    parts = [repr(row[1]).partition("e") for row in rows]
    decimals = [len(part[0].partition(".")[2]) for part in parts]
    exponents = [len(part[2]) for part in parts]
    short = decimals[-1] < max(decimals) or exponents[-1] < max(exponents)
    path = write(tmp_path, end.join(lines) + (end if short else ""))
    columns = {"position": ColumnSpec(1, "m"), "flux": ColumnSpec(2, "V s")}
    layout = TableLayout(delimiter, decimal, header=header, rate=10.0, columns=columns)
    table = read_table(path, layout)
    np.testing.assert_allclose(table.position, [row[0] for row in rows], rtol=1e-15)
    np.testing.assert_allclose(table.samples, [row[1] for row in rows], rtol=1e-15)
    np.testing.assert_allclose(table.time, np.arange(len(rows)) / 10.0)


@settings(
    deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture], max_examples=200
)
@given(
    st.binary(max_size=300)
    | st.text(alphabet='0123456789.,;e-+ \t"#\n\rnaif', max_size=300).map(str.encode)
)
def test_any_bytes_are_a_table_or_one_sentence(tmp_path, data):
    layouts = [
        (data, TableLayout()),
        (HEAD.encode() + data, TableLayout()),
        (data, TableLayout(delimiter=" ", header=False, rate=1.0, columns={
            "position": ColumnSpec(1, "m"), "flux": ColumnSpec(2, "V s")})),
    ]  # fmt: skip
    for content, layout in layouts:
        path = write(tmp_path, content)
        message = "pass_01.csv"
        try:
            table = read_table(path, layout)
        except InputError as error:
            message = str(error)
        else:
            assert table.time.size == table.position.size == table.samples.size >= 3
            assert np.isfinite(table.samples).all()
        assert message.startswith("pass_01.csv")
        assert "\n" not in message


@settings(
    deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture], max_examples=100
)
@given(
    st.lists(
        st.lists(
            st.sampled_from(["1", "2.5", "x", "", " 3", '"4"', "nan"]), min_size=1, max_size=4
        ),
        min_size=3,
        max_size=8,
    )
)
def test_the_quick_reader_agrees_with_the_csv_module(tmp_path, cells):
    text = "".join(",".join(row) + "\n" for row in cells)
    layout = TableLayout(header=False, rate=1.0, columns={
        "position": ColumnSpec(1, "m"), "flux": ColumnSpec(2, "V s")})  # fmt: skip
    rows = [row for row in csv.reader(text.splitlines()) if row]
    width = len(rows[0]) if rows else 0
    good = width >= 2 and len(rows) >= 3 and all(
        len(row) == width and all(cell.strip() in {"1", "2.5", "3", "4"} for cell in row[:2])
        for row in rows
    )  # fmt: skip
    path = write(tmp_path, text)
    if good:
        table = read_table(path, layout)
        np.testing.assert_array_equal(table.position, [float(row[0]) for row in rows])
        np.testing.assert_array_equal(table.samples, [float(row[1]) for row in rows])
    else:
        refusal(path, layout)


class TestPreview:
    def test_names_and_rows_as_text(self, tmp_path):
        path = write(tmp_path, "# c\n" + HEAD + ROWS)
        preview = preview_table(path, rows=2)
        assert preview.columns == ("time [s]", "position [mm]", "flux [uV s]")
        assert preview.rows == (("0.00", "-600.0", "0.0"), ("0.01", "-599.5", "2.5"))

    def test_a_table_that_cannot_be_read_yet(self, tmp_path):
        path = write(tmp_path, 'Bench 7\nT;x\n1,5;abc\n"open;2\n3\n')
        preview = preview_table(path, TableLayout(delimiter=";", skip_lines=1))
        assert preview.columns == ("T", "x")
        assert preview.rows == (("1,5", "abc"), ('"open;2',), ("3",))

    def test_columns_by_number(self, tmp_path):
        preview = preview_table(write(tmp_path, "1,2,3\n4,5,6\n"), TableLayout(header=False))
        assert preview.columns == ("1", "2", "3")

    def test_only_the_top_of_a_large_file_is_looked_at(self, tmp_path):
        path = write(tmp_path, (HEAD + ROWS * 3000).encode() + b"\xff")
        assert len(preview_table(path, rows=3).rows) == 3

    def test_refusals(self, tmp_path):
        with pytest.raises(InputError, match=r"pass_01.csv: found binary data"):
            preview_table(write(tmp_path, b"\0\0"))
        with pytest.raises(InputError, match="no such file"):
            preview_table(tmp_path / "none.csv")
