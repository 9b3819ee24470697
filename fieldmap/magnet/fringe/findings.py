"""The fringes of a line as `evaluate` gives them: with a remark where one cannot be relied on."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

from fieldmap.errors import FieldmapError
from fieldmap.estimate.findings import Finding
from fieldmap.magnet.fringe.fitted import Fringe, fringes

if TYPE_CHECKING:
    import xarray as xr

    from fieldmap.readings.passes import Axis

__all__ = ["line_fringes"]

WORTH_A_WORD: Final = 1e-4  # of B0, rms distance of the true field from the curve


def line_fringes(
    fmap: xr.Dataset, axis: Axis, line: int
) -> tuple[dict[str, Fringe], list[Finding]]:
    """Both fringes of one line and remarks on them.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch`, `reconstruct` or `load_map`.
    axis : Axis
        Flat window.
    line : int
        Index of the line.

    Returns
    -------
    fringes : dict of str to Fringe
        ``fringe_in``, ``fringe_out``; without those that cannot be fitted.
    findings : list of Finding
        ``fringe-not-fitted``, ``fringe-poorly-fitted``.
    """
    which = f" of line {line}" if fmap.sizes.get("line", 1) > 1 else ""
    try:
        found, refused = fringes(fmap, axis=axis, line=line)
    except FieldmapError as error:
        return {}, [_not_fitted(f"fringe_in, fringe_out{which}", str(error))]
    remarks = [_not_fitted(error.where + which, error.text) for error in refused.values()]
    remarks += [_poorly_fitted(one, which) for one in found.values() if one.excess > WORTH_A_WORD]
    return {f"fringe_{end}": one for end, one in found.items()}, remarks


def _not_fitted(where: str, why: str) -> Finding:
    return Finding("fringe-not-fitted", "note", where, f"no fringe is given: {why}")


def _poorly_fitted(one: Fringe, which: str) -> Finding:
    return Finding(
        "fringe-poorly-fitted",
        "note",
        f"fringe_{one.end}{which}",
        f"no Enge curve explains the readings: the best, of order {one.order}, leaves a chi-square "
        f"of {one.chi_square:.3g} where {one.freedom} is expected and is up to "
        f"{one.departure:.2g} of B0 off the map; its uncertainties are widened for that, so use "
        "the coefficients only where such an error does no harm, and the map elsewhere.",
    )
