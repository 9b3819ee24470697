"""What was set by hand, kept beside the campaign so that a restart loses nothing."""

from __future__ import annotations

import json
import logging
from typing import TYPE_CHECKING, Any, Final, NamedTuple

from fieldmap.atomic import new_folder, replacing
from fieldmap.errors import FieldmapError
from fieldmap.readings.schema import shown
from fieldmap.readings.tables import read_bytes
from fieldmap.show.panels.places import settings_file

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping
    from pathlib import Path

__all__ = ["FORMAT", "Settings"]

FORMAT: Final = "fieldmap-panel/1"
LOG: Final = logging.getLogger("fieldmap")
LARGEST: Final = 1_000_000  # bytes
OWN: Final = frozenset({"format", "campaign"})

LONGEST: Final = 200  # letters of a reason


class _Entry(NamedTuple):
    get: Callable[[], Any]
    put: Callable[[Any], None]
    usual: Any


class Settings:
    """Named values that can be asked for and set.

    Examples
    --------
    >>> settings, shown = Settings(), {"figure": "profile"}
    >>> settings.remember("figure", lambda: shown["figure"], lambda v: shown.update(figure=v))
    >>> settings.restore({"figure": "budget"})
    []
    >>> settings.changed()
    {'figure': 'budget'}
    """

    def __init__(self) -> None:
        self._entries: dict[str, _Entry] = {}
        self._kept: dict[str, Any] | None = None  # what the file holds; None without a file

    def remember(self, name: str, get: Callable[[], Any], put: Callable[[Any], None]) -> None:
        """Name a value to keep.

        Parameters
        ----------
        name : str
            Its key in the file.
        get : callable
            Gives it, of types that JSON knows; what it gives now is what is usual.
        put : callable
            Sets it. What it raises is told in words.
        """
        self._entries[name] = _Entry(get, put, _plain(get()))

    def changed(self) -> dict[str, Any]:
        """The values that are not the usual ones."""
        values = {name: _plain(entry.get()) for name, entry in self._entries.items()}
        return {name: v for name, v in values.items() if v != self._entries[name].usual}

    def usual(self) -> dict[str, Any]:
        """The values before anything was set by hand."""
        return {name: entry.usual for name, entry in self._entries.items()}

    def restore(self, values: Mapping[str, Any]) -> list[str]:
        """Set values that were kept; what is not named stays as it is.

        Parameters
        ----------
        values : mapping
            From `read`; names that nobody knows are passed over.

        Returns
        -------
        list of str
            A sentence for each that could not be set.
        """
        told = []
        for name, entry in self._entries.items():
            if name not in values or _plain(entry.get()) == values[name]:
                continue
            try:
                entry.put(values[name])
            except Exception as error:  # noqa: BLE001 - whatever stands in the file
                reason = str(error).splitlines()[0] if str(error) else type(error).__name__
                told.append(f"The setting '{name}' was not taken up ({reason:.{LONGEST}}).")
        return told

    def read(self, campaign_file: Path) -> tuple[dict[str, Any], str]:
        """What was kept for a campaign.

        Parameters
        ----------
        campaign_file : Path
            The campaign.toml.

        Returns
        -------
        dict, str
            The values, and a sentence where there are any or where the file is of no use.
        """
        self._kept = None
        try:
            file = settings_file(campaign_file)
            if not file.exists():
                return {}, ""
        except OSError as error:
            return {}, f"Settings are not looked for: {error.strerror or error}."
        try:
            found = json.loads(read_bytes(file, file.name, LARGEST))
        except (FieldmapError, ValueError, RecursionError) as error:
            return {}, _useless(file, str(error).rstrip("."))
        if not isinstance(found, dict) or found.get("format") != FORMAT:
            stands = shown(found.get("format")) if isinstance(found, dict) else "no table"
            return {}, _useless(file, f"found {stands}, expected the format '{FORMAT}'")
        if file.parent != campaign_file.resolve().parent and not _is_of(found, campaign_file):
            return {}, ""  # another campaign whose folder has the same name
        values = {name: value for name, value in found.items() if name not in OWN}
        self._kept = values
        return values, f"Settings taken up from {file.name}." if values else ""

    def keep(self, campaign_file: Path) -> str:
        """Write what is not usual; a sentence if it cannot be done, whatever the reason."""
        try:
            return self.write(campaign_file, self.changed())
        except Exception as error:
            LOG.exception("keeping settings failed")
            return f"Settings are not kept: a failure of the kit's own ({type(error).__name__})."

    def write(self, campaign_file: Path, values: Mapping[str, Any]) -> str:
        """Keep values; nothing is written where nothing has changed.

        Parameters
        ----------
        campaign_file : Path
            The campaign.toml.
        values : mapping
            Without those that are usual.

        Returns
        -------
        str
            A sentence if it cannot be done.
        """
        # another kind of panel on the same campaign keeps names that this one does not know
        others = {n: v for n, v in (self._kept or {}).items() if n not in self._entries}
        kept = others | _plain(dict(values))
        if kept == self._kept or (not kept and self._kept is None):
            return ""
        try:
            file = settings_file(campaign_file)
            whole = {"format": FORMAT, "campaign": str(campaign_file.resolve()), **kept}
            with new_folder(file.parent), replacing(file) as aside:
                aside.write_text(json.dumps(whole, indent=1) + "\n", encoding="utf-8")
        except (FieldmapError, OSError) as error:
            return f"Settings are not kept: {error}"
        self._kept = kept
        return ""


def _plain(value: Any) -> Any:
    """A value as it comes back from JSON: tuples as lists."""
    return json.loads(json.dumps(value))


def _is_of(found: Mapping[str, Any], campaign_file: Path) -> bool:
    return found.get("campaign") == str(campaign_file.resolve())


def _useless(file: Path, why: str) -> str:
    return (
        f"The settings in {file.name} are not taken up: {why}; they are replaced when you set "
        "something."
    )
