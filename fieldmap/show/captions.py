"""What each figure shows, in a sentence with its main numbers: for those who cannot see it."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from fieldmap.estimate.map import map_passes
from fieldmap.show.look import MM
from fieldmap.show.numbers import plain, rounded, scale_for
from fieldmap.show.rows import one_line

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    import xarray as xr

    from fieldmap.magnet.quantity import Quantity
    from fieldmap.readings.passes import Axis, Pass
    from fieldmap.show.overlaps import Overlap
    from fieldmap.show.profile import Profile

__all__ = [
    "cursor_words",
    "decay_words",
    "field_words",
    "overlaps_words",
    "passes_words",
    "profile_words",
    "residuals_words",
    "uncertainty_words",
]

K = 2.0
MOST_NAMED = 12


def field_words(value: float, u: float) -> str:
    """A field with its expanded uncertainty.

    Examples
    --------
    >>> field_words(0.0123456, 1.2e-6)
    '12.3456 ± 0.0024 mT'
    """
    scale = scale_for("T", [value])
    shown, half = rounded(value * scale.factor, K * u * scale.factor)
    return f"{shown} ± {half} {scale.unit}"


def passes_words(passes: Sequence[Pass], travel: str = "z") -> str:
    """What the figure of the raw passes shows."""
    scale = scale_for("V s", [float(np.abs(one.flux).max()) for one in passes])
    told = [
        f"{one_line(one.name)} ({one_line(one.probe.name)}) from {_mm(one.position[0])} to "
        f"{_mm(one.position[-1])}, flux {one.flux.min() * scale.factor:z.3f} to "
        f"{one.flux.max() * scale.factor:z.3f} {scale.unit}"
        for one in passes[:MOST_NAMED]
    ]
    more = f"; and {len(passes) - MOST_NAMED} more" if len(passes) > MOST_NAMED else ""
    count = "1 pass" if len(passes) == 1 else f"{len(passes)} passes"
    return f"Flux as recorded against position {travel}, {count}: {'; '.join(told)}{more}."


def profile_words(
    profile: Profile,
    axis: Axis,
    results: Mapping[str, Quantity] | None = None,
    component: str = "B",
) -> str:
    """What the figure of the profile shows."""
    i = int(np.abs(profile.b).argmax())
    words = (
        f"{component} along {axis.travel} from {_mm(profile.s[0])} to {_mm(profile.s[-1])}: "
        f"largest {field_words(profile.b[i], profile.u[i])} at {_mm(profile.s[i])} (k = 2); "
        f"limits of integration {_mm(axis.integrate[0])} and {_mm(axis.integrate[1])}, "
        f"flat window {_mm(axis.flat[0])} to {_mm(axis.flat[1])}"
    )
    length = (results or {}).get("magnetic_length")
    if length is not None:
        shown, half = rounded(length.value * MM, length.expanded(K) * MM)
        words += f"; magnetic length {shown} ± {half} mm"
    return f"{words}."


def uncertainty_words(profile: Profile, component: str = "B") -> str:
    """What the figure of the uncertainty shows."""
    half = K * profile.u
    scale = scale_for("T", [float(half.max())])
    i, middle = int(half.argmax()), float(np.median(half))
    return (
        f"2u of {component} from {_mm(profile.s[0])} to {_mm(profile.s[-1])}: "
        f"median {plain(middle * scale.factor, 2)} {scale.unit}, "
        f"largest {plain(float(half[i]) * scale.factor, 2)} {scale.unit} at {_mm(profile.s[i])}."
    )


def residuals_words(fmap: xr.Dataset) -> str:
    """What the figure of the residuals shows."""
    residual = fmap["residual"].values
    if not len(residual):
        return "No residuals: nothing but references."
    names = [one_line(facts["name"]) for facts in map_passes(fmap)]
    i = int(np.abs(residual).argmax())
    within = 100 * float(np.mean(np.abs(residual) <= K))
    return (
        f"Normalised residuals of {len(names)} {'pass' if len(names) == 1 else 'passes'}, "
        f"{len(residual)} increments: {within:.1f} % within ±2 (95.4 % expected), "
        f"largest {residual[i]:+.1f} in {names[int(fmap['residual_pass'].values[i])]} "
        f"at {_mm(fmap['residual_position'].values[i])}."
    )


def overlaps_words(overlaps: Sequence[Overlap]) -> str:
    """What the figure of each pass against the map of all shows."""
    if not overlaps:
        return "No overlaps: nothing but references."
    far = max(overlaps, key=lambda one: float(np.abs(one.difference).max()))
    i = int(np.abs(far.difference).argmax())
    value = float(far.difference[i])
    scale = scale_for("V s", [value])
    ranked = sorted(overlaps, key=lambda one: -one.ratio)[:MOST_NAMED]
    told = ", ".join(f"{one_line(one.name)} {one.ratio:.2f}" for one in ranked)
    more = f" and {len(overlaps) - MOST_NAMED} more" if len(overlaps) > MOST_NAMED else ""
    return (
        f"Recorded less predicted flux of {len(overlaps)} "
        f"{'pass' if len(overlaps) == 1 else 'passes'} against the map of all, each levelled: "
        f"largest {value * scale.factor:+.3f} {scale.unit} in {one_line(far.name)} at "
        f"{_mm(far.position[i])}. Size over what its noise explains, 1 or less if sound: "
        f"{told}{more}."
    )


def decay_words(profile: Profile, component: str = "B") -> str:
    """What the figure of the field on a logarithmic scale shows."""
    size = np.abs(profile.b)
    told = size > K * profile.u
    share = 100 * float(np.mean(told))
    scale = scale_for("T", [float(size.min())])
    return (
        f"Size of {component} from {_mm(profile.s[0])} to {_mm(profile.s[-1])}, logarithmic: "
        f"from {field_words(float(size.max()), float(profile.u[size.argmax()]))} down to "
        f"{plain(float(size.min()) * scale.factor, 2)} {scale.unit}; "
        f"on {share:.0f} % of that stretch it exceeds 2u."
    )


def cursor_words(at: float, value: float, u: float, component: str = "B") -> str:
    """The field at one position.

    Examples
    --------
    >>> cursor_words(0.2, 0.25, 1e-5, "By")
    'By at 200 mm is 0.250000 ± 0.000020 T (k = 2).'
    """
    return f"{component} at {_mm(at)} is {field_words(value, u)} (k = 2)."


def _mm(position: float) -> str:
    return f"{plain(float(position) * MM, 5)} mm"
