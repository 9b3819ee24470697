"""From passes to a map: group the lines, check, fit, refine the knots, label the result."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, NamedTuple

import numpy as np
import numpy.typing as npt

from fieldmap.errors import InputError, RefusedError
from fieldmap.estimate.checks import (
    check_reach,
    check_references,
    check_spacing,
    check_time_and_travel,
    prepared,
)
from fieldmap.estimate.condition import NONE, check_digits, lost, undetermined
from fieldmap.estimate.coverage import check_density, check_levels, stretches
from fieldmap.estimate.findings import (
    Finding,
    assumed_findings,
    line_findings,
    pass_findings,
    switched_findings,
)
from fieldmap.estimate.findings.gross import blamed, grossly_wrong
from fieldmap.estimate.findings.scan import colour, faulty
from fieldmap.estimate.findings.spikes import without_spikes
from fieldmap.estimate.fit import LineFit, fit_line
from fieldmap.estimate.knots import MOST_KNOTS, first_spacing, grain, knots_for, sampling
from fieldmap.estimate.map import MappedLine, build_map
from fieldmap.estimate.normal import Undetermined
from fieldmap.progress import Tell, silent
from fieldmap.readings.passes import Axis, Campaign, Magnet, Pass, Reference, ZeroReference
from fieldmap.readings.probe import Stage

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    import xarray as xr

__all__ = ["reconstruct", "stitch"]

Floats = npt.NDArray[np.float64]

STILL = 0.1  # halving the knots may move no result by more than this many u
HALVINGS = 3
COLOURED = 4.0  # standard uncertainties by which neighbouring residuals may hang together
WHITER = 0.85  # a mean square of residuals that falls below this share was misfit
PROFILE_POINTS = 200
SMALLEST_LEVEL = 3.0  # a central field below this many u has no length to stand still


def stitch(
    campaign: Campaign,
    *,
    knot_spacing: float | None = None,
    step: float | None = None,
    tell: Tell = silent,
) -> xr.Dataset:
    """Estimate the field map that explains all passes and references of a campaign at once.

    Parameters
    ----------
    campaign : Campaign
        From `load`, or built from plain arrays.
    knot_spacing : float, optional
        m; chosen from gap, window and sampling, and checked by halving, if not given.
    step : float, optional
        Distance of the map's grid points along the travel, m; half a knot rounded to a
        plain number if not given. Results do not depend on it.
    tell : callable, optional
        Told in a few words what is solved next.

    Returns
    -------
    xarray.Dataset
        ``B`` (T), ``B_se`` (T) and ``n_readings`` on (y, x, z), with the spline coefficients,
        their covariance, residuals and findings.

    Raises
    ------
    RefusedError
        No absolute level, passes that do not meet, or nothing measured.
    InputError
        A reference that names no line.

    Examples
    --------
    >>> import fieldmap
    >>> from fieldmap.shipped import demo_folder
    >>> fmap = fieldmap.stitch(fieldmap.load(demo_folder() / "slot" / "campaign.toml"))
    >>> fmap["B"].dims
    ('y', 'x', 'z')

    Notes
    -----
    Running-integral spline with locally adaptive smoothness; see `fieldmap.estimate.fit`,
    `fieldmap.estimate.smoothing` and `fieldmap.estimate.bins` for the sources.
    """
    campaign = prepared(campaign)
    recorded = campaign.passes
    campaign = replace(campaign, passes=without_spikes(recorded))
    groups = _lines(campaign.passes)
    lines = [
        _fit_one(campaign, passes, _references(campaign, key, groups), knot_spacing, tell)
        for key, passes in groups.items()
    ]
    remarks = [
        *pass_findings(recorded, campaign.magnet.current),
        *switched_findings(recorded),
        *assumed_findings(campaign),
    ]
    return build_map(campaign, lines, remarks, step)


def reconstruct(
    one: Pass,
    *,
    references: Sequence[Reference] = (),
    gap: float | None = None,
    stage: Stage | None = None,
    knot_spacing: float | None = None,
    step: float | None = None,
) -> xr.Dataset:
    """The same estimate for a single pass: the field along it, with its uncertainty.

    Parameters
    ----------
    one : Pass
        From a campaign, or from plain arrays by `make_pass`.
    references : sequence, optional
        Absolute references; a coil pass needs one.
    gap : float, optional
        Full gap or bore, m; a twentieth of the travel is assumed if not given.
    stage : Stage, optional
        Position uncertainties; certain positions if not given.
    knot_spacing, step : float, optional
        As for `stitch`.

    Returns
    -------
    xarray.Dataset
        As from `stitch`, with one line.

    Raises
    ------
    RefusedError
        A coil pass without a reference.

    Examples
    --------
    >>> import numpy as np
    >>> from fieldmap.readings import Integrator, Wire, make_pass
    >>> z = np.linspace(-0.1, 0.1, 401)
    >>> flux = 0.05 * 0.02 * np.tanh(z / 0.02)  # a wire of 50 mm in a field of 1 T / cosh²(z/λ)
    >>> steady = Integrator("main", u_drift=1e-9)
    >>> one = make_pass(z, flux, rate=100.0, probe=Wire("w", 1, 0.05), integrator=steady)
    >>> profile = reconstruct(one, gap=0.04)
    >>> round(float(profile["B"].sel(z=0, method="nearest").item()), 3)
    1.0
    """
    low, high = float(one.position.min()), float(one.position.max())
    third = (high - low) / 3
    some_length = (high - low) / 20 or 1.0  # a probe that stands is refused in its own words
    campaign = Campaign(
        name=one.name,
        magnet=Magnet("other", "B", gap or some_length),
        axis=Axis("z", (low, high), (low + third, high - third)),
        stage=stage or Stage(),
        passes=(one,),
        references=tuple(references),
    )
    return stitch(campaign, knot_spacing=knot_spacing, step=step)


def _lines(passes: Sequence[Pass]) -> dict[tuple[float, float], list[Pass]]:
    """Passes by the line (y, x) they travel."""
    groups: dict[tuple[float, float], list[Pass]] = {}
    for one in passes:
        groups.setdefault((one.y, one.x), []).append(one)
    return dict(sorted(groups.items()))


def _references(
    campaign: Campaign,
    key: tuple[float, float],
    groups: dict[tuple[float, float], list[Pass]],
) -> list[tuple[int, Reference]]:
    """References that bear on one line, with their numbers in the campaign."""
    own: list[tuple[int, Reference]] = []
    for i, reference in enumerate(campaign.references, start=1):
        if reference.x is None and reference.y is None:
            if len(groups) > 1 and not isinstance(reference, ZeroReference):
                raise InputError(
                    f"[[references]] {i}",
                    f"no x and y, yet passes on {len(groups)} lines",
                    "the line that the reference was taken on",
                    "add x and y",
                )
            own.append((i, reference))
            continue
        place = (reference.y or 0.0, reference.x or 0.0)
        if place not in groups:
            raise InputError(
                f"[[references]] {i}",
                f"x = {place[1]:g} m, y = {place[0]:g} m",
                "the x and y of a line that some pass travels",
                "mend x and y, or measure that line",
            )
        if place == key:
            own.append((i, reference))
    return own


def _fit_one(
    campaign: Campaign,
    passes: list[Pass],
    numbered: list[tuple[int, Reference]],
    spacing: float | None,
    tell: Tell,
) -> MappedLine:
    """Check and fit one line, and halve the knots until the results stand still."""
    low = min(float(one.position.min()) for one in passes)
    high = max(float(one.position.max()) for one in passes)
    check_time_and_travel(passes, low, high)
    check_reach(passes, campaign.axis.integrate, campaign.magnet.gap)
    check_spacing(spacing, low, high)
    gap, every = campaign.magnet.gap, passes
    chosen = spacing or first_spacing(gap, low, high, sampling(passes))
    references = check_references(numbered, low, high, slack=chosen / 2)
    check_levels(stretches(passes, slack=2 * chosen), references)
    check_density(passes, gap)

    def fit(width: float, like: LineFit | None = None, passes: Sequence[Pass] = passes) -> LineFit:
        knots = knots_for(every, low, high, width)
        texture = grain(gap, low, high)
        current = campaign.magnet.current
        try:
            return fit_line(passes, references, campaign.stage, knots, texture, current, like, tell)
        except np.linalg.LinAlgError as error:
            raise _undetermined(passes, error) from error

    def of_some(others: list[Pass]) -> LineFit:
        return fit(chosen, passes=others)

    try:
        best = fit(chosen)
    except RefusedError as error:
        raise _for_a_reason(error, blamed(passes, of_some)) from error
    named, refined = [], _Refined(best)
    if grossly_wrong(best):  # finer knots would only follow the fault
        named = blamed(passes, of_some, best)
    elif spacing is None:
        refined = _refine(best, fit, campaign.axis)
    best = refined.best
    said = [
        *named,
        *refined.remarks,
        *check_digits(best, _result_rows(best, campaign.axis)),
        *line_findings(
            best, low, high, campaign.stage, gap, scanned=not named, finer=refined.finer
        ),
    ]
    numbers = tuple(number for number, _ in numbered)
    return MappedLine(passes[0].x, passes[0].y, low, high, best, tuple(said), numbers)


def _undetermined(passes: Sequence[Pass], error: np.linalg.LinAlgError) -> RefusedError:
    names = ", ".join(one.name for one in passes)
    if isinstance(error, Undetermined):
        return undetermined(names, error.what)
    return RefusedError(
        "not-determined",
        names,
        "found readings that do not determine the field, expected readings at distinct times and "
        "positions; check that the time, position and flux columns are the right ones.",
    )


def _for_a_reason(error: RefusedError, remarks: Sequence[Finding]) -> RefusedError:
    """A refusal that names the pass without which there is none."""
    for one in remarks:
        undone = one.correction
        how = f"; what undoes it in [[corrections]]: {undone.words}" if undone else ""
        return RefusedError(one.code, one.where, f"{one.text.rstrip('.')}{how}.")
    return error


class _Refined(NamedTuple):
    """Knots that do, the same on finer knots where they were tried, and what is to be said."""

    best: LineFit
    finer: LineFit | None = None
    remarks: tuple[Finding, ...] = ()


def _refine(best: LineFit, fit: Callable[[float, LineFit], LineFit], axis: Axis) -> _Refined:
    """Halve the knots until that moves no result by more than STILL times its uncertainty.

    Residuals that halving makes whiter show knots too coarse for very quiet readings as well.
    """
    for _ in range(HALVINGS):
        if best.spline.size > MOST_KNOTS / 2:
            return _unsure(best, "was not tried: there would be too many")
        try:
            finer = fit(best.spline.spacing / 2, best)
        except RefusedError:  # what coarser knots determine, finer ones lose to rounding
            return _unsure(best, "was not possible: too few digits are left")
        if lost(finer, _result_rows(finer, axis)) >= NONE:
            return _unsure(best, "was of no use: too few digits are left")
        moved = _moved(best, finer, axis)
        whiter = _misfit(finer) < WHITER * _misfit(best) or _less_coloured(best, finer)
        if moved <= STILL and not whiter:
            return _Refined(best, finer)
        best = finer
        if faulty(best):  # finer knots would only follow the fault
            return _Refined(best)
    spacing = f"{best.spline.spacing * 1e3:.3g} mm"
    return _unsure(best, f"to {spacing} still moved a result by {moved:.2g} u")


def _misfit(fit: LineFit) -> float:
    """Mean square of the whitened residuals over what is expected of them."""
    square = sum(one.square for one in fit.passes)
    return square / max(sum(one.freedom for one in fit.passes), 1.0)


def _less_coloured(coarse: LineFit, fine: LineFit) -> bool:
    """Whether neighbouring residuals hung together, and finer knots took some of that away."""
    before = colour(coarse)
    return before > COLOURED and colour(fine) < 0.8 * before


def _unsure(best: LineFit, outcome: str) -> _Refined:
    text = f"halving the knots {outcome}; check the gap in [magnet], which sets the first spacing."
    return _Refined(best, remarks=(Finding("knots-not-settled", "warn", "[magnet] gap", text),))


def _moved(coarse: LineFit, fine: LineFit, axis: Axis) -> float:
    """Largest change of integrated field, central field and magnetic length, in u.

    The profile counts by the rms of its change, a third as strictly: it is no single number.
    """
    before, u = _main_results(coarse, axis)
    after, _ = _main_results(fine, axis)
    both = slice(min(len(before), len(after)))
    results = float(np.max(np.abs(after[both] - before[both]) / u[both]))
    s = np.linspace(*axis.integrate, PROFILE_POINTS)
    old, new = (fit.line(0.0, 0.0, *axis.integrate) for fit in (coarse, fine))
    change = (new.field(s) - old.field(s)) / old.u_field(s)
    profile = float(np.sqrt(np.mean(change**2)))
    return max(results, profile / 3)


def _main_results(fit: LineFit, axis: Axis) -> tuple[Floats, Floats]:
    """Integrated field, central field and, where it has a meaning, magnetic length; their u."""
    size = fit.spline.size
    b, covariance = fit.values[:size], fit.covariance[:size, :size]
    rows = _result_rows(fit, axis)
    u = np.sqrt(np.einsum("ij,jk,ik->i", rows, covariance, rows))
    total, level = (rows[:2] @ b).tolist()
    if abs(level) < SMALLEST_LEVEL * u[1]:
        return np.array([total, level]), u
    ratio = (rows[0] - total / level * rows[1]) / level
    u_ratio = np.sqrt(ratio @ covariance @ ratio)
    return np.array([total, level, total / level]), np.append(u, u_ratio)


def _result_rows(fit: LineFit, axis: Axis) -> Floats:
    """Integrated and central field as weights on the coefficients of B."""
    integral = fit.spline.integral_row(*axis.integrate)
    centre = fit.spline.integral_row(*axis.flat) / (axis.flat[1] - axis.flat[0])
    return np.array([integral, centre])
