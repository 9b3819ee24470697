"""Tables as text and HTML, against what a person should read."""

from html.parser import HTMLParser

import pytest

from fieldmap.errors import InputError
from fieldmap.estimate import Finding
from fieldmap.magnet import LineResults, Quantity, Results, Verdict
from fieldmap.readings import Limit
from fieldmap.show.tables import (
    findings_html,
    findings_text,
    results_html,
    results_text,
    summary_text,
    verdicts_html,
    verdicts_text,
)

DIPOLE = {
    "integrated_field": Quantity(0.2000039865832722, 5.793225730222107e-06, "T m"),
    "central_field": Quantity(0.5000037239415254, 9.939289197905968e-06, "T"),
    "magnetic_length": Quantity(0.40000499397612954, 8.440223812174372e-06, "m"),
    "boundary_in": Quantity(-0.1999407911216517, 4.948906888610606e-05, "m"),
    "boundary_out": Quantity(0.2000642028544778, 4.946069944136985e-05, "m"),
    "magnetic_centre": Quantity(6.170586641304857e-05, 4.929457393792687e-05, "m"),
    "peak_field": Quantity(0.5000039747947678, 9.861706953088222e-06, "T"),
    "peak_position": Quantity(-0.0054296381113074325, 0.07571433500866169, "m"),
    "homogeneity": Quantity(9.012238672100539e-07, 4.4406950830265556e-07, "1"),
}
DIPOLE_TEXT = """\
Bending magnet 3, 85 A
U is the expanded uncertainty, k = 2 (about 95 % coverage).

result               value       ± U  unit
----------------  --------  --------  ----
Integrated field  0.200004  0.000012  T·m
Central field     0.500004  0.000020  T
Magnetic length    400.005     0.017  mm
Boundary in       -199.941     0.099  mm
Boundary out       200.064     0.099  mm
Magnetic centre      0.062     0.099  mm
Peak field        0.500004  0.000020  T
Peak position          -10       150  mm
Homogeneity         0.0090    0.0089  1e-4"""
TRUTH = {
    "integrated_field": {"value": 200.0, "unit": "mT m"},
    "magnetic_length": {"value": 0.4, "unit": "m"},
    "never_measured": {"value": 1, "unit": "kg"},
}
TRUTH_TEXT = """\
result               value       ± U  unit     truth  off by
----------------  --------  --------  ----  --------  ------
Integrated field  0.200004  0.000012  T·m   0.200000  +0.7 u
Central field     0.500004  0.000020  T
Magnetic length    400.005     0.017  mm     400.000  +0.6 u"""


def one_line(results=DIPOLE, **more):
    return Results("Bending magnet 3, 85 A", "", (LineResults(0.0, 0.0, results),), **more)


class Cells(HTMLParser):
    """Texts of the cells, row by row, by key; and every tag seen."""

    def __init__(self, html):
        super().__init__()
        self.rows, self.tags, self.key = {}, [], None
        self.feed(html)

    def handle_starttag(self, tag, attrs):
        self.tags.append(tag)
        if tag in {"tr", "p"}:
            self.key = dict(attrs).get("data-key")

    def handle_data(self, data):
        self.rows.setdefault(self.key, []).append(data)


def test_results_text_is_as_written_by_hand():
    assert results_text(one_line()) == DIPOLE_TEXT


def test_truth_stands_beside_the_results_with_its_distance():
    text = results_text(one_line(), TRUTH)
    assert "\n".join(text.splitlines()[3:8]) == TRUTH_TEXT


def test_html_shows_the_same_numbers_as_the_text():
    rows = Cells(results_html(one_line())).rows
    written = {line.split("  ")[0]: line.split() for line in DIPOLE_TEXT.splitlines()[5:]}
    assert list(rows) == [None, *DIPOLE]
    for key in DIPOLE:
        label, *cells = rows[key]
        assert cells == written[label][-3:]


def test_html_truth():
    rows = Cells(results_html(one_line(), TRUTH)).rows
    assert rows["magnetic_length"] == [
        "Magnetic length",
        "400.005",
        "0.017",
        "mm",
        "400.000",
        "+0.6 u",
    ]
    assert rows["central_field"] == ["Central field", "0.500004", "0.000020", "T"]


def test_truth_in_a_foreign_unit_is_refused():
    with pytest.raises(InputError, match="known value of magnetic_length"):
        results_text(one_line(), {"magnetic_length": {"value": 4.0, "unit": "kg"}})
    with pytest.raises(InputError, match=r"found '0\.4', expected a number"):
        results_text(one_line(), {"magnetic_length": {"value": "0.4", "unit": "m"}})


def test_coverage_factor_is_stated_and_used():
    text = results_text(one_line(), k=3.0)
    assert "k = 3 (about 99.7 % coverage)" in text
    assert "0.025  mm" in text  # 3 · 8.44 µm


def test_numbers_of_one_unit_share_one_scale():
    weak = {
        "central_field": Quantity(0.002, 1e-6, "T"),
        "peak_field": Quantity(0.3, 1e-6, "T"),
    }
    assert results_text(one_line(weak)).count(" T") == 2


def test_each_line_has_its_heading():
    lines = tuple(LineResults(x, 0.01, DIPOLE) for x in (-0.0125, 0.0125))
    results = Results("Magnet", "", lines, (), (Verdict("magnetic_length", 1, "reject", 1e-7),))
    text = results_text(results)
    assert "Line at x = -12.5 mm, y = 10 mm\nresult" in text
    assert "Line at x = 12.5 mm, y = 10 mm\nresult" in text
    assert "<caption>Magnet: Line at x = 12.5 mm, y = 10 mm</caption>" in results_html(results)
    assert verdicts_text(results) == (
        "REJECT Magnetic length, line at x = 12.5 mm, y = 10 mm: probability of conformity below\n"
        "  0.01 %."
    )


def test_a_line_without_results_says_so():
    assert results_text(one_line({})).endswith("No results.")


def test_unknown_keys_are_shown_too():
    row = results_text(one_line({"sextupole_share": Quantity(2.0, 0.1, "1")})).splitlines()[-1]
    assert row.split() == ["Sextupole", "share", "2.00", "0.20"]


@pytest.mark.parametrize(
    ("limit", "words"),
    [
        (Limit("magnetic_length", 0.3805, 0.3815), " (380.5 to 381.5 mm)"),
        (Limit("magnetic_length", None, 0.3815), " (at most 381.5 mm)"),
        (Limit("magnetic_length", 0.3805, None), " (at least 380.5 mm)"),
        (Limit("central_field", 0.01, 0.02), ""),
    ],
)
def test_verdicts_name_their_limits(limit, words):
    results = one_line(verdicts=(Verdict("magnetic_length", 0, "undecided", 0.5),))
    assert verdicts_text(results, [limit]).replace("\n ", "") == (
        f"UNDECIDED Magnetic length{words}: probability of conformity 50 %; "
        "the interval crosses a limit."
    )


@pytest.mark.parametrize(
    ("decision", "probability", "words"),
    [
        ("accept", 1.0, "above 99.99 %"),
        ("accept", 0.98765, "98.77 %"),
        ("reject", 0.0, "below 0.01 %"),
    ],
)
def test_probability_is_never_certainty(decision, probability, words):
    results = one_line(verdicts=(Verdict("magnetic_length", 0, decision, probability),))
    assert f"probability of conformity {words}." in verdicts_text(results)
    assert f'<li class="fm-{decision}" data-key="magnetic_length"><b>{decision.upper()}</b>' in (
        verdicts_html(results)
    )


@pytest.mark.parametrize(
    ("rule", "band", "words"),
    [
        ({}, 1e-4, "50 %, accepted 380.60 to 381.40 mm; the interval crosses a limit."),
        (
            {"guard": 0.5, "k": 3.0},
            1.5e-4,
            "accepted 380.65 to 381.35 mm (guard band 0.5·U, k = 3); the value is in a guard band.",
        ),
        (
            {"guard": 2.0},
            9e-4,
            "50 %, the guard bands leave nothing to accept (guard band 2·U); the value is in",
        ),
    ],
)
def test_verdicts_tell_what_is_accepted(rule, band, words):
    results = one_line(verdicts=(Verdict("magnetic_length", 0, "undecided", 0.5, band),))
    limits = [Limit("magnetic_length", 0.3805, 0.3815, **rule)]
    assert words in " ".join(verdicts_text(results, limits).split())
    assert words in verdicts_html(results, limits)


def test_one_sided_limits_tell_what_is_accepted():
    results = one_line(verdicts=(Verdict("magnetic_length", 0, "accept", 0.999, 1e-4),))
    limits = [Limit("magnetic_length", None, 0.3815)]
    assert ", accepted at most 381.40 mm." in verdicts_html(results, limits)


def test_no_limits_no_verdict():
    assert verdicts_text(one_line()) == "No limits are set, so nothing was decided."


FINDINGS = [
    Finding("taken-on-trust", "note", "", "the readings cannot check scale."),
    Finding("residuals-too-large", "warn", "pass_02.csv", "residuals are 3.1 times larger."),
    Finding("no-absolute-level", "refuse", "pass_01.csv", "found only coil passes."),
]


def test_findings_come_worst_first():
    assert findings_text(FINDINGS) == (
        "Refused, pass_01.csv: found only coil passes. [no-absolute-level]\n"
        "Warning, pass_02.csv: residuals are 3.1 times larger. [residuals-too-large]\n"
        "Note: the readings cannot check scale. [taken-on-trust]"
    )
    html = findings_html(FINDINGS)
    places = [html.index(code) for code in ("no-absolute", "residuals-too-large", "taken-on")]
    assert places == sorted(places)


def test_long_findings_are_wrapped():
    text = findings_text([Finding("code", "note", "", "word " * 60)])
    assert max(len(line) for line in text.splitlines()) <= 88


HOSTILE = '<script>alert(1)</script>\x1b[2J\n\u202eevil & "quoted"'


def test_text_from_files_stays_text():
    finding = Finding("code", "warn", HOSTILE, HOSTILE)
    results = Results(HOSTILE, "", (LineResults(0, 0, {HOSTILE: Quantity(1.0, 0.1, HOSTILE)}),))
    html = results_html(results) + findings_html([finding])
    assert "script" not in Cells(html).tags
    assert "&lt;script&gt;" in html
    text = summary_text(Results(HOSTILE, "", (), (finding,)))
    assert "\x1b" not in text + html
    assert "\u202e" not in text
    assert text.splitlines()[0].startswith("<script>alert(1)</script> [2J  evil")


def test_summary_has_all_three_parts():
    results = one_line(findings=tuple(FINDINGS))
    text = summary_text(results, truth=TRUTH)
    assert results_text(results, TRUTH) in text
    assert "\n\nVerdicts\nNo limits are set" in text
    assert text.endswith(findings_text(FINDINGS))
