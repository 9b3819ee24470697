"""The fringe field of each end: Enge curves fitted to the readings, and the fringe integral."""

from fieldmap.magnet.fringe.enge import EngeCurve
from fieldmap.magnet.fringe.fitted import Fringe, fringe, fringes
from fieldmap.magnet.fringe.pair import EndsCompared, compare_ends

__all__ = ["EndsCompared", "EngeCurve", "Fringe", "compare_ends", "fringe", "fringes"]
