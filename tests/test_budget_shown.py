"""Budget tables as text and HTML, against what a person should read."""

import math
import re
from html.parser import HTMLParser

import numpy as np
import pytest

from fieldmap.errors import InputError
from fieldmap.magnet.budget import Budget, Budgets, Contribution
from fieldmap.show.budget import (
    budget_html,
    budget_text,
    correlation_html,
    correlation_text,
)
from fieldmap.show.budget_rows import budget_rows, chosen, percentages

HOSTILE = '<script>alert(1)</script>\x1b[2J & "quoted"'
LENGTH = Budget(
    "magnetic_length",
    0.4261697,
    "m",
    (
        Contribution("position scale", "", "B", 8.5e-6),
        Contribution("integrator walk", "pass_01.csv", "A", 1.2e-6),
        Contribution("integrator walk", "pass_02.csv", "A", 1.6e-6),
        Contribution("active length", "wire", "B", 0.42e-6),
        Contribution("read noise", "pass_01.csv", "A", 0.12e-6),
        Contribution("integrator drift", "pass_01.csv", "B", 0.05e-6),
    ),
)
# u² = 72.25 + 1.44 + 2.56 + 0.1764 + 0.0144 + 0.0025 = 76.4433 µm², u = 8.7432 µm;
# shares 94.51, 5.233, 0.231, 0.022 %: cut off they sum to 99.9, most was cut off from the second
LENGTH_TEXT = """\
Magnetic length: 426.170 ± 0.017 mm (k = 2)
cause              where                        type  u / µm  share / %
-----------------  ---------------------------  ----  ------  ---------
position scale                                  B       8.50       94.5
integrator walk    pass_01.csv and pass_02.csv  A       2.00        5.3
active length      wire                         B       0.42        0.2
2 others                                        A, B    0.13        0.0
combined u                                              8.74      100.0
expanded U, k = 2                                      17.49"""


class Cells(HTMLParser):
    """Texts of the cells, row by row, and every tag seen."""

    def __init__(self, html):
        super().__init__()
        self.rows, self.tags, self.scopes = [], [], []
        self.feed(html)

    def handle_starttag(self, tag, attrs):
        self.tags.append(tag)
        if tag == "tr":
            self.rows.append([])
        if tag in {"th", "td"}:
            self.rows[-1].append("")
        if tag == "th":
            self.scopes.append(dict(attrs).get("scope"))

    def handle_data(self, data):
        if self.rows and self.rows[-1]:
            self.rows[-1][-1] += data


def test_text_is_as_written_by_hand():
    assert budget_text(LENGTH) == LENGTH_TEXT


def test_html_shows_the_same_as_the_text():
    cells = Cells(budget_html(LENGTH))
    assert cells.rows[0] == ["Cause", "Where", "Type", "u (µm)", "Share of u² (%)"]
    assert [row[0] for row in cells.rows[1:]] == [
        line[:19].rstrip() for line in LENGTH_TEXT.splitlines()[3:]
    ]
    written = [re.findall(r"\d+\.\d+", line) for line in LENGTH_TEXT.splitlines()[3:]]
    assert [[cell for cell in row[3:] if cell] for row in cells.rows[1:]] == written
    assert None not in cells.scopes


def test_coverage_factor_is_stated_and_used():
    assert budget_text(LENGTH, k=3.0).splitlines()[-1].split() == [
        *("expanded", "U,", "k", "=", "3"),
        "26.23",
    ]


def test_the_rows_sum_to_the_combined_uncertainty():
    rows = budget_rows(LENGTH)
    assert math.fsum(row.share for row in rows.rows) == pytest.approx(1)
    assert math.hypot(*(float(row.u) for row in rows.rows)) == pytest.approx(
        float(rows.combined), abs=0.01
    )


@pytest.mark.parametrize(
    "shares",
    [[1.0], [0.5, 0.5], [1 / 3] * 3, [0.9995, 0.0005], [1 / 7] * 7, [0.99949, 0.00026, 0.00025]],
)
def test_percentages_sum_to_a_hundred(shares):
    shown = percentages(shares)
    assert sum(round(10 * float(one)) for one in shown) == 1000
    assert max(abs(float(a) - 100 * b) for a, b in zip(shown, shares, strict=True)) < 0.1


def test_random_percentages_sum_to_a_hundred():
    rng = np.random.default_rng(3)
    for count in range(1, 40):
        shares = rng.exponential(size=count)
        shown = percentages((shares / shares.sum()).tolist())
        assert sum(round(10 * float(one)) for one in shown) == 1000


def test_small_causes_stand_together_but_a_single_one_keeps_its_name():
    small = Contribution("read noise", "", "A", 1e-9)
    big = Contribution("position scale", "", "B", 1e-6)
    other = Contribution("lag", "", "B", 2e-9)
    one = budget_rows(Budget("magnetic_length", 0.4, "m", (big, small)))
    assert [row.cause for row in one.rows] == ["position scale", "read noise"]
    two = budget_rows(Budget("magnetic_length", 0.4, "m", (small, big, other)))
    assert [(row.cause, row.evaluation) for row in two.rows][1:] == [("2 others", "A, B")]


def test_at_most_so_many_rows():
    many = tuple(Contribution(f"cause {i}", "", "B", 1e-6) for i in range(12))
    rows = budget_rows(Budget("magnetic_length", 0.4, "m", many), most=5).rows
    assert [row.cause for row in rows] == ["cause 0", "cause 1", "cause 2", "cause 3", "8 others"]
    assert [row.percent for row in rows] == ["8.4", "8.3", "8.3", "8.3", "66.7"]


def test_an_exact_result_says_so():
    exact = Budget("peak_position", 0.1, "m", ())
    assert "Nothing uncertain" in budget_text(exact)
    assert "Nothing uncertain" in budget_html(exact)


def test_a_ratio_is_given_as_a_factor():
    ratio = Budget("homogeneity", 1.3e-6, "1", (Contribution("read noise", "", "A", 9e-7),))
    assert budget_text(ratio).splitlines()[0] == "Homogeneity: (0.013 ± 0.018)·1e-4 (k = 2)"


def test_a_value_far_below_its_uncertainty_is_in_the_unit_of_the_latter():
    tail = Budget("tail_in", 1e-8, "T m", (Contribution("integrator walk", "", "A", 5e-5),))
    assert budget_text(tail).splitlines()[0] == "Tail in: 0.00 ± 0.10 mT·m (k = 2)"


def test_text_from_files_stays_text():
    hostile = Budget("magnetic_length", 0.4, "m", (Contribution("read noise", HOSTILE, "A", 1e-6),))
    html = budget_html(hostile)
    assert "script" not in Cells(html).tags
    assert "&lt;script&gt;" in html
    assert "\x1b" not in html + budget_text(hostile)


CORRELATED = Budgets(
    {key: Budget(key, 1.0, "m", ()) for key in ("magnetic_length", "boundary_in", "peak_position")},
    np.array([[1.0, -0.001, np.nan], [-0.001, 1.0, np.nan], [np.nan, np.nan, np.nan]]),
)


def test_correlations():
    assert correlation_text(CORRELATED) == (
        "correlation of        1     2  3\n"
        "-----------------  ----  ----  -\n"
        "1 Magnetic length  1.00  0.00  –\n"
        "2 Boundary in      0.00  1.00  –\n"
        "3 Peak position       –     –  –"
    )
    rows = Cells(correlation_html(CORRELATED, ["boundary_in", "no_such", "magnetic_length"])).rows
    assert rows == [
        ["Result", "1", "2"],
        ["1 Boundary in", "1.00", "0.00"],
        ["2 Magnetic length", "0.00", "1.00"],
    ]


def test_a_result_that_is_not_there_is_refused():
    with pytest.raises(InputError, match=r"found 'nothing', expected one that this map gives: mag"):
        chosen(CORRELATED, "nothing")
