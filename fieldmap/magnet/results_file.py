"""results.json: results, findings and verdicts on disk, whole or not at all."""

from __future__ import annotations

import json
from pathlib import Path
from typing import TYPE_CHECKING

from fieldmap.atomic import write_bytes

if TYPE_CHECKING:
    import os

    from fieldmap.magnet.quantity import Results

__all__ = ["save_results"]


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
    text = json.dumps(results.as_dict(), indent=1, ensure_ascii=False, allow_nan=False)
    write_bytes(Path(path), (text + "\n").encode())
