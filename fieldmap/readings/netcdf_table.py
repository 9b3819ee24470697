"""Pass tables in NetCDF: HDF5-based files and the classic format."""

from __future__ import annotations

import io
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Final

import numpy as np
import numpy.typing as npt

from fieldmap.errors import InputError
from fieldmap.readings.columns import Heading
from fieldmap.readings.hdf5_guard import check_hdf5, most_bytes
from fieldmap.units import quoted

if TYPE_CHECKING:
    from collections.abc import Sequence

    import xarray as xr

    from fieldmap.readings.passes import Floats

__all__ = ["NetcdfTable", "is_netcdf", "open_netcdf"]

_HDF5: Final = b"\x89HDF\r\n\x1a\n"
_CLASSIC: Final = (b"CDF\x01", b"CDF\x02")


def is_netcdf(data: bytes) -> bool:
    """Tell NetCDF by the first bytes of a file."""
    return data.startswith((_HDF5, b"CDF"))


@dataclass(frozen=True, eq=False)
class NetcdfTable:
    """An opened NetCDF file: its one-dimensional variables are the columns."""

    file: str
    dataset: xr.Dataset
    headings: Sequence[Heading]
    size: int

    def read(self, indices: Sequence[int]) -> dict[int, Floats]:
        """Read variables by index, as double precision."""
        names = {index: self.headings[index].text for index in indices}
        first = self.dataset[names[indices[0]]]
        for name in names.values():
            self._check_shape(name, first, len(names))
        return {index: self._values(name) for index, name in names.items()}

    def place(self, row: int) -> str:
        """Name the place of a reading."""
        return f"{self.file}, reading {row + 1}"

    def unit_remedy(self, name: str, unit: str) -> str:
        """Say how such a file states the unit of a column."""
        return f"give the variable {quoted(name)} the attribute units = {unit!r}"

    def first(self, name: str, count: int) -> npt.NDArray[Any]:
        """Read the first values of a variable, of whatever type."""
        try:
            return np.asarray(self.dataset[name][:count].to_numpy())
        except Exception as error:  # noqa: BLE001 - a damaged file may raise anything
            raise _damaged(f"{self.file}, variable {quoted(name)}", error) from None

    def _check_shape(self, name: str, first: xr.DataArray, columns: int) -> None:
        """Refuse variables that are not numbers along one common dimension."""
        variable, where = self.dataset[name], f"{self.file}, variable {quoted(name)}"
        if variable.dtype.kind not in "iuf":
            raise InputError(where, f"values of type {variable.dtype}", "numbers")
        if variable.dims != first.dims:
            found = f"the dimension {quoted(str(variable.dims[0]))} of {variable.size}"
            expected = f"that of {quoted(str(first.name))}: {quoted(str(first.dims[0]))}"
            raise InputError(where, found, expected, "store all columns along one dimension")
        if variable.size * 8 * columns > most_bytes(self.size):
            found = f"{variable.size} values declared in a file of {self.size} bytes"
            raise InputError(where, found, "values that the file holds", "write the file again")

    def _values(self, name: str) -> Floats:
        """Read one variable."""
        try:
            return np.asarray(self.dataset[name].values, dtype=np.float64)
        except Exception as error:  # noqa: BLE001 - a damaged file may raise anything
            raise _damaged(f"{self.file}, variable {quoted(name)}", error) from None


def open_netcdf(data: bytes, file: str) -> NetcdfTable:
    """Open the bytes of a NetCDF file.

    Parameters
    ----------
    data : bytes
        The whole file.
    file : str
        Its name, for errors.

    Returns
    -------
    NetcdfTable
        Nothing but the headings has been read yet.

    Raises
    ------
    InputError
        If the file is damaged, of a kind that is not read, or refers to other files.
    """
    import xarray as xr

    if not data.startswith((_HDF5, *_CLASSIC)):
        remedy = "write it as NetCDF-4, classic NetCDF or CSV"
        raise InputError(file, "a NetCDF file of an unknown version", "NetCDF-4 or classic", remedy)
    # Plain HDF5 has no named dimensions: columns of one length are taken to belong together.
    hdf5: dict[str, Any] = {"engine": "h5netcdf", "phony_dims": "access"}
    options = hdf5 if data.startswith(_HDF5) else {"engine": "scipy"}
    try:
        if options is hdf5:
            check_hdf5(data, file)
        dataset = xr.open_dataset(
            io.BytesIO(data),
            decode_times=False,
            decode_timedelta=False,
            decode_coords=False,
            **options,
        )
        headings = [
            Heading(str(name), str(name), _unit(variable))
            for name, variable in dataset.variables.items()
            if variable.ndim == 1
        ]
    except InputError:
        raise
    except Exception as error:  # noqa: BLE001 - a damaged file may raise anything
        raise _damaged(file, error) from None
    return NetcdfTable(file, dataset, headings, len(data))


def _unit(variable: xr.Variable) -> str | None:
    """Units attribute of a variable."""
    unit = variable.attrs.get("units")
    return unit if isinstance(unit, str) else None


def _damaged(where: str, error: Exception) -> InputError:
    """Build the error for a file that cannot be read."""
    reason = " ".join(str(error).split())
    found = f"a damaged NetCDF file ({quoted(reason, 120)})" if reason else "a damaged NetCDF file"
    return InputError(where, found, "a readable one", "copy or write the file again")
