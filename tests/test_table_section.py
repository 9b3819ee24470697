"""The [table] section exchanged, and everything else byte for byte as it was."""

import shutil
import tomllib

import pytest
from hypothesis import given
from hypothesis import strategies as st

from fieldmap.errors import InputError
from fieldmap.readings import load
from fieldmap.readings.table_section import replace_section, section_text, write_table_section
from fieldmap.shipped import demo_folder

FOREIGN = demo_folder() / "foreign_tables"
RAW = {"delimiter": "\t", "rate": "100 Hz", "flux": {"column": 3, "unit": "uV s"}}
NEW = '[table]\ndelimiter = "\\t"\nrate = "100 Hz"\nflux = {column = 3, unit = "uV s"}\n'


@pytest.fixture
def copy(tmp_path):
    shutil.copytree(FOREIGN, tmp_path / "mine")
    return tmp_path / "mine" / "campaign.toml"


def test_a_section_as_text():
    assert section_text(RAW) == NEW
    assert tomllib.loads(NEW)["table"] == RAW


@pytest.mark.parametrize(
    "name", ['a "quoted" name', "back\\slash", "µV·s", "tab\there", "del\x7f", "\u2028", "#", "'"]
)
def test_names_of_columns_come_back(name):
    raw = {"time": {"column": name}}
    if not name.isprintable():  # nothing reads such a name
        with pytest.raises(InputError, match="printable"):
            section_text(raw)
        return
    assert tomllib.loads(section_text(raw))["table"] == raw


@pytest.mark.parametrize(
    ("raw", "words"),
    [
        ({"delimeter": ";"}, "found the unknown key 'delimeter'"),
        ({"time": {"column": 1, "unit": "mm"}}, "time"),
        ({"rate": "100 Hz", "time": {"column": 1}}, "'time' and 'rate'"),
        ({"skip_lines": -1}, "skip_lines"),
    ],
)
def test_what_no_campaign_may_hold_is_refused(raw, words):
    with pytest.raises(InputError, match=words):
        section_text(raw)


def around(text):
    """What stands before and after the section of the demo."""
    before, _, rest = text.partition("[table]\n")
    return before, rest[rest.index("\n[[passes]]") :]


def test_all_but_the_section_stays_byte_for_byte(copy):
    before, after = around(copy.read_text(encoding="utf-8"))
    assert write_table_section(copy, RAW) == NEW
    assert copy.read_bytes() == (before + NEW + after).encode()
    assert [one.name for one in copy.parent.iterdir() if one.name.endswith(".part")] == []


@pytest.mark.parametrize("mark", [b"", b"\xef\xbb\xbf"])
def test_line_ends_and_a_byte_order_mark_stay(copy, mark):
    text = copy.read_text(encoding="utf-8")
    before, after = around(text)
    copy.write_bytes(mark + text.replace("\n", "\r\n").encode())
    write_table_section(copy, RAW)
    assert copy.read_bytes() == mark + (before + NEW + after).replace("\n", "\r\n").encode()


def test_written_again_nothing_changes(copy):
    raw = tomllib.loads(copy.read_text(encoding="utf-8"))["table"]
    old = copy.read_bytes()
    write_table_section(copy.parent, raw)
    assert copy.read_bytes() == old
    assert len(load(copy).passes) == 3


def test_a_new_section_goes_before_the_first_pass():
    old = 'name = "a"\n\n# the passes\n# of today\n[[passes]]\nfile = "b"\n\n[[passes]]\n'
    assert replace_section(old, NEW) == old.replace("# the passes", f"{NEW}\n# the passes")


@pytest.mark.parametrize(
    ("old", "gap"), [("", ""), ('name = "a"\n', "\n"), ('name = "a"', "\n\n"), ("# a\n", "\n")]
)
def test_or_to_the_end(old, gap):
    assert replace_section(old, NEW) == old + gap + NEW


def test_comments_within_the_section_stay():
    old = "[table]\n# as bench 2 writes\nskip_lines = 3 # goes\n\n# of the stage\n[stage]\n"
    heading, rest = NEW.split("\n", 1)
    expected = f"{heading}\n# as bench 2 writes\n{rest}\n# of the stage\n[stage]\n"
    assert replace_section(old, NEW) == expected


def test_sections_within_the_section_go():
    old = '[table]\nskip_lines = 3\n[table.time]\ncolumn = "T"\n[stage]\n[table.flux]\ncolumn = 2\n'
    assert replace_section(old, NEW) == f"{NEW}[stage]\n"


@pytest.mark.parametrize("heading", ["[ table ]", '["table"]', "['table'] # so", "  [table]"])
def test_headings_in_other_forms(heading):
    assert replace_section(f"{heading}\nskip_lines = 3\n[stage]\n", NEW) == f"{NEW}[stage]\n"


TRAPS = (
    'a = """\n[table]\nskip_lines = 1\n"""\n',
    "a = '''\n[table]\\'''\n",
    'a = """\\"""[table]\n"""\n',
    'a = """"quoted""""\n',
    "a = [\n  [1, 2],\n  # [table]\n  [3]\n]\n",
    'a = "[table]"\n# [table]\n',
    'a = "#" # "\n',
    "[passes.table]\nskip_lines = 1\n",
    "[[passes]]\n[passes.table]\nskip_lines = 1\n",
    "[tables]\n[atable]\n",
    "[a]\nb = {c = [1, {d = '['}]}\n",
)


@pytest.mark.parametrize("trap", TRAPS)
def test_what_only_looks_like_the_section_stays(trap):
    old = f"{trap}[other]\n[table]\nskip_lines = 3\n[last]\n"
    if trap.startswith("[[passes]]"):
        old = f"[table]\nskip_lines = 3\n{trap}"
        assert replace_section(old, NEW) == f"{NEW}{trap}"
        return
    assert replace_section(old, NEW) == f"{trap}[other]\n{NEW}[last]\n"


@pytest.mark.parametrize("old", ["table = {skip_lines = 1}\n", "table.skip_lines = 1\n"])
def test_a_section_in_another_form_is_refused(old):
    with pytest.raises(InputError, match="found the section in another form"):
        replace_section(old, NEW)


@pytest.mark.parametrize("old", ["a = \n", "[table]\n[table]\n", "[table\n", "a = '''\n", "\x00"])
def test_what_is_no_toml_is_refused(old):
    with pytest.raises(InputError, match="found text that is not TOML"):
        replace_section(old, NEW)


PIECES = st.sampled_from(
    [
        *TRAPS[:7],
        "[s{}]\n",
        "[[l{}]]\n# c\n",
        "k{} = 1\n",
        "k{} = [\n1,\n2]\n",
        "# note [table]\n",
        "\n",
        "k{} = {{a = '}}'}}\n",
        "[table]\nskip_lines = 2\n# kept\n\n",
    ]
)


@given(st.lists(PIECES, max_size=8))
def test_any_file_keeps_what_is_not_the_section(pieces):
    old = "".join(
        piece.replace("a = ", f"a{i} = ", 1) if piece.startswith("a = ") else
        piece.replace("{}", str(i)).replace("{{", "{").replace("}}", "}")
        for i, piece in enumerate(pieces)
    )  # fmt: skip
    try:
        before = tomllib.loads(old)
    except tomllib.TOMLDecodeError:
        return  # two of the section
    new = replace_section(old, NEW)
    after = tomllib.loads(new)
    assert after.pop("table") == RAW
    before.pop("table", None)
    assert after == before
    assert remarks(new) == remarks(old)


def remarks(text):
    return [line for line in text.splitlines() if line.startswith("#")]


@pytest.mark.parametrize("path", [FOREIGN, FOREIGN / "campaign.toml"])
def test_the_demo_stays_as_it_came(path):
    old = (FOREIGN / "campaign.toml").read_bytes()
    with pytest.raises(InputError, match="found a campaign that came with the kit"):
        write_table_section(path, RAW)
    assert (FOREIGN / "campaign.toml").read_bytes() == old


def test_a_link_to_the_demo_is_refused_too(tmp_path):
    (tmp_path / "campaign.toml").symlink_to(FOREIGN / "campaign.toml")
    with pytest.raises(InputError, match="found a campaign that came with the kit"):
        write_table_section(tmp_path, RAW)


def test_a_link_stays_a_link(copy, tmp_path):
    link = tmp_path / "link.toml"
    link.symlink_to(copy)
    write_table_section(link, RAW)
    assert link.is_symlink()
    assert tomllib.loads(copy.read_text(encoding="utf-8"))["table"] == RAW


@pytest.mark.parametrize("data", [b"\xff", b"a = 1\n\xe9"])
def test_no_text_and_no_file(tmp_path, data):
    with pytest.raises(InputError, match="found no such file"):
        write_table_section(tmp_path / "none.toml", RAW)
    (tmp_path / "campaign.toml").write_bytes(data)
    with pytest.raises(InputError, match="UTF-8"):
        write_table_section(tmp_path, RAW)
    assert (tmp_path / "campaign.toml").read_bytes() == data
