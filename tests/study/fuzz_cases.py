"""One spoilt input of each kind: what must hold when it is read.

A case gives "accepted" or "refused"; whatever else happens is harm. What is accepted must say
what its text says: numbers are read once more by a reader that shares no code with the kit.
"""

from __future__ import annotations

import contextlib
import csv
import io
import json
import math
import re
import shutil
import tomllib
import warnings
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
import xarray as xr

import fieldmap
from fieldmap.cli import main
from fieldmap.errors import FieldmapError
from fieldmap.estimate.map import check_map
from fieldmap.estimate.store import load_map, save_map
from fieldmap.magnet.comparison import compare
from fieldmap.magnet.comparison.design_profile import read_design
from fieldmap.readings.guess import guess_table
from fieldmap.readings.layout import TableLayout, read_layout
from fieldmap.readings.table_section import write_table_section
from fieldmap.readings.tables import preview_table, read_table
from fieldmap.show.panels.settings import Settings
from fieldmap.show.report import report_html
from tests.study.hostile_seeds import Seeds
from tests.study.mutations import VALUES, spoilt_binary, spoilt_json, spoilt_text

LONGEST_SENTENCE = 3000
FACTORS = {
    "m": 1.0, "mm": 1e-3, "um": 1e-6, "s": 1.0, "ms": 1e-3, "T": 1.0, "mT": 1e-3, "uT": 1e-6,
    "V s": 1.0, "uV s": 1e-6, "nV s": 1e-9, "m^2": 1.0, "T m": 1.0, "Hz": 1.0, "A": 1.0,
}  # fmt: skip

STAGE = ("u_scale", "u_position", "u_offset", "u_lag")
PROBE = ("active_length", "window", "effective_area", "turns", "u_active_length", "width")


class HarmError(AssertionError):
    """What must never happen."""


@dataclass
class Bench:
    """The folder a case works in, and the sound files."""

    seeds: Seeds
    folder: Path
    sizes: list[int] = field(default_factory=list)

    def put(self, name: str, data: bytes) -> Path:
        """Write one spoilt file."""
        self.sizes.append(len(data))
        path = self.folder / name
        path.write_bytes(data)
        return path


Case = Callable[[Bench, np.random.Generator], str]


def outcome(case: Case, bench: Bench, rng: np.random.Generator) -> str:
    """Run a case: "accepted", or "refused" by one sentence."""
    bench.sizes.clear()
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            case(bench, rng)
    except FieldmapError as error:
        check_sentence(str(error))
        return "refused"
    return "accepted"


def check_sentence(text: str) -> None:
    """One line of text that a terminal shows as it is."""
    if not text.isprintable():
        raise HarmError(f"control characters in the sentence {text!r:.300}")
    if len(text) > LONGEST_SENTENCE:
        raise HarmError(f"a sentence of {len(text)} characters: {text:.200}")


def same(got, wanted, what: str) -> None:
    """Numbers as the text has them, to rounding."""
    got, wanted = np.asarray(got, dtype=float), np.asarray(wanted, dtype=float)
    if got.shape != wanted.shape:
        raise HarmError(f"{what}: {got.shape} numbers read, {wanted.shape} stand there")
    if not np.allclose(got, wanted, rtol=1e-14, atol=1e-307, equal_nan=True):
        at = int(np.flatnonzero(~np.isclose(got, wanted, rtol=1e-14, atol=1e-307))[0])
        raise HarmError(f"{what}: read {got.flat[at]!r}, stands {wanted.flat[at]!r}")


def number_of(text: str) -> float | None:
    """A quantity such as "30 mm" in SI, where the unit is one of a few; None otherwise."""
    match = re.fullmatch(r"\s*([-+.0-9eE]+)\s*(.*?)\s*", str(text))
    factor = 1.0 if match and not match[2] else FACTORS.get(match[2]) if match else None
    return None if factor is None else float(match[1]) * factor


def campaign_file(bench: Bench, rng) -> None:
    """A campaign file; the tables beside it are sound."""
    path = bench.put("campaign.toml", spoilt_text(bench.seeds.campaign, rng))
    before = {one: one.stat().st_mtime_ns for one in bench.folder.iterdir() if not one.is_symlink()}
    campaign = fieldmap.load(path)
    if before != {o: o.stat().st_mtime_ns for o in bench.folder.iterdir() if not o.is_symlink()}:
        raise HarmError("reading changed the folder")
    check_campaign(campaign, path)


def check_campaign(campaign, path: Path) -> None:
    """Compare what was read with the text itself."""
    raw = tomllib.loads(path.read_bytes().decode("utf-8-sig"))
    pairs = [
        (campaign.magnet.gap, raw["magnet"]["gap"]),
        *zip(campaign.axis.integrate, raw["axis"]["integrate"], strict=True),
        *zip(campaign.axis.flat, raw["axis"]["flat"], strict=True),
    ]
    pairs += stated(campaign.stage, raw.get("stage", {}), STAGE)
    for one in campaign.passes:
        pairs += stated(one.probe, raw["probes"][one.probe.name], PROBE)
        if not one.source.resolve().is_relative_to(path.parent.resolve()):
            raise HarmError(f"a pass from outside the folder: {one.source}")
    for one, section in zip(campaign.references, raw.get("references", []), strict=True):
        pairs += stated(one, section, ("at", "field", "u", "flux_change"))
    for value, text in pairs:
        wanted = number_of(text)
        if wanted is not None:
            same(value, wanted, f"{text!r:.80}")


def stated(record, section, keys) -> list[tuple[float, str]]:
    """What was read and what stands there, for the keys of a section."""
    return [(getattr(record, key), section[key]) for key in keys if key in section]


def table(bench: Bench, rng) -> None:
    """A pass table in text."""
    data = spoilt_text(bench.seeds.table, rng)
    path = bench.put("pass.csv", data)
    check_table(read_table(path), data, TableLayout())


def check_table(found, data: bytes, layout: TableLayout) -> None:
    """Read the text once more, cell by cell."""
    text = data.decode("utf-8-sig").replace("\r\n", "\n").replace("\r", "\n")
    lines = [line for line in text.split("\n")[layout.skip_lines :] if line.strip(" \t")]
    rows = [line for line in lines if not line.lstrip(" \t").startswith("#")]
    cells = [
        next(csv.reader([row], delimiter=layout.delimiter, skipinitialspace=True)) for row in rows
    ]
    header = [cell.strip() for cell in cells.pop(0)] if layout.header else None
    for name, unit in (("time", "s"), ("position", "m"), ("flux", "V s")):
        spec = layout.columns.get(name)
        at, factor = place_of(name, spec, header), 1.0
        stated = spec.unit if spec and spec.unit else (header or [""] * 99)[at]
        stated = stated.rpartition("[")[2].rstrip("]").strip()
        factor = layout.per_count if name == "position" and layout.per_count else None
        factor = factor or FACTORS.get(stated)
        if name == "time" and layout.rate:
            continue
        if factor is None:
            continue  # a unit that this reader does not know
        decimal = layout.decimal
        column = [float(row[at].strip().replace(decimal, ".")) * factor for row in cells]
        got = {"time": found.time, "position": found.position, "flux": found.samples}[name]
        same(got, column, f"{name} [{unit}]")


def place_of(name: str, spec, header) -> int:
    """Index of a column."""
    wanted = spec.column if spec else name
    if isinstance(wanted, int):
        return wanted - 1
    names = [{cell, cell.rpartition("[")[0].strip() or cell} for cell in header]
    return next(i for i, known in enumerate(names) if wanted in known)


def foreign(bench: Bench, rng) -> None:
    """A [table] section and the table it describes, one of them spoilt or both."""
    kind = rng.integers(3)
    section, data = bench.seeds.section, bench.seeds.foreign
    section = spoilt_text(section, rng) if kind != 1 else section
    data = spoilt_text(data, rng) if kind != 0 else data
    bench.sizes.append(len(section))
    try:
        raw = tomllib.loads(section.decode())
    except (ValueError, RecursionError):
        raw = {"table": {}}
    layout = read_layout(raw.get("table", {}), "[table]")
    check_table(read_table(bench.put("bench.txt", data), layout), data, layout)


def written_section(bench: Bench, rng) -> None:
    """A [table] section written into a spoilt campaign file: all else stays."""
    data = spoilt_text(bench.seeds.campaign, rng)
    path = bench.put("campaign.toml", data)
    write_table_section(path, {"delimiter": ";", "skip_lines": int(rng.integers(9))})
    before, after = (tomllib.loads(one.decode("utf-8-sig")) for one in (data, path.read_bytes()))
    before.pop("table", None)
    after.pop("table")
    if repr(before) != repr(after):
        raise HarmError("more than the section was changed")


def looked_at(bench: Bench, rng) -> None:
    """The head of a foreign table, guessed and previewed."""
    seeds = bench.seeds
    sources = (seeds.table, seeds.foreign, seeds.classic, seeds.hdf5)
    kind = int(rng.choice(4, p=[0.3, 0.5, 0.1, 0.1]))
    spoilt = spoilt_binary if kind > 1 else spoilt_text
    path = bench.put("bench.txt", spoilt(sources[kind], rng))
    guess_table(path)
    preview_table(path)


def hdf5(bench: Bench, rng) -> None:
    """A pass table in HDF5."""
    check_finite(read_table(bench.put("pass.nc", spoilt_binary(bench.seeds.hdf5, rng))))


def classic(bench: Bench, rng) -> None:
    """A pass table in classic NetCDF."""
    check_finite(read_table(bench.put("pass.nc", spoilt_binary(bench.seeds.classic, rng))))


def check_finite(found) -> None:
    """Numbers, one of each for every reading."""
    columns = (found.time, found.position, found.samples)
    if len({len(one) for one in columns}) > 1 or not all(np.isfinite(one).all() for one in columns):
        raise HarmError("columns that do not fit together")


def map_file(bench: Bench, rng) -> None:
    """A map with bytes changed: the same to the last bit, or refused."""
    fmap = load_map(bench.put("map.nc", spoilt_binary(bench.seeds.map, rng)))
    if not fmap.identical(bench.seeds.fmap):
        raise HarmError("a changed map was accepted")


def forged(bench: Bench, rng) -> None:
    """A map in memory with facts or arrays changed: checked, and used where it is accepted."""
    check_and_use(spoilt_map(bench.seeds.fmap, rng), rng, reported=0.01)


def check_and_use(fmap: xr.Dataset, rng, reported: float) -> None:
    """Whatever passes the check can be evaluated and reported."""
    check_map(fmap, "map.nc")
    if rng.random() < 0.5 or reported > 0.5:
        check_results(fieldmap.evaluate(fmap))
    if rng.random() < reported:
        check_page(report_html(fmap))


def check_results(results) -> None:
    """Every result is a number, and so is its uncertainty."""
    json.dumps(results.as_dict(), allow_nan=False)
    for line in results.lines:
        for key, one in line.results.items():
            if not (math.isfinite(one.value) and math.isfinite(one.u) and one.u >= 0):
                raise HarmError(f"{key} = {one.value} with u = {one.u}")


def check_page(page: str) -> None:
    """No text from a file has become markup."""
    page.encode()
    low = page.lower()
    for bad in ("<script", "<img src=x", 'href="javascript'):
        if bad in low:
            raise HarmError(f"{bad} in the report")


def spoilt_map(fmap: xr.Dataset, rng) -> xr.Dataset:
    """A map with one of its facts, arrays or dimensions changed."""
    out = fmap.copy(deep=False)
    kind = rng.random()
    if kind < 0.6:
        name = str(rng.choice(["campaign", "lines", "passes", "findings"]))
        out.attrs[name] = spoilt_json(fmap.attrs[name], rng)
    elif kind < 0.68:
        name = str(rng.choice(list(out.attrs)))
        value = VALUES[rng.integers(len(VALUES))]
        out.attrs[name] = value
    elif kind < 0.88:
        name = str(rng.choice(list(out.variables)))
        values = fmap[name].values.copy()
        spots = rng.integers(values.size, size=int(rng.choice([1, 1, 5]))) if values.size else []
        evil = float(rng.choice([np.nan, np.inf, -np.inf, 0, -1, 1e308, -1e308, 1e-320, 2**31]))
        if values.dtype.kind == "i":
            evil = int(np.clip(np.nan_to_num(evil), -(2**31), 2**31 - 1))
        values.flat[spots] = evil
        out[name] = (fmap[name].dims, values, fmap[name].attrs)
    else:
        out = reshaped(out, rng)
    return out


def reshaped(out: xr.Dataset, rng) -> xr.Dataset:
    """A variable missing, of another type or another shape."""
    name = str(rng.choice(list(out.data_vars)))
    kind = rng.integers(6)
    if kind == 0:
        return out.drop_vars(name)
    if kind == 1:
        return out.isel({str(rng.choice(list(out.dims))): slice(int(rng.integers(3)))})
    values, dims = out[name].values, out[name].dims
    if kind == 2:
        out[name] = (dims, values.astype(str))
    elif kind == 3:
        out[name] = (dims, values.astype(complex))
    elif kind == 4:
        out[name] = (tuple(f"other_{one}" for one in dims), values)
    else:
        out[name] = (dims[::-1], values.T)
    return out


def results_file(bench: Bench, rng) -> None:
    """A results.json in the place of a map, of a profile and of a table: nothing reads it."""
    path = bench.put("results.json", spoilt_text(bench.seeds.results, rng))
    readers = (load_map, read_table, lambda one: compare(bench.seeds.fmap, one))
    readers[rng.integers(3)](path)


def settings(bench: Bench, rng) -> None:
    """Settings of a panel: taken up, or passed over with a sentence."""
    text = bench.seeds.settings
    data = spoilt_json(text.decode(), rng).encode(errors="replace")
    data = spoilt_text(text, rng) if rng.random() < 0.5 else data
    campaign = bench.folder / "campaign.toml"
    bench.put("campaign.panel.json", data)
    kept = Settings()
    shown: dict[str, object] = {"integrate": [-0.1, 0.1], "figure": "profile"}
    kept.remember("figure", lambda: shown["figure"], lambda v: shown.update(figure=str(v)))
    kept.remember("integrate", lambda: shown["integrate"], lambda v: put_span(shown, v))
    values, sentence = kept.read(campaign)
    (bench.folder / "campaign.panel.json").unlink()
    for one in [sentence, *kept.restore(values)]:
        if one:
            check_sentence(one)


def put_span(shown: dict[str, object], value) -> None:
    """As a panel does: two numbers that grow."""
    low, high = (float(one) for one in value)
    if not (math.isfinite(low) and low < high):
        raise ValueError("two numbers that grow")
    shown["integrate"] = [low, high]


def design(bench: Bench, rng) -> None:
    """A design profile in text, read and sometimes compared."""
    use_design(bench.put("design.csv", spoilt_text(bench.seeds.design, rng)), bench, rng)


def design_hdf5(bench: Bench, rng) -> None:
    """A design profile in HDF5."""
    use_design(bench.put("design.nc", spoilt_binary(bench.seeds.design_hdf5, rng)), bench, rng)


def use_design(path: Path, bench: Bench, rng) -> None:
    """A profile that was read is made of numbers, and can be compared."""
    found = read_design(path)
    if not (np.isfinite(found.line.b).all() and np.isfinite(found.line.covariance).all()):
        raise HarmError("a profile that is not made of numbers")
    if rng.random() < 0.3:
        compare(bench.seeds.fmap, path)


def command_reduce(bench: Bench, rng) -> None:
    """The whole way from the command line, with a spoilt campaign or table."""
    folder = bench.folder / "whole"
    shutil.rmtree(folder, ignore_errors=True)
    folder.mkdir()
    for file in bench.seeds.folder.glob("*.csv"):
        if file.is_file() and not file.is_symlink():
            shutil.copyfile(file, folder / file.name)
    first = min(folder.glob("pass_*.csv"))
    (folder / "campaign.toml").write_bytes(bench.seeds.campaign)
    file = folder / "campaign.toml" if rng.random() < 0.6 else first
    for _ in range(20):  # what the readers refuse is looked at by the other cases
        file.write_bytes(spoilt_text(file.read_bytes(), rng))
        with contextlib.suppress(FieldmapError):
            fieldmap.load(folder)
            break
        file.write_bytes(bench.seeds.campaign if file != first else bench.seeds.table)
    bench.sizes.append(4_000_000)  # a map is larger than its tables
    run_command(["reduce", str(folder), "--out", str(folder / "out")], folder)
    page = folder / "out" / "report.html"
    if page.exists():
        check_page(page.read_text(encoding="utf-8"))


def command_report(bench: Bench, rng) -> None:
    """The report on a forged map, with a seal that fits."""
    folder = bench.folder / "whole"
    shutil.rmtree(folder, ignore_errors=True)
    folder.mkdir()
    for _ in range(50):
        try:
            out = spoilt_map(bench.seeds.fmap, rng)
            check_map(out, "map.nc")
            save_map(out, folder / "map.nc")
        except FieldmapError:
            continue
        except Exception:  # noqa: BLE001 - what cannot be written is no file
            continue
        break
    bench.sizes.append(4_000_000)
    verb = ["report"] if rng.random() < 0.7 else ["export"]
    out = folder / "out" / ("" if verb == ["report"] else "table.csv")
    out.parent.mkdir(exist_ok=True)
    run_command([*verb, str(folder / "map.nc"), "--out", str(out)], folder)
    page = folder / "out" / "report.html"
    if page.exists():
        check_page(page.read_text(encoding="utf-8"))


def run_command(arguments: list[str], folder: Path) -> None:
    """Run the command line: done, or one line on standard error and nothing written."""
    error, out = io.StringIO(), io.StringIO()
    with contextlib.redirect_stderr(error), contextlib.redirect_stdout(out):
        code = main(arguments)
    said = error.getvalue()
    if not all(line.isprintable() for line in out.getvalue().split("\n")):
        raise HarmError(f"control characters on the terminal: {out.getvalue()!r:.300}")
    if code == 0:
        if said:
            raise HarmError(f"noise on standard error: {said!r:.300}")
        return
    if code != 2 or said.count("\n") != 1:
        raise HarmError(f"exit {code}, said {said!r:.300}")
    check_sentence(said.rstrip("\n"))
    if "fault of its own" in said:
        raise HarmError(said[:300])
    if any((folder / "out").glob("*")):
        raise HarmError("refused, and yet something was written")
    raise FieldmapError(said.rstrip("\n"))


CASES: dict[str, tuple[float, str, Case]] = {
    "campaign": (0.21, "campaign.toml", campaign_file),
    "table": (0.23, "pass table, CSV", table),
    "foreign": (0.13, "[table] section and foreign table", foreign),
    "section": (0.03, "[table] section written into a campaign", written_section),
    "looked_at": (0.05, "foreign table, guessed and previewed", looked_at),
    "classic": (0.07, "pass table, classic NetCDF", classic),
    "hdf5": (0.05, "pass table, NetCDF-4", hdf5),
    "map": (0.03, "map.nc, bytes", map_file),
    "forged": (0.1, "map, facts and arrays forged", forged),
    "results": (0.015, "results.json", results_file),
    "settings": (0.03, "settings of a panel", settings),
    "design": (0.035, "design profile, CSV", design),
    "design_hdf5": (0.015, "design profile, NetCDF", design_hdf5),
    "reduce": (0.003, "campaign and tables, `fieldmap reduce`", command_reduce),
    "report": (0.002, "forged map, `fieldmap report` and `export`", command_report),
}
"""Share of the inputs, what they are, and what is done with one."""
