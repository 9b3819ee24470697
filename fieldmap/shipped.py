"""Where the demo campaigns and notebooks are: in the installed package, or beside its source."""

from __future__ import annotations

from pathlib import Path

from fieldmap.errors import FieldmapError

__all__ = ["PACKAGE", "demo_folder", "notebook_folder"]

PACKAGE = Path(__file__).resolve().parent


def demo_folder() -> Path:
    """Folder of the demo campaigns: read from it, copy it, but write elsewhere.

    Returns
    -------
    Path

    Examples
    --------
    >>> (demo_folder() / "slot" / "campaign.toml").is_file()
    True
    """
    return _find("demo_data")


def notebook_folder() -> Path:
    """Folder of the notebooks.

    Returns
    -------
    Path

    Examples
    --------
    >>> (notebook_folder() / "check_magnetic_length.ipynb").is_file()
    True
    """
    return _find("notebooks")


def _find(name: str) -> Path:
    for place in (PACKAGE / "_shipped" / name, PACKAGE.parent / name):
        if place.is_dir():
            return place
    raise FieldmapError(
        f"{PACKAGE}: found no folder '{name}', expected the one shipped with the package; "
        "install the package again."
    )
