"""Sound files to be spoilt: a small campaign with every section, its tables, map and settings."""

from __future__ import annotations

import json
import os
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import xarray as xr

import fieldmap
from fieldmap.bench.writing import write_campaign
from fieldmap.readings import Axis, Limit, PointReference
from tests.shop import RECT, measured, planned

MORE = """
[[references]]
kind = "zero"
from = "-130 mm"
to = "-120 mm"
u = "2 mT"
"""
FOREIGN = """[table]
delimiter = ";"
decimal = ","
skip_lines = 2
header = true
time = {column = "T", unit = "s"}
position = {column = 3, per_count = "5 um"}
flux = {column = "Int", unit = "uV s"}
"""
COARSE = 0.008  # m: a small map is spoilt and read quickly
SETTINGS = {
    "format": "fieldmap-panel/1",
    "campaign": "",
    "passes_off": ["pass_02.csv"],
    "references_off": [1],
    "integrate": [-0.1, 0.1],
    "flat": [-0.01, 0.01],
    "figure": "budget",
    "notes": [{"a": None}],
}


@dataclass(frozen=True)
class Seeds:
    """Sound files in one folder, and their bytes."""

    folder: Path
    campaign: bytes
    table: bytes
    foreign: bytes
    section: bytes
    hdf5: bytes
    classic: bytes
    map: bytes
    results: bytes
    settings: bytes
    design: bytes
    design_hdf5: bytes
    fmap: xr.Dataset


def small_campaign():
    """Two wire passes and one of a coil over a short line: solved in a blink."""
    travels = planned((-0.13, 0.13), (0.13, -0.13), rate=15.0, dwell=0.5)
    passes = [*travels, *planned((-0.1, 0.1), probe=RECT, rate=15.0, dwell=0.5)]
    return measured(
        passes,
        [PointReference(0.0, 0.49, 1e-4)],
        limits=[Limit("magnetic_length", 0.15, 0.25)],
        axis=Axis("z", (-0.12, 0.12), (-0.02, 0.02)),
    )


def make_seeds(folder: Path) -> Seeds:
    """Write the sound files, reduce them, and read back the bytes."""
    write_campaign(small_campaign(), folder)
    path = folder / "campaign.toml"
    path.write_text(path.read_text(encoding="utf-8") + MORE, encoding="utf-8")
    campaign = fieldmap.load(path)
    fmap = fieldmap.stitch(campaign, knot_spacing=COARSE)
    fieldmap.save_reduction(fmap, fieldmap.evaluate(fmap), folder / "out")
    (folder / "link.csv").symlink_to("/etc/hostname")
    (folder / "loop.csv").symlink_to("loop.csv")
    os.mkfifo(folder / "pipe.csv")
    (folder / "folder").mkdir()
    table = next(folder.glob("pass_*1.csv")).read_bytes()
    one = campaign.passes[0]
    columns = {
        name: ("reading", values, {"units": unit})
        for name, values, unit in (
            ("time", one.time, "s"),
            ("position", one.position * 1e3, "mm"),
            ("flux", one.flux * 1e6, "uV s"),
        )
    }
    data = xr.Dataset(columns)
    data.to_netcdf(folder / "a.nc", engine="h5netcdf")
    data.to_netcdf(folder / "b.nc", engine="scipy", format="NETCDF3_CLASSIC")
    s = np.linspace(-0.12, 0.12, 49)
    b = fmap["B"].squeeze().interp(z=s).values
    rows = "".join(f"{z * 1e3:.6g},{f:.9g},1e-5\n" for z, f in zip(s, b, strict=True))
    design = {"z": ("z", s, {"units": "m"}), "B": ("z", b, {"units": "T"})}
    xr.Dataset(design).to_netcdf(folder / "design.nc", engine="h5netcdf")
    foreign = "".join(
        f"{t:.3f};{f * 1e6:.3f};{p / 5e-6:.0f}\n".replace(".", ",")
        for t, p, f in zip(one.time, one.position, one.flux, strict=True)
    )
    return Seeds(
        folder,
        campaign=path.read_bytes(),
        table=table,
        foreign=b"Bench 2\nlog\nT;Int;position\n" + foreign.encode(),
        section=FOREIGN.encode(),
        hdf5=(folder / "a.nc").read_bytes(),
        classic=(folder / "b.nc").read_bytes(),
        map=(folder / "out" / "map.nc").read_bytes(),
        results=(folder / "out" / "results.json").read_bytes(),
        settings=json.dumps(SETTINGS, indent=1).encode(),
        design=b"# design\nposition [mm],field [T],u_field [T]\n" + rows.encode(),
        design_hdf5=(folder / "design.nc").read_bytes(),
        fmap=fieldmap.load_map(folder / "out" / "map.nc"),
    )
