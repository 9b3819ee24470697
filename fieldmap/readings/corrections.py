"""Corrections that the user switches on: what undoes a fault of one pass.

None is ever applied by itself. A finding offers one; it acts once it stands in the campaign file
(``[[corrections]]``) or is ticked in a panel.
"""

from __future__ import annotations

import json
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any, Final, Literal, get_args

import numpy as np
import numpy.typing as npt

from fieldmap.errors import InputError
from fieldmap.readings.checks import FEWEST_READINGS
from fieldmap.units import quoted

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from fieldmap.readings.passes import Campaign, Pass

__all__ = [
    "CORRECTIONS",
    "Correction",
    "CorrectionKind",
    "check_correction",
    "check_once",
    "corrected",
    "entries_text",
    "left_in",
]

CorrectionKind = Literal["polarity", "factor", "lag", "shift", "step", "spikes"]

CORRECTIONS: Final[tuple[CorrectionKind, ...]] = get_args(CorrectionKind)

RINGING: Final = 8  # samples beside a wild voltage in which its share falls to a millionth


@dataclass(frozen=True)
class Correction:
    """What undoes one fault of one pass.

    Parameters
    ----------
    kind : {"polarity", "factor", "lag", "shift", "step", "spikes"}
        - polarity: the flux is turned round;
        - factor: the flux is multiplied by `value` (a wrong power of ten, wrong turns; below zero
          it turns the flux round as well), known within the relative standard uncertainty `u`,
          which the other passes then reduce;
        - lag: the pass was read `value` seconds late, within `u` seconds;
        - shift: its positions are `value` metres too small, within `u` metres;
        - step: from the time `start` on the flux is displaced by an unknown amount;
        - spikes: readings from the time `start` to the time `stop` are left out.
    where : str
        Name of the pass.
    value, u : float
        As above; zero where the kind has none.
    start, stop : float
        Time of the pass, s; zero where the kind has none.
    """

    kind: CorrectionKind
    where: str
    value: float = 0.0
    u: float = 0.0
    start: float = 0.0
    stop: float = 0.0

    def as_entry(self) -> dict[str, Any]:
        """The entry that switches it on, as it stands in a campaign file."""
        entry: dict[str, Any] = {"kind": self.kind, "pass": self.where}
        if self.kind == "factor":
            entry |= {"factor": self.value, "u_factor": self.u}
        elif self.kind in ("lag", "shift"):
            unit = "s" if self.kind == "lag" else "m"
            entry |= {self.kind: f"{self.value!r} {unit}", f"u_{self.kind}": f"{self.u!r} {unit}"}
        elif self.kind == "step":
            entry |= {"at": f"{self.start!r} s"}
        elif self.kind == "spikes":
            entry |= {"from": f"{self.start!r} s", "to": f"{self.stop!r} s"}
        return entry

    @property
    def words(self) -> str:
        """What is done, in a few words.

        Examples
        --------
        >>> Correction("lag", "pass_02.csv", 0.05, 0.001).words
        'read 50 ms late, u = 1 ms'
        """
        value, u = self.value, self.u
        return {
            "polarity": "flux turned round",
            "factor": f"flux multiplied by {value:.6g}, u = {u * 100:.3g} %",
            "lag": f"read {value * 1e3:.6g} ms late, u = {u * 1e3:.3g} ms",
            "shift": f"positions {value * 1e3:.6g} mm too small, u = {u * 1e3:.3g} mm",
            "step": f"step of unknown size at {self.start:.9g} s",
            "spikes": f"readings from {self.start:.9g} to {self.stop:.9g} s left out",
        }[self.kind]

    @property
    def place(self) -> tuple[str, str, float, float]:
        """What there is one correction for: a kind, a pass, and a time where the kind has one."""
        return self.kind, self.where, self.start, self.stop


def corrected(campaign: Campaign, corrections: Iterable[Correction]) -> Campaign:
    """The campaign with more corrections switched on.

    Parameters
    ----------
    campaign : Campaign
        From `load`, or built from plain arrays; it stays as it is.
    corrections : iterable of Correction
        What to add, from findings or by hand; those it has already are passed over.

    Returns
    -------
    Campaign

    Raises
    ------
    InputError
        A correction of a pass that is not there, one that does not fit its pass, or a second one
        of a kind with another value.

    Examples
    --------
    >>> from fieldmap.readings import load
    >>> from fieldmap.shipped import demo_folder
    >>> turned = Correction("polarity", "pass_01.csv")
    >>> campaign = corrected(load(demo_folder() / "foreign_tables"), [turned, turned])
    >>> campaign.corrections == (turned,)
    True
    """
    known = tuple(dict.fromkeys([*campaign.corrections, *corrections]))
    passes = {one.name: one for one in campaign.passes}
    for number, one in enumerate(known):
        where = f"correction '{one.kind}' of {one.where}"
        check_correction(one, passes.get(one.where), where, tuple(passes))
        check_once(one, known[:number], where)
    return replace(campaign, corrections=known)


def check_correction(
    one: Correction, measured: Pass | None, where: str, names: Sequence[str]
) -> None:
    """Refuse a correction that does not fit its pass.

    Parameters
    ----------
    one : Correction
        The correction.
    measured : Pass or None
        The pass of its name, if there is one.
    where : str
        How the error names the correction.
    names : sequence of str
        The passes that there are.

    Raises
    ------
    InputError
    """
    if measured is None:
        known = ", ".join(quoted(name) for name in names) or "none"
        found = f"{quoted(one.where)}, which is no measured pass"
        remedy = "name the pass as its 'file' does"
        raise InputError(where, found, f"a pass among {known}", remedy)
    _check_numbers(one, where)
    first, last = float(measured.time[0]), float(measured.time[-1])
    span = f"{first:.9g} to {last:.9g} s"
    if one.kind == "step" and not first < one.start <= last:
        expected = f"a time within the pass and after its first reading, {span}"
        raise InputError(where, f"a step at {one.start:.9g} s", expected, "mend 'at'")
    if one.kind == "spikes":
        _check_spikes(one, measured, where, span)


def _check_numbers(one: Correction, where: str) -> None:
    if one.kind not in CORRECTIONS:
        raise InputError(where, f"the kind {quoted(one.kind)}", f"one of {', '.join(CORRECTIONS)}")
    if not np.isfinite([one.value, one.u, one.start, one.stop]).all():
        raise InputError(where, "a number that is not finite", "finite numbers")
    if one.u < 0:
        raise InputError(where, f"a standard uncertainty of {one.u:g}", "zero or above")
    if one.kind == "factor" and one.value == 0:
        raise InputError(where, "a factor of 0", "a factor other than zero", "leave the pass out")


def _check_spikes(one: Correction, measured: Pass, where: str, span: str) -> None:
    found = f"readings from {one.start:.9g} to {one.stop:.9g} s"
    if one.stop < one.start:
        raise InputError(where, found, "'from' not after 'to'", "exchange or mend the two")
    left = left_in(measured, [one])
    if left.all():
        expected = f"a time in which the pass has readings, within {span}"
        raise InputError(where, f"no {found}", expected, "mend 'from' and 'to'")
    if int(left.sum()) < FEWEST_READINGS:
        expected = f"{FEWEST_READINGS} or more readings left in the pass"
        raise InputError(where, f"nearly all {found}", expected, "leave the whole pass out instead")


def left_in(measured: Pass, corrections: Iterable[Correction]) -> npt.NDArray[np.bool_]:
    """Which readings stay once the spikes among some corrections are left out.

    The spline through samples of a voltage rings beside a wild one, falling to a quarter from
    sample to sample: those few go with it.
    """
    left_out = np.zeros(len(measured.time), dtype=bool)
    for one in corrections:
        if one.kind == "spikes":
            left_out |= (measured.time >= one.start) & (measured.time <= one.stop)
    if measured.record == "voltage":
        near = np.ones(2 * RINGING + 1)
        left_out = np.convolve(left_out, near)[RINGING : RINGING + len(left_out)] > 0
    return ~left_out


def check_once(one: Correction, others: Iterable[Correction], where: str) -> None:
    """Refuse a second correction of the same kind, pass and time."""
    if one.place in {other.place for other in others}:
        found = f"a second correction of the kind '{one.kind}' for {quoted(one.where)}"
        timed = " at one time" if one.kind in ("step", "spikes") else ""
        raise InputError(where, found, f"one of a kind{timed} for each pass", "delete one of them")


def entries_text(corrections: Iterable[Correction]) -> str:
    """Corrections as they stand in a campaign file.

    Examples
    --------
    >>> print(entries_text([Correction("lag", "pass_02.csv", 0.05, 0.001)]))
    [[corrections]]
    kind = "lag"
    pass = "pass_02.csv"
    lag = "0.05 s"
    u_lag = "0.001 s"
    """
    blocks = []
    for one in corrections:
        lines = [f"{key} = {_toml(value)}" for key, value in one.as_entry().items()]
        blocks.append("\n".join(["[[corrections]]", *lines]))
    return "\n\n".join(blocks)


def _toml(value: str | float) -> str:
    """A text or a number as TOML writes it."""
    if isinstance(value, str):
        return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")
    return repr(float(value))
