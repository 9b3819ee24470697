"""One remark on the readings, and the correction that it may offer."""

from __future__ import annotations

from dataclasses import asdict, dataclass
from typing import TYPE_CHECKING, Any, Literal

if TYPE_CHECKING:
    from fieldmap.readings.corrections import Correction

__all__ = ["Finding"]


@dataclass(frozen=True)
class Finding:
    """One remark on the readings.

    Parameters
    ----------
    code : str
        Stable code.
    severity : {"refuse", "warn", "note"}
        How much it matters.
    where : str
        Pass, probe or key concerned.
    text : str
        One sentence: the number that triggered it, and the remedy.
    correction : Correction, optional
        What would undo the fault; applied only where the user switches it on.
    """

    code: str
    severity: Literal["refuse", "warn", "note"]
    where: str
    text: str
    correction: Correction | None = None

    @property
    def offer(self) -> str:
        """How to switch on the correction that it offers; empty without one."""
        if self.correction is None:
            return ""
        return (
            f"Offered correction: {self.correction.words}; switch it on by fieldmap reduce "
            f"--correct {self.correction.where}, by its tick in the notebook, or in "
            "[[corrections]]."
        )

    def as_dict(self) -> dict[str, Any]:
        """The form used in results.json."""
        found = asdict(self)
        if self.correction is None:
            del found["correction"]
        else:
            found["correction"] = self.correction.as_entry()
        return found
