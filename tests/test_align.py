"""Columns whose decimal points meet."""

from fieldmap.show.align import aligned_html, aligned_text


def test_points_meet_in_text():
    column = aligned_text(["426.170", "-12", "0.00006", "+1.5", "2e-05"])
    width = max(len(cell) for cell in column)
    padded = [cell.rjust(width) for cell in column]
    assert padded == ["426.170  ", "-12      ", "  0.00006", " +1.5    ", "  2e-05  "]
    assert {cell.index(".") for cell in padded if "." in cell} == {3}


def test_words_stay_as_they_are():
    assert aligned_text(["not known", "", "1.5"]) == ["not known", "", "1.5"]
    assert aligned_html(["a < b", "2.5"])[0] == "a &lt; b"


def test_html_keeps_the_number_whole_for_readers():
    cells = aligned_html(["1.25", "-7", "<b>"])
    assert cells == [
        '1<span class="fm-frac" style="width:3ch">.25</span>',
        '-7<span class="fm-frac" style="width:3ch"></span>',
        "&lt;b&gt;",
    ]
    assert aligned_html(["5", "12"]) == ["5", "12"]
