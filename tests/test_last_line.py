"""A text that breaks off within its last number is refused; hand-made ones are read."""

import numpy as np
import pytest

from fieldmap.errors import InputError
from fieldmap.readings.layout import TableLayout
from fieldmap.readings.tables import read_table

HEAD = "time [s],position [mm],flux [uV s]\n"


def rows(form, values):
    return [f"{0.1 * i:.1f},{5 * i},{form.format(value)}" for i, value in enumerate(values)]


def read(tmp_path, lines, head=HEAD, layout=None):
    path = tmp_path / "pass.csv"
    path.write_bytes((head + "\n".join(lines)).encode())
    return read_table(path, layout).samples * 1e6


STEADY = 1000 * np.sin(np.arange(40) / 13) + 1500


@pytest.mark.parametrize("form", ["{:.4f}", "{:+.2f}", "{:.5e}", "{:09.3f}", "{:.1f}", "{:.3E}"])
def test_a_number_cut_anywhere_is_refused(tmp_path, form):
    lines = rows(form, STEADY)
    whole = read(tmp_path, lines)
    assert len(whole) == 40
    start = lines[-1].rindex(",") + 1
    for end in range(start, len(lines[-1])):
        with pytest.raises(InputError, match=r"pass\.csv, line 41"):
            read(tmp_path, [*lines[:-1], lines[-1][:end]])


@pytest.mark.parametrize("end", range(2, 6))
def test_a_count_cut_anywhere_is_refused(tmp_path, end):
    lines = rows("{:.0f}", 100 * STEADY)
    cut = lines[-1][: lines[-1].rindex(",") + end]
    with pytest.raises(InputError, match="shorter than the numbers above"):
        read(tmp_path, [*lines[:-1], cut])


@pytest.mark.parametrize("end", range(2, 14))
def test_a_number_of_many_digits_cut_is_refused(tmp_path, end):
    lines = [f"{i},{5 * i},{value!r}" for i, value in enumerate(STEADY.tolist())]
    cut = lines[-1][: lines[-1].rindex(",") + end]
    with pytest.raises(InputError, match="shorter than the numbers above"):
        read(tmp_path, [*lines[:-1], cut])


def test_the_sentence_says_what_to_do(tmp_path):
    lines = rows("{:.4f}", STEADY)
    with pytest.raises(InputError) as caught:
        read(tmp_path, [*lines[:-1], lines[-1][:-2]])
    assert "'1641.12'" in str(caught.value)
    assert "column 'flux'" in str(caught.value)
    assert "end the line with a line break" in str(caught.value)
    assert str(caught.value).count(".") <= 4


def test_with_a_line_break_it_is_taken_as_it_stands(tmp_path):
    lines = rows("{:.4f}", STEADY)
    assert len(read(tmp_path, [*lines[:-1], lines[-1][:-2], ""])) == 40


@pytest.mark.parametrize(
    "values",
    [
        ["0", "2", "3"],
        ["0.5", "2.5", "3"],
        ["0", "2.25", "3.5", "7", "11.125", "12", "14"],
        ["100", "80", "60", "40", "20", "10", "5", "0"],
        ["1200", "1100", "1050", "1010", "1001", "998"],
        ["0.000", "0.100", "0.120", "0.080", "0.020", "0.000", "0.000"],
        ["1e-3", "2e-3", "3e-3", "4e-3", "5e-3", "6e-3"],
    ],
)
def test_hand_made_files_need_no_line_break(tmp_path, values):
    lines = [f"{i},{5 * i},{value}" for i, value in enumerate(values)]
    np.testing.assert_allclose(read(tmp_path, lines), [float(v) for v in values], rtol=1e-14)


def test_what_is_not_read_is_not_judged(tmp_path):
    head = "time [s],position [mm],flux [uV s],remark\n"
    lines = [f"{i},{5 * i},{i * i},{i / 7:.5f}" for i in range(20)]
    lines[-1] = lines[-1][:-3]
    assert len(read(tmp_path, lines, head)) == 20


def test_a_comment_at_the_end(tmp_path):
    assert len(read(tmp_path, [*rows("{:.4f}", STEADY), "# end of pass"])) == 40


def test_another_layout(tmp_path):
    layout = TableLayout(delimiter=";", decimal=",")
    lines = [line.replace(",", ";").replace(".", ",") for line in rows("{:.4f}", STEADY)]
    head = HEAD.replace(",", ";")
    assert len(read(tmp_path, lines, head, layout)) == 40
    with pytest.raises(InputError, match="shorter than the numbers above"):
        read(tmp_path, [*lines[:-1], lines[-1][:-2]], head, layout)


def test_a_long_file_is_judged_by_its_end(tmp_path):
    values = np.linspace(0, 100, 5000)
    lines = rows("{:.6f}", values)
    assert len(read(tmp_path, lines)) == 5000
    with pytest.raises(InputError, match="line 5001"):
        read(tmp_path, [*lines[:-1], lines[-1][:-1]])
