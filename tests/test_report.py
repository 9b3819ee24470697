"""The report: whole, self-contained, the same every time, and true to the results."""

import itertools
import json
import re
from dataclasses import replace
from html.parser import HTMLParser

import pytest

from fieldmap.errors import InputError
from fieldmap.estimate import stitch
from fieldmap.estimate.map import map_axis, map_passes
from fieldmap.estimate.store import load_map, save_map
from fieldmap.magnet import evaluate
from fieldmap.magnet.budget import budget
from fieldmap.readings import Limit
from fieldmap.readings.passes import FlipReference, PointReference, ZeroReference
from fieldmap.show.budget_rows import budget_rows
from fieldmap.show.report import page as report_module
from fieldmap.show.report.page import report_html, save_report
from fieldmap.show.rows import result_rows
from tests.shop import RECT, measured, planned

HOSTILE = '</title><script>alert(1)</script><img src=x onerror="alert(2)">\x1b[2J\u202e & "q" -->'
LIMITS = (
    Limit("magnetic_length", 0.2995, 0.3005),
    Limit("integrated_field", None, 0.1),
    Limit("central_field", 0.49999, 0.51, guard=0.5, k=3.0),
)


def shop(**more):
    passes = planned((-0.4, 0.4), (0.4, -0.4), rate=20.0)
    return replace(measured(passes, limits=LIMITS, **more), sha256="ab" * 32)


@pytest.fixture(scope="module")
def fmap():
    return stitch(shop(), knot_spacing=0.01)


@pytest.fixture(scope="module")
def page(fmap):
    return Page(report_html(fmap))


class Page(HTMLParser):
    """What a reader of the page meets: tags, texts, tables."""

    VOID = ("meta", "br", "img", "link", "path", "use", "rect", "image", "circle")

    def __init__(self, text):
        super().__init__()
        self.source, self.tags, self.open, self.words = text, [], [], []
        self.headings, self.cells = [], {}
        self.table, self.key = "", None
        self.feed(text)
        self.close()

    def handle_starttag(self, tag, attrs):
        attributes = dict(attrs)
        self.tags.append((tag, attributes))
        if tag not in self.VOID:
            self.open.append(tag)
        if tag in {"h1", "h2", "h3", "h4"}:
            self.headings.append([tag, ""])
        if tag == "tr":
            self.key = attributes.get("data-key")
            self.cells.setdefault(self.key, [])
        if tag in {"td", "th"} and self.key:
            self.cells[self.key].append("")

    def handle_endtag(self, tag):
        if tag not in self.VOID:
            assert self.open.pop() == tag

    def handle_data(self, data):
        if "style" in self.open:
            return
        self.words.append(data)
        if self.headings and self.open and self.open[-1] == self.headings[-1][0]:
            self.headings[-1][1] += data
        if self.key and self.cells.get(self.key) and {"td", "th"} & set(self.open):
            self.cells[self.key][-1] += data

    @property
    def text(self):
        return " ".join("".join(self.words).split())


def test_it_holds_all_it_shows(page):
    names = {tag for tag, _ in page.tags}
    assert not names & {"script", "link", "iframe", "object", "embed", "img", "form", "a", "base"}
    for tag, attributes in page.tags:
        assert not any(name.startswith("on") for name in attributes), tag
        for name in ("src", "href", "srcset", "action", "data"):
            assert attributes.get(name, "#").startswith(("#", "data:image/png;base64,"))
    assert all(target.startswith("#") for target in re.findall(r"url\(([^)]*)\)", page.source))
    assert "@import" not in page.source
    assert "http" not in page.source.replace("http-equiv", "")
    policy = next(a["content"] for t, a in page.tags if a.get("http-equiv"))
    assert policy.startswith("default-src 'none'")


def test_it_is_well_formed_and_accessible(page):
    assert page.open == []
    assert page.source.startswith("<!doctype html>\n")
    assert ("html", {"lang": "en"}) in page.tags
    ids = [a["id"] for _, a in page.tags if "id" in a]
    assert len(set(ids)) == len(ids)
    levels = [int(tag[1]) for tag, _ in page.headings]
    assert levels[0] == 1
    assert levels.count(1) == 1
    assert all(after <= before + 1 for before, after in itertools.pairwise(levels))
    assert all(a.get("scope") in {"col", "row"} for t, a in page.tags if t == "th")
    assert sum(t == "caption" for t, _ in page.tags) == sum(t == "table" for t, _ in page.tags)
    drawings = [a for t, a in page.tags if t == "svg"]
    assert len(drawings) >= 3
    assert all(a["role"] == "img" and len(a["aria-label"]) > 40 for a in drawings)


def test_sections_stand_in_the_order_in_which_they_are_read(page):
    titles = [text for tag, text in page.headings if tag == "h2"]
    wanted = (
        *("What was measured", "Passes", "Profile", "Results", "Verdicts"),
        *("Uncertainty budgets", "Findings", "Taken on trust", "Provenance", "Safety"),
    )
    places = [next(i for i, title in enumerate(titles) if one in title) for one in wanted]
    assert places == sorted(places)
    assert titles[-1] == "Signatures"
    numbers = [title.split()[0] for title in titles[:-1]]
    assert numbers == [str(i) for i in range(1, len(titles))]


def test_every_result_is_there_as_it_is(fmap, page):
    line = evaluate(fmap).lines[0]
    rows = result_rows(line, None, 2.0)
    assert len(rows) >= 9
    for row in rows:
        assert page.cells[row.key][:4] == [row.label, row.value, row.half_width, row.unit]
    for key in evaluate(fmap).as_dict()["lines"][0]["results"]:
        assert key in page.cells or key in line.fringes


def test_verdicts_come_first_and_in_full(fmap, page):
    decisions = [one.decision for one in evaluate(fmap).verdicts]
    assert decisions == ["accept", "reject", "undecided"]
    head = page.text[: page.text.index("What was measured")]
    assert "REJECT" in head
    assert "integrated field" in head
    for word in ("ACCEPT Magnetic length", "REJECT Integrated field", "UNDECIDED Central field"):
        assert word in page.text
    assert "guard band 0.5·U, k = 3" in page.text
    assert "probability of conformity" in page.text


def test_budgets_are_those_of_the_map(fmap, page):
    budgets = budget(fmap)
    for key in ("magnetic_length", "integrated_field", "central_field", "boundary_in"):
        shown = budget_rows(budgets[key])
        assert shown.title in page.text
        first = shown.rows[0]
        assert f"{first.cause}" in page.text
        assert f"combined u{shown.combined}100.0" in page.text
    assert "Correlation of the results" in page.text


def test_where_it_came_from(fmap, page):
    assert "ab" * 32 in page.text
    for one in map_passes(fmap):
        assert one["name"] in page.text
    assert "none: not from a file" in page.text  # simulated passes
    assert "fieldmap-map/1" in page.text
    assert "knots 10 mm apart" in page.text


def test_what_was_stated(page):
    for words in (
        "Probe wire, moving wire",
        "Integrator main, digital",
        "walk noise",
        "-400 to 400 mm",
    ):
        assert words in page.text
    assert "position scalestage20" in page.text
    assert "not checked" in page.text


def test_findings_and_cautions_are_told(fmap, page):
    for finding in evaluate(fmap).findings:
        assert " ".join(finding.text.split()) in page.text
    assert "0.5 mT line" in page.text
    assert "gives no permission" in page.text


def test_warnings_are_announced_at_the_head(fmap):
    warned = json.loads(fmap.attrs["findings"])
    warned.append({"code": "spikes", "severity": "warn", "where": "pass_01.csv", "text": "Odd."})
    text = Page(report_html(fmap.assign_attrs(findings=json.dumps(warned)))).text
    assert "read them before you sign" in text[: text.index("What was measured")]


def test_the_same_map_gives_the_same_bytes(fmap, page, tmp_path):
    assert report_html(fmap) == page.source
    save_map(fmap, tmp_path / "map.nc")
    assert report_html(load_map(tmp_path / "map.nc")) == page.source


def test_it_is_small(page):
    assert len(page.source.encode()) < 1_500_000


def test_other_limits_and_another_coverage(fmap):
    axis = replace(map_axis(fmap), integrate=(-0.3, 0.35))
    shown = Page(report_html(fmap, axis=axis, k=3.0))
    row = next(
        r
        for r in result_rows(evaluate(fmap, axis=axis).lines[0], None, 3.0)
        if r.key == "integrated_field"
    )
    assert shown.cells["integrated_field"][1:3] == [row.value, row.half_width]
    assert "-300 to 350 mm" in shown.text
    assert "the map keeps -400 to 400 mm" in shown.text
    assert "k = 3" in shown.text


def test_hostile_names_stay_text():
    campaign = shop()
    passes = tuple(replace(one, name=f"{HOSTILE}{i}") for i, one in enumerate(campaign.passes))
    hostile = stitch(
        replace(
            campaign,
            name=HOSTILE,
            passes=passes,
            magnet=replace(campaign.magnet, component="<b onclick=alert(3)>"),
        ),
        knot_spacing=0.01,
    )
    source = report_html(hostile)
    shown = Page(source)
    test_it_holds_all_it_shows(shown)
    assert shown.open == []
    assert "<script" not in source
    assert "<b onclick" not in source
    assert "\x1b" not in source
    assert "\u202e" not in source
    assert "<script>alert(1)</script>" in shown.text
    sheet = source[source.index("<style>") : source.index("</style>")]
    assert "alert(2)" in sheet  # the foot of the page: plain letters
    foot = re.search(r'content: "([^"]*)"; \} \}$', sheet)
    assert not set(foot[1]) & set("<>&\\'{};\n")


def test_a_hash_that_is_none_stays_text(fmap):
    facts = json.loads(fmap.attrs["campaign"]) | {"sha256": '";}</style><script>'}
    source = report_html(fmap.assign_attrs(campaign=json.dumps(facts)))
    assert "<script" not in source


def test_several_lines_have_a_block_each():
    two = (*planned((-0.4, 0.4), rate=20.0), *planned((-0.4, 0.4), rate=20.0, x=0.01))
    passes = tuple(replace(one, name=f"plan_{i}") for i, one in enumerate(two))
    fmap = stitch(measured(passes, limits=LIMITS[:1]), knot_spacing=0.01)
    shown = Page(report_html(fmap))
    titles = [text for tag, text in shown.headings if tag == "h2"]
    assert "4 Line at x = 0 mm, y = 0 mm" in titles
    assert "5 Line at x = 10 mm, y = 0 mm" in titles
    thirds = [text for tag, text in shown.headings if tag == "h3"]
    assert thirds.count("Results") == 2
    assert shown.text.count("ACCEPT Magnetic length, line at x") == 2
    ids = [a["id"] for _, a in shown.tags if "id" in a]
    assert len(set(ids)) == len(ids)


def test_no_limits_and_no_references_are_said(fmap):
    facts = json.loads(fmap.attrs["campaign"]) | {"limits": []}
    text = Page(report_html(fmap.assign_attrs(campaign=json.dumps(facts)))).text
    assert "no limits are set" in text
    assert "No absolute references" in text


def test_references_are_listed():

    references = (
        PointReference(0.0, 0.5, 1e-5, x=0.0, y=0.0),
        ZeroReference(0.38, 0.4, 5e-6),
        FlipReference(RECT, 0.0, 0.3, 2e-6),
    )
    passes = planned((-0.4, 0.4), rate=20.0, probe=RECT)
    text = Page(report_html(stitch(measured(passes, references), knot_spacing=0.01))).text
    for words in ("1 point0 mm, x = 0 mm, y = 0 mm", "2 zero380 to 400 mm", "coil turned over"):
        assert words in text


def test_a_magnet_without_central_field_has_no_length():
    passes = planned((-0.4, 0.4), rate=20.0)
    campaign = measured(passes, axis=replace(shop().axis, flat=(0.36, 0.38)))
    text = Page(report_html(stitch(campaign, knot_spacing=0.01))).text
    head = text[: text.index("What was measured")]
    assert "Integrated field" in head
    assert "Central field" in head
    assert "Magnetic length" not in head


def test_further_sections_come_before_the_findings(fmap):
    added = "<section><h2>Comparison</h2><p>kept as it is</p></section>"
    titles = [text for tag, text in Page(report_html(fmap, extra=[added])).headings if tag == "h2"]
    place = titles.index("Comparison")
    assert titles[place + 1].endswith("Findings")


def test_saved_into_a_folder_or_under_a_name(fmap, page, tmp_path):
    file = save_report(fmap, tmp_path / "new" / "folder")
    assert file == tmp_path / "new" / "folder" / "report.html"
    assert file.read_text("utf-8") == page.source
    assert save_report(fmap, tmp_path / "b3.html") == tmp_path / "b3.html"
    assert sorted(one.name for one in tmp_path.iterdir()) == ["b3.html", "new"]


def test_a_failure_leaves_the_older_report(fmap, tmp_path, monkeypatch):
    (tmp_path / "report.html").write_text("old", encoding="utf-8")

    def full(_, path):
        path.write_bytes(b"half")
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(report_module, "write_report", full)
    with pytest.raises(InputError, match="No space left on device"):
        save_report(fmap, tmp_path)
    assert [(one.name, one.read_text()) for one in tmp_path.iterdir()] == [("report.html", "old")]
