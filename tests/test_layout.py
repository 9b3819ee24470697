"""The ``[table]`` section: every key, and keys that contradict each other."""

import pytest

from fieldmap.errors import InputError
from fieldmap.readings.layout import ColumnSpec, TableLayout, read_layout

PLACE = "campaign.toml, [table]"


def sentence(raw, base=None):
    with pytest.raises(InputError) as error:
        read_layout(raw, PLACE, base)
    return str(error.value)


def test_nothing_said_is_the_kits_own_layout():
    assert read_layout({}, PLACE) == TableLayout()


def test_every_key():
    raw = {
        "delimiter": ";",
        "decimal": ",",
        "skip_lines": 12,
        "header": True,
        "rate": "0.1 kHz",
        "position": {"column": 3, "per_count": "5 um"},
        "flux": {"column": "Int", "unit": "uV s"},
        "dflux": {"column": "D", "unit": "V s"},
        "voltage": {"column": "U", "unit": "mV"},
        "temperature": {"column": "Temp", "unit": "degC"},
        "current": {"column": 7, "unit": "A"},
    }
    layout = read_layout(raw, PLACE)
    assert (layout.delimiter, layout.decimal, layout.skip_lines) == (";", ",", 12)
    assert (layout.header, layout.rate, layout.per_count) == (True, 100.0, 5e-6)
    assert layout.columns["position"] == ColumnSpec(3)
    assert layout.columns["flux"] == ColumnSpec("Int", "uV s")
    assert set(layout.columns) == {
        "position", "flux", "dflux", "voltage", "temperature", "current"
    }  # fmt: skip


@pytest.mark.parametrize(
    ("written", "delimiter"), [("\t", "\t"), ("tab", "\t"), (" ", " "), ("blank", " "), ("|", "|")]
)
def test_delimiters(written, delimiter):
    assert read_layout({"delimiter": written}, PLACE).delimiter == delimiter


def test_a_section_of_a_pass_is_laid_over_the_common_one():
    common = {"delimiter": ";", "time": {"column": "T", "unit": "s"}, "position": {"unit": "mm"}}
    base = read_layout({**common, "flux": {"column": "I", "unit": "V s"}}, PLACE)
    layout = read_layout({"rate": "10 Hz", "flux": {"column": "J", "unit": "uV s"}}, PLACE, base)
    assert layout.delimiter == ";"
    assert layout.rate == 10.0
    assert dict(layout.columns) == {
        "position": ColumnSpec("position", "mm"),
        "flux": ColumnSpec("J", "uV s"),
    }
    again = read_layout({"time": {"column": "T", "unit": "ms"}}, PLACE, layout)
    assert again.rate is None
    assert again.columns["time"] == ColumnSpec("T", "ms")


def test_counts_and_lengths_take_each_others_place():
    base = read_layout({"position": {"column": "x", "unit": "mm"}}, PLACE)
    counted = read_layout({"per_count": "1 um"}, PLACE, base)
    assert (counted.per_count, counted.columns["position"]) == (1e-6, ColumnSpec("x"))
    measured = read_layout({"position": {"column": "x", "unit": "mm"}}, PLACE, counted)
    assert (measured.per_count, measured.columns["position"].unit) == (None, "mm")


@pytest.mark.parametrize(
    ("raw", "expected"),
    [
        (
            {"delimeter": ";"},
            (
                "campaign.toml, [table]: found the unknown key 'delimeter', expected one of "
                "'delimiter', 'decimal', 'skip_lines', 'header', 'rate', 'per_count', 'time', "
                "'position', 'flux', 'dflux', 'voltage', 'temperature', 'current'; write "
                "'delimiter' if that is meant."
            ),
        ),
        (
            {"delimiter": ";;"},
            (
                "campaign.toml, [table], key 'delimiter': found ';;', expected one character "
                'such as ",", ";", "|", "\\t", or " " for any run of blanks.'
            ),
        ),
        (
            {"decimal": "'"},
            "campaign.toml, [table], key 'decimal': found \"'\", expected one of '.', ','.",
        ),
        (
            {"skip_lines": -1},
            (
                "campaign.toml, [table], key 'skip_lines': found -1, expected a whole number "
                "from 0 up."
            ),
        ),
        (
            {"header": "yes"},
            (
                "campaign.toml, [table], key 'header': found 'yes', expected true or false; "
                "write it without quotes."
            ),
        ),
        (
            {"rate": "100"},
            (
                "campaign.toml, [table], key 'rate': found '100' without a unit, expected a "
                'quantity in Hz written as text, such as "100 Hz"; add the unit.'
            ),
        ),
        (
            {"rate": "0 Hz"},
            "campaign.toml, [table], key 'rate': found '0 Hz', expected a value above zero.",
        ),
        (
            {"per_count": "0 um"},
            (
                "campaign.toml, [table], key 'per_count': found '0 um', expected a value other "
                "than zero."
            ),
        ),
        (
            {"time": "T"},
            (
                "campaign.toml, [table], key 'time': found 'T', expected a table such as "
                '{column = 2, unit = "s"}.'
            ),
        ),
        (
            {"flux": {"column": 0, "unit": "V s"}},
            (
                "campaign.toml, [table], key 'flux', key 'column': found 0, expected a column's "
                "name, or its number from 1 up; count the columns from 1."
            ),
        ),
        (
            {"flux": {"column": 1, "unit": "mm"}},
            (
                "campaign.toml, [table], key 'flux': found the unit 'mm', which is not a unit of "
                "the dimension of 'V s', expected a unit such as 'V s'."
            ),
        ),
        (
            {"flux": {"colum": 1}},
            (
                "campaign.toml, [table], key 'flux': found the unknown key 'colum', expected one "
                "of 'column', 'unit'; write 'column' if that is meant."
            ),
        ),
        (
            {"time": {"column": 1, "unit": "s"}, "rate": "1 Hz"},
            (
                "campaign.toml, [table]: found 'time' and 'rate', expected one of the two; "
                "delete one of them."
            ),
        ),
        (
            {"position": {"column": 1, "unit": "mm", "per_count": "1 um"}},
            (
                "campaign.toml, [table], key 'position': found 'unit' and 'per_count', expected "
                "one of the two; delete one."
            ),
        ),
        (
            {"position": {"column": 1, "per_count": "1 um"}, "per_count": "1 um"},
            (
                "campaign.toml, [table]: found 'per_count' twice, expected it once; keep one of "
                "the two."
            ),
        ),
        (
            {"position": {"column": 1, "unit": "mm"}, "per_count": "1 um"},
            (
                "campaign.toml, [table]: found 'per_count' beside the unit 'mm' of the position, "
                "expected one of the two; delete one of them."
            ),
        ),
        (
            {"decimal": ","},
            (
                "campaign.toml, [table]: found ',' both between cells and as decimal mark, "
                'expected two different characters; set delimiter, such as ";".'
            ),
        ),
        (
            {"header": False, "flux": {"column": "Int", "unit": "V s"}},
            (
                "campaign.toml, [table]: found the name 'Int' for 'flux' where the table has no "
                "header, expected a column number; count the columns from 1."
            ),
        ),
        (
            ["delimiter"],
            (
                "campaign.toml, [table]: found a list, expected a table of keys; write it as a "
                "[section] of its own."
            ),
        ),
    ],
)
def test_refusals(raw, expected):
    assert sentence(raw) == expected
