"""Field profiles, integrated field and magnetic length from moving-coil and moving-wire scans.

>>> import fieldmap
>>> from fieldmap.shipped import demo_folder
>>> campaign = fieldmap.load(demo_folder() / "slot" / "campaign.toml")
>>> fmap = fieldmap.stitch(campaign)
>>> results = fieldmap.evaluate(fmap, campaign)
"""

from fieldmap.errors import FieldmapError, InputError, RefusedError
from fieldmap.estimate.stitch import reconstruct, stitch
from fieldmap.estimate.store import load_map, save_map
from fieldmap.magnet.budget import budget
from fieldmap.magnet.comparison import compare
from fieldmap.magnet.evaluate import evaluate
from fieldmap.magnet.handover import export_table
from fieldmap.readings import Campaign, load, make_pass
from fieldmap.show.handover import save_reduction
from fieldmap.version import __version__

__all__ = [
    "Campaign",
    "FieldmapError",
    "InputError",
    "RefusedError",
    "__version__",
    "budget",
    "compare",
    "evaluate",
    "export_table",
    "load",
    "load_map",
    "make_pass",
    "reconstruct",
    "save_map",
    "save_reduction",
    "stitch",
]
