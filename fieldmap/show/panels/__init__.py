"""Panels for notebooks: all of what they do is here, a notebook only shows them."""

from fieldmap.show.panels.explore import ExplorePanel
from fieldmap.show.panels.fringe_map import FringeMapPanel
from fieldmap.show.panels.magnetic_length import MagneticLengthPanel
from fieldmap.show.panels.tables import TablePanel

__all__ = ["ExplorePanel", "FringeMapPanel", "MagneticLengthPanel", "TablePanel"]
