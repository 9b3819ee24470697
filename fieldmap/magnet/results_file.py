"""results.json: results, findings and verdicts on disk, whole or not at all."""

from __future__ import annotations

import json
from pathlib import Path
from typing import TYPE_CHECKING

from fieldmap.atomic import replacing

if TYPE_CHECKING:
    import os

    from fieldmap.magnet.results import Results

__all__ = ["save_results", "write_results"]


def save_results(results: Results, path: str | os.PathLike[str]) -> None:
    """Write results.json.

    Parameters
    ----------
    results : Results
        From `evaluate`.
    path : path
        The file; an older one is replaced only when the new one is complete.

    Raises
    ------
    InputError
        The file cannot be written.
    """
    with replacing(Path(path)) as aside:
        write_results(results, aside)


def write_results(results: Results, path: Path) -> None:
    """Write to a path straight away: for callers that take care of replacing."""
    text = json.dumps(results.as_dict(), indent=1, ensure_ascii=False, allow_nan=False)
    path.write_text(text + "\n", encoding="utf-8")
