"""A pass as the text of a table, in the kit's own layout or in that of another bench."""

from __future__ import annotations

import json
import math
from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.bench.decimals import shifted_text
from fieldmap.bench.twin import Recorded
from fieldmap.errors import InputError
from fieldmap.readings.layout import QUANTITIES, ColumnSpec, TableLayout
from fieldmap.readings.records import SAMPLES, cumulative_flux
from fieldmap.units import line_to_si

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from fieldmap.readings.passes import Floats, Pass

__all__ = ["recorded_samples", "table_text"]

_UNITS: Final = {
    "time": "s",
    "position": "mm",
    "flux": "uV s",
    "dflux": "uV s",
    "voltage": "mV",
    "temperature": "degC",
    "current": "A",
}
_SAME: Final = 1e-9  # of the largest flux: by how much kept samples may miss the pass's flux


def recorded_samples(one: Pass) -> Floats:
    """Give what the table of a pass holds: flux, its increments, or voltage.

    Parameters
    ----------
    one : Pass
        A pass; one of a simulated bench keeps its samples.

    Returns
    -------
    (n,) array
        V s, or V where the record is a voltage.

    Raises
    ------
    InputError
        If the record is a voltage, or that of an integrator that droops, and the samples are
        not kept or no longer belong to the flux.

    Examples
    --------
    >>> from fieldmap.readings import Wire, make_pass
    >>> wire = Wire("wire", turns=20, active_length=0.05)
    >>> s, steps = [0.0, 0.1, 0.2], [0.0, 1.0, 2.0]
    >>> recorded_samples(make_pass(s, steps, rate=10.0, probe=wire, record="increments")).tolist()
    [0.0, 1.0, 2.0]
    """
    if isinstance(one, Recorded) and one.samples is not None and _belong(one, one.samples):
        return one.samples
    droops = one.integrator.kind == "analog" and one.integrator.leak_time is not None
    if one.record == "voltage" or droops:
        found = "a flux whose recorded samples are not kept"
        remedy = "keep its original table, or simulate it again"
        raise InputError(one.name, found, "the samples that its table holds", remedy)
    return np.diff(one.flux, prepend=0.0) if one.record == "increments" else one.flux


def table_text(
    one: Pass,
    layout: TableLayout | None = None,
    preamble: Sequence[str] = (),
    units: Mapping[str, str] | None = None,
) -> str:
    r"""Write the readings of a pass as a table.

    Parameters
    ----------
    one : Pass
        The pass.
    layout : TableLayout, optional
        Delimiter, decimal mark, names, numbers and units of the columns. Columns that no
        quantity takes hold the number of the reading.
    preamble : sequence of str
        Lines before the header row.
    units : mapping of str to str, optional
        Units to write columns in whose unit the layout leaves to the header.

    Returns
    -------
    str
        Each number with the digits it needs, so that it reads back the same to rounding.

    Raises
    ------
    InputError
        As from :func:`recorded_samples`.

    Examples
    --------
    >>> from fieldmap.readings import Wire, make_pass
    >>> wire = Wire("wire", turns=20, active_length=0.05)
    >>> one = make_pass([0.0, 0.0015, 0.002], [0.0, 1e-6, 2e-6], rate=10.0, probe=wire)
    >>> table_text(one).splitlines()[1:3]
    ['time [s],position [mm],flux [uV s]', '0,0,0']
    """
    layout = layout or TableLayout()
    columns = _columns(one, layout, {**_UNITS, **(units or {})})
    lines = list(preamble)
    if layout == TableLayout() and not preamble:
        lines.append(f"# probe {json.dumps(one.probe.name)}")
    if layout.header:
        lines.append(layout.delimiter.join(name for name, _ in columns))
    rows = zip(*(cells for _, cells in columns), strict=True)
    lines += [layout.delimiter.join(row) for row in rows]
    return "\n".join(lines) + "\n"


def _belong(one: Pass, samples: Floats) -> bool:
    """Tell whether samples kept beside a pass still give its flux."""
    if samples.shape != one.flux.shape:
        return False
    flux = cumulative_flux(samples, one.time, one.record, one.integrator)
    room = _SAME * float(np.max(np.abs(one.flux), initial=0.0))
    return bool(np.all(np.abs(flux - one.flux) <= room))


def _columns(
    one: Pass, layout: TableLayout, units: Mapping[str, str]
) -> list[tuple[str, list[str]]]:
    """Headings and cells of all columns, in their order."""
    placed: dict[int, tuple[str, list[str]]] = {}
    unplaced: list[tuple[str, list[str]]] = []
    for quantity, values in _quantities(one, layout).items():
        spec = layout.columns.get(quantity, ColumnSpec(quantity))
        counted = quantity == "position" and layout.per_count is not None
        unit = spec.unit or units[quantity]
        name = spec.column if isinstance(spec.column, str) else quantity
        heading = name if counted or spec.unit else f"{name} [{unit}]"
        cells = _counts(values, layout) if counted else _decimals(values, quantity, unit, layout)
        if isinstance(spec.column, int):
            placed[spec.column - 1] = heading, cells
        else:
            unplaced.append((heading, cells))
    count = max([len(placed) + len(unplaced), *(place + 1 for place in placed)])
    numbers = [str(row + 1) for row in range(one.time.size)]
    rest = iter(unplaced)
    return [placed.get(i) or next(rest, ("No", numbers)) for i in range(count)]


def _quantities(one: Pass, layout: TableLayout) -> dict[str, Floats]:
    """What the table holds, SI."""
    found = {} if layout.rate is not None else {"time": one.time}
    found |= {"position": one.position, SAMPLES[one.record][0]: recorded_samples(one)}
    if one.temperature is not None:
        found["temperature"] = one.temperature
    if one.current is not None:
        found["current"] = one.current
    return found


def _counts(position: Floats, layout: TableLayout) -> list[str]:
    """Positions as encoder counts."""
    return [str(round(count)) for count in (position / (layout.per_count or 1.0)).tolist()]


def _decimals(values: Floats, quantity: str, unit: str, layout: TableLayout) -> list[str]:
    """Cells of one column in its unit."""
    scale, offset = line_to_si(unit, QUANTITIES[quantity], f"column {quantity!r}")
    places = -round(math.log10(scale))
    if math.isclose(scale * 10.0**places, 1.0, rel_tol=1e-12) and not offset:
        texts = [shifted_text(value, places) for value in values.tolist()]
    else:
        texts = [repr(value) for value in ((values - offset) / scale).tolist()]
    return [text.replace(".", layout.decimal) for text in texts]
