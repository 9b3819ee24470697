"""Corrections that the user switches on: what undoes a fault of one pass.

None is ever applied by itself. A finding offers one; it acts once it stands in the campaign file
(``[[corrections]]``) or is ticked in a panel.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Final, Literal

__all__ = ["CORRECTIONS", "Correction", "CorrectionKind"]

CorrectionKind = Literal["polarity", "factor", "lag", "shift", "step", "spikes"]

CORRECTIONS: Final[tuple[CorrectionKind, ...]] = (
    "polarity",
    "factor",
    "lag",
    "shift",
    "step",
    "spikes",
)


@dataclass(frozen=True)
class Correction:
    """What undoes one fault of one pass.

    Parameters
    ----------
    kind : {"polarity", "factor", "lag", "shift", "step", "spikes"}
        - polarity: the flux is turned round;
        - factor: the flux is multiplied by `value` (a wrong power of ten, wrong turns), known
          within the relative standard uncertainty `u`, which the other passes then reduce;
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
