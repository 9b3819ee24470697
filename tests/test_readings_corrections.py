"""Corrections in a campaign file: what is read, what is refused, and the way back."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.bench.writing import write_campaign
from fieldmap.errors import InputError
from fieldmap.readings import Correction, corrected, load
from fieldmap.readings.campaign import load_part
from fieldmap.readings.corrections import CORRECTIONS, entries_text
from fieldmap.readings.entries import read_correction
from tests.shop import measured, planned

A, B = "pass_01.csv", "pass_02.csv"
EACH = (
    Correction("polarity", A),
    Correction("factor", A, 0.1, 1e-5),
    Correction("lag", A, 0.1 + 0.2, 1 / 3000),
    Correction("shift", B, -1 / 700, 2e-4),
    Correction("step", B, start=1 / 3),
    Correction("spikes", B, start=0.7, stop=0.9),
)


@pytest.fixture(scope="module")
def written(tmp_path_factory):
    place = tmp_path_factory.mktemp("bench")
    scans = planned((-0.1, 0.1), (0.1, -0.1), rate=10.0)
    write_campaign(measured(scans), place)
    return place


@pytest.fixture
def bench(written, tmp_path):
    """A campaign file of its own beside the pass tables, and its text."""
    for file in written.iterdir():
        (tmp_path / file.name).write_bytes(file.read_bytes())
    return tmp_path


def with_entries(bench, text):
    file = bench / "campaign.toml"
    file.write_text(f"{file.read_text(encoding='utf-8')}\n{text}\n", encoding="utf-8")
    return file


def test_every_kind_comes_back_from_a_file_as_it_was(bench):
    assert {one.kind for one in EACH} == set(CORRECTIONS)
    assert load(with_entries(bench, entries_text(EACH))).corrections == EACH


def test_a_campaign_written_out_keeps_them(bench, tmp_path):
    campaign = replace(load(bench), corrections=EACH)
    write_campaign(campaign, tmp_path / "again")
    assert load(tmp_path / "again").corrections == EACH


def test_without_the_section_there_are_none(bench):
    assert load(bench).corrections == ()


def test_units_and_defaults(bench):
    text = f'[[corrections]]\nkind = "lag"\npass = "{A}"\nlag = "50 ms"'
    assert load(with_entries(bench, text)).corrections == (Correction("lag", A, 0.05),)


HEAD = f'[[corrections]]\npass = "{A}"\n'


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ('[[corrections]]\nkind = "polarity"\npass = "pass_03.csv"',
         ("[[corrections]] 1, key 'pass': found 'pass_03.csv', expected a measured pass among "
          "'pass_01.csv', 'pass_02.csv'; write 'pass_02.csv' if that is meant")),
        (HEAD + 'kind = "factor"\nfactor = 0',
         ("[[corrections]] 1, key 'factor': found 0, expected a value other than zero; leave the "
          "pass out instead")),
        (HEAD + 'kind = "factor"\nfactor = nan', "[[corrections]] 1, key 'factor': found nan"),
        (HEAD + 'kind = "factor"\nfactor = 2\nu_factor = -0.1',
         "[[corrections]] 1, key 'u_factor': found -0.1, expected zero or a value above it"),
        (HEAD + 'kind = "step"\nat = "999 s"',
         ("[[corrections]] 1: found a step at 999 s, expected a time within the pass and after its "
          "first reading, 0 to 6.4 s; mend 'at'")),
        (HEAD + 'kind = "step"\nat = "0 s"', "[[corrections]] 1: found a step at 0 s"),
        (HEAD + 'kind = "spikes"\nfrom = "50 s"\nto = "60 s"',
         ("[[corrections]] 1: found no readings from 50 to 60 s, expected a time in which the pass "
          "has readings, within 0 to 6.4 s; mend 'from' and 'to'")),
        (HEAD + 'kind = "spikes"\nfrom = "2 s"\nto = "1 s"',
         ("[[corrections]] 1: found readings from 2 to 1 s, expected 'from' not after 'to'; "
          "exchange or mend the two")),
        (HEAD + 'kind = "spikes"\nfrom = "0 s"\nto = "60 s"',
         ("[[corrections]] 1: found nearly all readings from 0 to 60 s, expected 3 or more "
          "readings left in the pass; leave the whole pass out instead")),
        (HEAD + 'kind = "polarity"\n' + HEAD + 'kind = "polarity"',
         ("[[corrections]] 2: found a second correction of the kind 'polarity' for "
          "'pass_01.csv', expected one of a kind for each pass; delete one of them")),
        (HEAD + 'kind = "lag"\nlag = "1 ms"\n' + HEAD + 'kind = "lag"\nlag = "2 ms"',
         "[[corrections]] 2: found a second correction of the kind 'lag'"),
        (HEAD + 'kind = "gain"\nfactor = 2',
         ("[[corrections]] 1, key 'kind': found 'gain', expected one of 'polarity', 'factor', "
          "'lag', 'shift', 'step', 'spikes'")),
        (HEAD, "[[corrections]] 1: found no key 'kind'"),
        ('[[corrections]]\nkind = "polarity"\npass = 1',
         "[[corrections]] 1, key 'pass': found 1, expected the name of a pass; write it in quotes"),
        (HEAD + 'kind = "lag"\nlag = 0.05',
         "[[corrections]] 1, key 'lag': found the number 0.05 without a unit"),
        (HEAD + 'kind = "shift"\nlag = "1 ms"',
         "[[corrections]] 1: found the unknown key 'lag', expected one of"),
        ('[corrections]\nkind = "polarity"', "key 'corrections': found a table, expected a list"),
    ],
)  # fmt: skip
def test_misuse_is_one_sentence(bench, text, expected):
    with pytest.raises(InputError) as refused:
        load(with_entries(bench, text))
    sentence = str(refused.value)
    assert expected in sentence
    assert "\n" not in sentence


def test_a_correction_waits_with_its_pass(bench):
    file = with_entries(bench, entries_text(EACH))
    part = load_part(file, lambda path, read: None if path.name == B else read())
    assert part.awaited == (B,)
    assert part.campaign.corrections == EACH[:3]


class TestCorrected:
    def test_adds_and_passes_over_what_is_there(self, bench):
        campaign = load(bench)
        once = corrected(campaign, EACH[:2])
        assert corrected(once, EACH).corrections == EACH
        assert campaign.corrections == ()

    @pytest.mark.parametrize(
        ("one", "words"),
        [
            (Correction("polarity", "pass_9"), "'pass_9', which is no measured pass"),
            (Correction("factor", A, 0.0), "a factor of 0"),
            (Correction("factor", A, 2.0, -0.1), "a standard uncertainty of -0.1"),
            (Correction("lag", A, np.nan), "a number that is not finite"),
            (Correction("step", A, start=1e9), "a step at 1e+09 s"),
            (Correction("gain", A), "the kind 'gain'"),
        ],
    )
    def test_refuses_what_fits_no_pass(self, bench, one, words):
        with pytest.raises(InputError, match=words.replace("+", r"\+")):
            corrected(load(bench), [one])

    def test_refuses_two_answers(self, bench):
        with pytest.raises(InputError, match="second correction of the kind 'lag'"):
            corrected(load(bench), [Correction("lag", A, 0.1), Correction("lag", A, 0.2)])


@pytest.mark.parametrize("one", EACH, ids=lambda one: one.kind)
def test_an_entry_is_read_back(one):
    one = replace(one, where="a\n<b>\x7f.csv")  # built from arrays, a pass may be called anything
    assert read_correction(one.as_entry(), "here") == one
    assert one.words
