"""Where panels write: into folders of one's own, never into those that came with the kit."""

from __future__ import annotations

import os
from pathlib import Path
from typing import Final

from fieldmap.errors import InputError
from fieldmap.shipped import PACKAGE, demo_folder

__all__ = ["is_shipped", "results_folder", "settings_file", "writable_folder"]

RESULTS: Final = "fieldmap-results"


def is_shipped(place: Path) -> bool:
    """Whether a place lies in a folder that came with the kit."""
    whole = place.resolve()
    return any(whole.is_relative_to(own) for own in (demo_folder().resolve(), PACKAGE))


def results_folder(campaign_file: Path | None) -> Path:
    """The folder that is proposed for results: below the current one, of the campaign's name."""
    name = campaign_file.resolve().parent.name if campaign_file else ""
    return Path.cwd() / RESULTS / name


def settings_file(campaign_file: Path) -> Path:
    """Where a panel keeps its settings: beside the campaign, or where results go.

    Parameters
    ----------
    campaign_file : Path
        The campaign.toml.

    Returns
    -------
    Path
        Beside it, if one may write there and it is no folder that came with the kit.
    """
    folder = campaign_file.resolve().parent
    if is_shipped(folder) or not os.access(folder, os.W_OK):
        folder = results_folder(campaign_file)
    return folder / f"{campaign_file.stem}.panel.json"


def writable_folder(folder: str | os.PathLike[str]) -> Path:
    """A folder to write to.

    Parameters
    ----------
    folder : path
        As it was typed.

    Returns
    -------
    Path

    Raises
    ------
    InputError
        An empty name, or a folder that came with the kit.
    """
    text = str(folder).strip()
    if not text:
        raise InputError("folder for the files", "nothing", "the name of a folder", "name one")
    place = Path(text).expanduser()
    if is_shipped(place):
        raise InputError(
            str(place),
            "a folder that came with the kit",
            "a folder of your own",
            "name another one, so that the demo stays as it came",
        )
    return place
