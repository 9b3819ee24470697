"""Campaigns to files: what a simulated bench measured, as a real one would have left it."""

from __future__ import annotations

import re
from dataclasses import replace
from typing import TYPE_CHECKING, Final

from fieldmap.atomic import holds_files, new_folder, replacing_set
from fieldmap.bench.campaign_text import campaign_text
from fieldmap.bench.table_text import table_text
from fieldmap.errors import InputError

if TYPE_CHECKING:
    import os
    from collections.abc import Mapping, Sequence
    from pathlib import Path

    from fieldmap.readings.layout import TableLayout
    from fieldmap.readings.passes import Campaign, Pass

__all__ = ["write_campaign"]

_FILE_NAME: Final = "campaign.toml"
_TABLE_NAME: Final = re.compile(r"[A-Za-z0-9_][A-Za-z0-9_.-]{0,80}\.(csv|txt|dat)")


def write_campaign(
    campaign: Campaign,
    folder: str | os.PathLike[str],
    *,
    layout: TableLayout | None = None,
    preamble: Sequence[str] = (),
    units: Mapping[str, str] | None = None,
    overwrite: bool = False,
    beside: Mapping[str, str] | None = None,
) -> Path:
    """Write a campaign file and the tables of its measured passes.

    Parameters
    ----------
    campaign : Campaign
        Measured passes become tables, planned ones stay in the campaign file.
    folder : path
        Where to; made if it is not there.
    layout : TableLayout, optional
        How the tables are laid out; the campaign file says so. The kit's own if left out.
    preamble : sequence of str
        Lines that stand before the header row of every table.
    units : mapping of str to str, optional
        Units of the columns where the header row tells them, such as ``{"position": "um"}``.
    overwrite : bool
        Whether files that are there may be replaced. Other files in the folder stay.
    beside : mapping of str to str, optional
        Texts of further files by their names, such as the true values of a simulated campaign.

    Returns
    -------
    Path
        The campaign file; :func:`fieldmap.load` reads it back to the same numbers.

    Raises
    ------
    InputError
        If the folder holds something already and `overwrite` is not set, it cannot be
        written, or something in the campaign cannot be put in a file.

    Examples
    --------
    >>> import tempfile
    >>> from fieldmap.readings import Axis, Magnet, Wire, load, make_pass
    >>> from fieldmap.readings.passes import Campaign
    >>> wire = Wire("wire", turns=20, active_length=0.05)
    >>> one = make_pass([0.0, 0.1, 0.2], [0.0, 1e-3, 3e-3], rate=10.0, probe=wire)
    >>> axis = Axis("z", (0.0, 0.2), (0.05, 0.15))
    >>> campaign = Campaign("trial", Magnet("dipole", "By", gap=0.03), axis, passes=(one,))
    >>> file = write_campaign(campaign, tempfile.mkdtemp())
    >>> load(file).passes[0].flux.tolist()
    [0.0, 0.001, 0.003]

    Notes
    -----
    The files take their places together: none of them is ever left beside an older one.
    """
    if layout is not None:
        layout = replace(layout, skip_lines=len(preamble))
    elif preamble:
        expected = "a layout beside it: the kit's own tables have comments instead"
        raise InputError("argument 'preamble'", f"{len(preamble)} lines", expected)
    names = _table_names(campaign.passes)
    tables = [table_text(one, layout, preamble, units) for one in campaign.passes]
    text = campaign_text(campaign, names, layout)
    texts = {**dict(zip(names, tables, strict=True)), **(beside or {}), _FILE_NAME: text}
    with new_folder(folder) as target:
        if not overwrite and holds_files(target):
            found, remedy = "a folder that is not empty", "name another, or set overwrite=True"
            raise InputError(str(target), found, "an empty or new one", remedy)
        with replacing_set(target, list(texts)) as asides:
            for aside, one in zip(asides, texts.values(), strict=True):
                aside.write_bytes(one.encode())
    return target / _FILE_NAME


def _table_names(passes: Sequence[Pass]) -> list[str]:
    """File of each pass: its own name where that is a plain file name, else a numbered one."""
    names: list[str] = []
    taken = {one.name.casefold() for one in passes}
    for number, one in enumerate(passes, 1):
        name = one.name
        used = {other.casefold() for other in names}
        if not _TABLE_NAME.fullmatch(name) or name.casefold() in used:
            name = f"pass_{number:02d}.csv"
            while name.casefold() in taken | used:
                name = name.removesuffix(".csv") + "_.csv"
        names.append(name)
    return names
