"""NetCDF-4 files made in memory, so that the disk can fail no other way than with any file."""

from __future__ import annotations

import io
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Mapping
    from pathlib import Path

    import xarray as xr

__all__ = ["write_netcdf_file"]


def write_netcdf_file(
    dataset: xr.Dataset, path: Path, encoding: Mapping[str, Mapping[str, Any]]
) -> None:
    """Write a dataset to a path straight away: for callers that take care of replacing.

    Parameters
    ----------
    dataset : xarray.Dataset
        What to write.
    path : Path
        The file.
    encoding : mapping
        As for `xarray.Dataset.to_netcdf`.

    Raises
    ------
    OSError
        The file cannot be written.

    Notes
    -----
    The HDF5 library does not survive a disk that gets full while it writes: it cannot close the
    file any more and may crash the process. In memory it has all the room it needs.
    """
    path.write_bytes(_in_memory(dataset, encoding))


def _in_memory(dataset: xr.Dataset, encoding: Mapping[str, Mapping[str, Any]]) -> memoryview:
    import h5netcdf
    from xarray.backends import H5NetCDFStore

    content = io.BytesIO()
    with h5netcdf.File(content, "w") as file:
        dataset.dump_to_store(H5NetCDFStore(file), encoding=encoding)
    return content.getbuffer()
