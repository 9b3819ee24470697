"""A sample of the campaigns without a fault."""

from __future__ import annotations

import os

import pytest

from tests.study import clean

EACH = 2 if os.environ.get("FIELDMAP_STUDY") == "sample" else 200


@pytest.mark.slow
def test_hardly_any_clean_campaign_is_warned_of():
    said = clean.run(EACH)
    # at the allowed rate of 1 in 1000 more than this many have a probability below 1e-3
    allowed = 1 if EACH == 2 else 9
    assert len(clean.alarms(said)) <= allowed, clean.report(said)


def test_facts_of_the_plan_are_no_alarms():
    said = [
        ("wire", 1, ("tail-cut-off",)),
        ("wire", 2, ("flux-step", "tail-cut-off")),
        ("coil", 3, ()),
    ]
    assert clean.alarms(said) == [said[1]]
    text = clean.report(said)
    assert text.startswith("1 of 3 clean campaigns warned of")
    assert "tail-cut-off 2" in text
