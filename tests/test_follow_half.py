"""Half-written files in a followed folder: no number of theirs is ever a part of a number."""

import h5netcdf
import numpy as np
import pytest
import xarray as xr

from fieldmap.readings import campaign as campaign_module
from fieldmap.readings.follow import Follower
from tests.test_follow import CAMPAIGN, Clock

ROWS = 30


def flux(i):
    return 1.2345678 * i * i + 0.1


def text_table(rows=ROWS):
    lines = [f"{0.1 * i:.1f},{-100 + 2 * i:.3f},{flux(i):.7f}\n" for i in range(rows)]
    return "# Prüfling, 20 °C\ntime [s],position [mm],flux [uV s]\n" + "".join(lines)


def netcdf_bytes(path, **how):
    time = np.arange(ROWS) * 0.1
    columns = {
        "position": ("time", -100 + 2.0 * np.arange(ROWS), {"units": "mm"}),
        "flux": ("time", flux(np.arange(ROWS)), {"units": "uV s"}),
    }
    xr.Dataset(columns, coords={"time": ("time", time, {"units": "s"})}).to_netcdf(path, **how)
    return path.read_bytes()


@pytest.fixture
def clock():
    return Clock()


@pytest.fixture
def folder(tmp_path):
    (tmp_path / "campaign.toml").write_text(CAMPAIGN)
    return tmp_path


def name_passes(folder, suffix):
    (folder / "campaign.toml").write_text(CAMPAIGN.replace(".csv", suffix))


def looks(folder, clock, count=3, seconds=1.5):
    """Fluxes of the passes that a new follower gives at last, and why others wait."""
    follower, given, waiting = Follower(folder / "campaign.toml", clock=clock), (), ()
    for _ in range(count):
        clock.now += seconds
        news = follower.look()
        assert news.error == ""
        waiting = news.waiting
        if news.campaign is not None:
            given = news.campaign.passes
    return [one.flux * 1e6 for one in given], {one.name: one.why for one in waiting}


def assert_true(fluxes, rows=None):
    """Every reading is one that was written, and in its place."""
    np.testing.assert_allclose(fluxes, flux(np.arange(len(fluxes))), rtol=0, atol=1e-6)
    assert rows is None or len(fluxes) == rows


@pytest.mark.parametrize("suffix", [".csv", ".txt", ".dat", ".CSV", ".log"])
def test_a_text_cut_anywhere_is_taken_at_the_end_of_a_line_only(folder, clock, suffix):
    name_passes(folder, suffix)
    text = text_table().encode()
    last_lines = text[:-1].rindex(b"\n", 0, text[:-1].rindex(b"\n"))
    for end in range(last_lines - 1, len(text) + 1):
        (folder / f"pass_01{suffix}").write_bytes(text[:end])
        found, waiting = looks(folder, clock)
        if text[:end].endswith(b"\n"):
            assert_true(found[0], text[:end].count(b"\n") - 2)
        else:
            assert found == []
            assert "its last line has no end" in waiting[f"pass_01{suffix}"]


def test_a_text_cut_within_a_letter_waits(folder, clock):
    text = text_table().encode()
    for letter in ("ü", "°"):
        (folder / "pass_01.csv").write_bytes(text[: text.index(letter.encode()) + 1])
        found, waiting = looks(folder, clock)
        assert found == []
        assert "its last line has no end" in waiting["pass_01.csv"]


@pytest.mark.parametrize(
    "how",
    [
        {"engine": "h5netcdf"},
        {"engine": "h5netcdf", "unlimited_dims": ["time"]},
        {"engine": "scipy", "format": "NETCDF3_64BIT"},
        {"engine": "scipy", "format": "NETCDF3_CLASSIC", "unlimited_dims": ["time"]},
    ],
    ids=lambda how: "-".join(str(one) for one in how.values()),
)
def test_a_netcdf_file_cut_anywhere_waits(folder, clock, how):
    name_passes(folder, ".nc")
    whole = netcdf_bytes(folder / "aside", **how)
    ends = {1, 7, 8, len(whole) - 200, len(whole) - 8, len(whole) - 1}
    for end in sorted(ends | set(np.linspace(9, len(whole) - 1, 25).astype(int).tolist())):
        (folder / "pass_01.nc").write_bytes(whole[:end])
        found, waiting = looks(folder, clock)
        assert found == []
        assert waiting["pass_01.nc"]
    (folder / "pass_01.nc").write_bytes(whole)
    assert_true(looks(folder, clock)[0][0], ROWS)


@pytest.mark.parametrize("chunks", [None, (10,)])
def test_a_netcdf_file_that_is_open_waits(folder, clock, chunks):
    name_passes(folder, ".nc")
    with h5netcdf.File(folder / "pass_01.nc", "w") as file:
        file.dimensions = {"time": ROWS}
        steps = np.arange(ROWS)
        columns = (("time", "s", 0.1 * steps), ("position", "mm", 2.0 * steps - 100))
        for name, unit, values in (*columns, ("flux", "uV s", flux(steps))):
            variable = file.create_variable(name, ("time",), "f8", chunks=chunks)
            variable.attrs["units"] = unit
            for half in (slice(0, ROWS // 2), slice(ROWS // 2, ROWS)):
                variable[half] = values[half]
                file.flush()
                found, waiting = looks(folder, clock)
                assert found == []
                assert waiting["pass_01.nc"]
    assert_true(looks(folder, clock)[0][0], ROWS)


def test_a_file_that_is_deleted_while_it_is_read(folder, clock, monkeypatch):
    file = folder / "pass_01.csv"
    file.write_text(text_table())
    read = campaign_module.read_table

    def late(path, *arguments, **more):
        file.unlink(missing_ok=True)
        return read(path, *arguments, **more)

    monkeypatch.setattr(campaign_module, "read_table", late)
    found, waiting = looks(folder, clock)
    assert found == []
    assert waiting == dict.fromkeys(("pass_01.csv", "pass_02.csv"), "it is not there")


@pytest.mark.parametrize("seed", range(8))
def test_whatever_writers_do_no_reading_is_ever_wrong(folder, clock, seed):
    """Writers that append, pause, begin again, rename into place, cut off and delete."""
    rng = np.random.default_rng(seed)
    text = text_table().encode()
    follower = Follower(folder / "campaign.toml", clock=clock)
    file, aside = folder / "pass_01.csv", folder / "pass_01.csv.new"
    given = []

    def look(seconds):
        clock.now += seconds
        news = follower.look()
        assert news.error == ""
        for one in news.campaign.passes if news.campaign else ():
            assert_true(one.flux * 1e6)
            given.append(one)

    for _ in range(80):
        deed = rng.choice(
            ["append", "begin", "rename", "delete", "wait"], p=[0.6, 0.1, 0.1, 0.1, 0.1]
        )
        there = file.read_bytes() if file.exists() else b""
        if deed == "append":
            with file.open("ab") as more:
                more.write(text[len(there) : len(there) + int(rng.integers(1, 200))])
        elif deed == "begin":
            file.write_bytes(text[: int(rng.integers(0, 100))])
        elif deed == "rename":
            aside.write_bytes(text[: text.rindex(b"\n", 0, int(rng.integers(100, len(text)))) + 1])
            aside.replace(file)
        elif deed == "delete":
            file.unlink(missing_ok=True)
        look(float(rng.choice([0.05, 0.4, 1.1, 3.0])))
    file.write_bytes(text)
    for _ in range(4):
        look(60.0)
    assert len(given[-1].flux) == ROWS
