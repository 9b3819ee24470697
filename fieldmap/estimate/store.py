"""map.nc: the map on disk, whole or not at all, and back to the last digit."""

from __future__ import annotations

import datetime as dt
import io
from pathlib import Path
from typing import TYPE_CHECKING

from fieldmap.atomic import replacing, settle
from fieldmap.errors import InputError
from fieldmap.estimate.map import FORMAT, check_map
from fieldmap.estimate.netcdf import write_netcdf_file
from fieldmap.estimate.seal import SEAL, content_digest
from fieldmap.readings.hdf5_guard import check_hdf5
from fieldmap.readings.tables import read_bytes

if TYPE_CHECKING:
    import os

    import xarray as xr

__all__ = ["load_map", "save_map", "write_map"]

WORTH_PACKING = 10_000  # bytes


def save_map(fmap: xr.Dataset, path: str | os.PathLike[str]) -> None:
    """Write a map as NetCDF-4 with CF-1.11 attributes.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch` or `reconstruct`.
    path : path
        The file; an older one is replaced only when the new one is complete.

    Raises
    ------
    InputError
        The file cannot be written.
    """
    with replacing(Path(path)) as aside:
        write_map(fmap, aside)


def write_map(fmap: xr.Dataset, path: Path) -> None:
    """Write a map to a path straight away: for callers that take care of replacing."""
    out = fmap.copy()
    stamp = dt.datetime.now(dt.UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
    earlier = fmap.attrs.get("history", "")
    out.attrs["history"] = f"{stamp}: written by fieldmap" + (f"\n{earlier}" if earlier else "")
    out.attrs[SEAL] = content_digest(out)
    encoding = {
        str(name): {"_FillValue": None if variable.dtype.kind == "i" else float("nan")}
        for name, variable in out.data_vars.items()
    }
    encoding |= {str(name): {"_FillValue": None} for name in out.coords}
    for name, variable in out.data_vars.items():
        if variable.nbytes > WORTH_PACKING:
            encoding[str(name)] |= {"zlib": True, "complevel": 4, "shuffle": True}
    write_netcdf_file(out, path, encoding)


def load_map(path: str | os.PathLike[str]) -> xr.Dataset:
    """Read a map written by `save_map`.

    Parameters
    ----------
    path : path
        The file.

    Returns
    -------
    xarray.Dataset
        In memory; the file is closed.

    Raises
    ------
    InputError
        Not there, not such a map, or changed since it was written: a map holds the hash of all
        that it says, so that a torn bit gives a sentence and no other number.
    """
    source = Path(path)
    settle(source.parent)
    fmap = _opened(read_bytes(source, str(source)), str(source))
    if fmap.attrs.get("format") != FORMAT:
        raise InputError(
            str(source),
            f"format {fmap.attrs.get('format')!r:.60}",
            f"format '{FORMAT}'",
            "give a map.nc written by this package",
        )
    _check_seal(fmap, str(source))
    check_map(fmap, str(source))
    return fmap


def _opened(content: bytes, where: str) -> xr.Dataset:
    """The dataset in a file, in memory."""
    import xarray as xr

    try:
        check_hdf5(content, where, whole=True)
        with xr.open_dataset(io.BytesIO(content), engine="h5netcdf") as opened:
            return opened.load()
    except InputError:
        raise
    except Exception as error:  # any damage to the file shows as some error of the reader's
        raise InputError(
            where,
            f"a file that cannot be read as a map ({type(error).__name__})",
            "a map.nc written by this package",
            "reduce the campaign again",
        ) from error


def _check_seal(fmap: xr.Dataset, where: str) -> None:
    """Refuse a map that is not what was written; the seal belongs to the file, not to memory."""
    seal = fmap.attrs.pop(SEAL, None)
    if seal == content_digest(fmap):
        return
    found = "a map that has changed since it was written" if seal else f"a map without {SEAL!r}"
    raise InputError(
        where,
        found,
        "a map as the kit wrote it, so that each number is the one that was computed",
        "reduce the campaign again, or, if you changed the map on purpose, write it with "
        "fieldmap.save_map",
    )
