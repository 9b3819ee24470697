"""A hand-over table on disk: text with units in its header, or NetCDF after CF-1.11."""

from __future__ import annotations

import datetime as dt
import math
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.netcdf import write_netcdf_file
from fieldmap.magnet.handover.exported import one_line
from fieldmap.version import __version__

if TYPE_CHECKING:
    from pathlib import Path

    import xarray as xr

    from fieldmap.magnet.handover.exported import ExportedTable

__all__ = ["csv_decimals", "write_csv", "write_netcdf"]

Floats = npt.NDArray[np.float64]

LOST: Final = 1e-3  # of u: what the last digit may hide
MOST_DECIMALS: Final = 17
CHUNK: Final = 20_000  # rows that are put into text at a time


def csv_decimals(u: Floats) -> int:
    """Digits after the point of a field in T that hide less than a thousandth of any u.

    Examples
    --------
    >>> csv_decimals(np.array([2e-5, 3e-6]))
    9
    """
    known = u[u > 0]
    if not len(known):
        return MOST_DECIMALS
    place = math.floor(math.log10(LOST * float(known.min())))
    return min(max(-place, 1), MOST_DECIMALS)


def write_csv(table: ExportedTable, path: Path) -> None:
    """Write a table as text to a path straight away.

    Comment lines come first, so that no name from a file can stand where a spreadsheet looks
    for a formula; the rows hold numbers only.
    """
    digits = table.field_decimals if table.field_decimals is not None else MOST_DECIMALS
    place, tesla, small = f"%.{table.position_decimals}f", f"%.{digits}f", "%.4e"
    columns: list[tuple[str, str, Floats]] = [
        ("position [m]", place, table.s),
        ("field [T]", tesla, table.field),
        ("u_field [T]", small, table.u),
    ]
    if table.off_axis is not None:
        for name, one in (("field", table.off_axis.mapped), ("transverse", table.off_axis.other)):
            form = f"%.{csv_decimals(one.u)}f"
            columns += [
                (f"off_axis_{name} [T]", form, one.value),
                (f"u_off_axis_{name} [T]", small, one.u),
                (f"next_term_off_axis_{name} [T]", small, one.next_term),
            ]
    row = ",".join(form for _, form, _ in columns) + "\n"
    values = [array for _, _, array in columns]
    with path.open("w", encoding="utf-8", newline="") as file:
        file.writelines(f"# {statement}\n" for statement in table.statements())
        file.write(",".join(name for name, _, _ in columns) + "\n")
        for first in range(0, table.rows, CHUNK):
            part = [array[first : first + CHUNK].tolist() for array in values]
            file.write("".join(row % cells for cells in zip(*part, strict=True)))


def write_netcdf(table: ExportedTable, path: Path) -> None:
    """Write a table as NetCDF-4 to a path straight away; no number is rounded."""
    dataset = _dataset(table)
    encoding: dict[str, dict[str, float | None]] = {
        **{str(name): {"_FillValue": float("nan")} for name in dataset.data_vars},
        **{str(name): {"_FillValue": None} for name in dataset.coords},
    }
    write_netcdf_file(dataset, path, encoding)


def _dataset(table: ExportedTable) -> xr.Dataset:
    import xarray as xr

    component = table.component
    found = {
        "B": (table.field, f"flux density, component {component}"),
        "B_se": (table.u, f"standard uncertainty of the flux density, component {component}"),
    }
    if table.off_axis is not None:
        at = f"at {table.off_axis.direction} = {table.off_axis.distance * 1e3:.6g} mm"
        for name, one in (("field", table.off_axis.mapped), ("transverse", table.off_axis.other)):
            found[f"off_axis_{name}"] = one.value, f"flux density {at}, component {one.name}"
            found[f"off_axis_{name}_se"] = one.u, f"standard uncertainty of off_axis_{name}"
            found[f"off_axis_{name}_next_term"] = (
                one.next_term,
                f"size of the first term left out of off_axis_{name}",
            )
    dataset = xr.Dataset(
        {
            name: ("z", values, {"units": "T", "long_name": one_line(long_name)})
            for name, (values, long_name) in found.items()
        },
        coords={
            "z": ("z", table.s, _length(f"position along the travel, {table.travel}")),
            "x": ((), table.x, _length("transverse position x of the line")),
            "y": ((), table.y, _length("transverse position y of the line")),
        },
    )
    for name in found:
        if f"{name}_se" in found:
            known = [one for one in (f"{name}_se", f"{name}_next_term") if one in found]
            dataset[name].attrs["ancillary_variables"] = " ".join(known)
    dataset.attrs = _attributes(table)
    return dataset


def _length(long_name: str) -> dict[str, str]:
    return {"units": "m", "long_name": one_line(long_name)}


def _attributes(table: ExportedTable) -> dict[str, str | float]:
    stamp = dt.datetime.now(dt.UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
    title, *statements = table.statements()
    return {
        "Conventions": "CF-1.11",
        "title": title,
        "source": "moving-probe scans with a voltage integrator",
        "history": f"{stamp}: written by fieldmap {__version__}",
        "comment": ".\n".join(statements) + ".",
        "component": one_line(table.component),
        "travel": table.travel,
        "integral_of_table": table.integral.table,
        "integral_of_map": table.integral.exact,
        "integral_of_map_se": table.integral.u,
        "integral_difference_expected": table.integral.expected,
    }
