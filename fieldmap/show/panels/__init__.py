"""Panels for notebooks: all of what they do is here, a notebook only shows them."""

from fieldmap.show.panels.fringe_map import FringeMapPanel
from fieldmap.show.panels.magnetic_length import MagneticLengthPanel

__all__ = ["FringeMapPanel", "MagneticLengthPanel"]
