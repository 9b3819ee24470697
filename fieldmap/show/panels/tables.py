"""Tell the kit how a foreign table is laid out, and write that into a campaign file."""

from __future__ import annotations

import logging
import threading
from html import escape
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

from fieldmap.errors import FieldmapError, InputError
from fieldmap.progress import silent
from fieldmap.readings.campaign import load
from fieldmap.readings.guess import guess_table
from fieldmap.readings.layout import QUANTITIES, read_layout
from fieldmap.readings.preview import open_head, raw_lines
from fieldmap.readings.records import SAMPLES
from fieldmap.readings.table_section import section_text, write_table_section
from fieldmap.show.panels.parts import button, column, hooked, put_on_page, row, titled
from fieldmap.show.panels.table_fields import LayoutFields
from fieldmap.show.rows import one_line
from fieldmap.show.stylesheet import stylesheet
from fieldmap.show.table_preview import parsed_html, raw_html

if TYPE_CHECKING:
    import os
    from collections.abc import Callable

    from fieldmap.readings.tables import Samples

__all__ = ["TablePanel"]

LOG: Final = logging.getLogger("fieldmap")
CHOOSE: Final = "Name a table of readings."


class TablePanel:
    """Preview a table as it stands and as it is read; write the layout once it is right.

    Attributes
    ----------
    path : ipywidgets.Text
        The table.
    fields : LayoutFields
        How it is laid out: filled with a guess whenever another table is named.
    campaign : ipywidgets.Text
        The campaign file whose ``[table]`` section is written.
    guess, write : ipywidgets.Button
        Guess again; write.
    raw, parsed, status, told : ipywidgets.HTML
        First lines, first readings, what is wrong or right, what was written.
    error : str
        What is wrong, in words; empty if nothing is.
    widget : ipywidgets.VBox
        To show.

    Examples
    --------
    >>> from fieldmap.shipped import demo_folder
    >>> panel = TablePanel()
    >>> panel.open(demo_folder() / "foreign_tables" / "pass_01.csv")
    >>> panel.fields.delimiter.value, panel.fields.decimal.value
    (';', ',')
    """

    def __init__(self) -> None:
        import ipywidgets

        self.error = ""
        self.lock = threading.RLock()  # handlers of widgets run in threads of their own
        self.fields = LayoutFields(self._on_layout)
        self.path = _text("Table", "path of a table: text or NetCDF", "fm-table-path")
        self.campaign = _text("Campaign", "path of a campaign.toml, or of its folder",
                              "fm-table-campaign")  # fmt: skip
        self.guess = button("Guess again", "Fill in what the file looks like", "fm-guess")
        self.write = button("Write [table]", "Write the layout into the campaign", "fm-write")
        self.status = hooked(ipywidgets.HTML(_status("", CHOOSE)), "fm-table-status")
        self.raw = hooked(ipywidgets.HTML(), "fm-preview", "fm-raw-box")
        self.parsed = hooked(ipywidgets.HTML(), "fm-preview", "fm-parsed-box")
        self.told = hooked(ipywidgets.HTML(), "fm-written")
        self.widget = column(
            (
                ipywidgets.HTML(f"<style>{stylesheet()}</style>"),
                hooked(ipywidgets.HTML('<h3 class="fm-title">Foreign tables</h3>')),
                row((self.path, self.guess), "fm-chooser"),
                self.status,
                titled("As it stands", (self.raw,)),
                titled("How it is laid out", (self.fields.widget,)),
                titled("As it is read, in SI", (self.parsed,)),
                titled("Into a campaign", (row((self.campaign, self.write)), self.told)),
            ),
            "fm",
            "fm-panel",
            "fm-tables",
        )
        self.path.observe(self._on_path, names="value")
        self.guess.on_click(self._on_path)
        self.write.on_click(self._on_write)

    def open(
        self,
        path: str | os.PathLike[str],
        campaign: str | os.PathLike[str] | None = None,
    ) -> None:
        """Look at a table.

        Parameters
        ----------
        path : path
            The table.
        campaign : path, optional
            The campaign file that its layout is for.
        """
        if campaign is not None:
            self.campaign.value = str(campaign)
        self.path.value = str(path)

    def show(
        self,
        path: str | os.PathLike[str] | None = None,
        campaign: str | os.PathLike[str] | None = None,
    ) -> None:
        """Show the panel in a notebook; with a table, as `open` does."""
        put_on_page(self.widget, "Foreign tables")
        if path is not None:
            self.open(path, campaign)

    def close(self) -> None:
        """Take the panel off the page."""
        self.widget.close()

    def _on_path(self, _: Any) -> None:
        with self.lock:
            self.raw.value = self.parsed.value = self.told.value = ""
            name = self.path.value.strip()
            if not name:
                self.status.value = _status("", CHOOSE)
                return
            if self._attempt("looking at the table", lambda: self._look(name)):
                self._on_layout()

    def _look(self, name: str) -> None:
        """Show the first lines, and fill in the guess."""
        self.raw.value = raw_html(raw_lines(_path(name)))
        self.fields.fill(guess_table(_path(name)))

    def _on_layout(self) -> None:
        with self.lock:
            self.parsed.value = self.told.value = ""
            if self.path.value.strip():
                self._attempt("reading the table", self._preview)

    def _preview(self) -> None:
        """Read the head with the layout as it is."""
        path, raw = _path(self.path.value.strip()), self.fields.raw()
        bare = {key: value for key, value in raw.items() if key not in QUANTITIES}
        opening = {key: bare[key] for key in bare if key not in {"rate", "per_count"}}
        self.fields.offer(open_head(path, read_layout(opening, "[table]")).headings)
        layout = read_layout(self.fields.raw(), "[table]")
        head = open_head(path, layout)
        samples: Samples = self.fields.samples.value
        columns = head.columns(samples)
        self.parsed.value = parsed_html(columns)
        count = len(columns["time"])
        part = "" if head.whole else " in its first 64 kB"
        self.status.value = _status("", f"It can be read: {count} readings{part}.")

    def _on_write(self, _: Any) -> None:
        with self.lock:
            self.told.value = ""
            self._attempt("writing", self._write)

    def _write(self) -> None:
        if not self.path.value.strip():
            self.status.value = _status("", CHOOSE)
            return
        self._preview()  # what cannot be read is not written
        if not self.campaign.value.strip():
            raise InputError("campaign", "nothing", "the path of a campaign.toml", "name one")
        path = _path(self.campaign.value.strip())
        section = write_table_section(path, self.fields.raw())
        self.told.value = (
            f'<p role="status">Written into {escape(one_line(path))}:</p>'
            f"{raw_html(section.splitlines())}<p>{escape(self._outcome(path))}</p>"
        )

    def _outcome(self, path: str) -> str:
        """How the campaign reads now."""
        samples = self.fields.samples.value
        record = next(name for name, (kind, _) in SAMPLES.items() if kind == samples)
        remark = ""
        if record != "cumulative":
            remark = f' Each of its [[passes]] needs record = "{record}".'
        try:
            campaign = load(path, tell=silent)
        except FieldmapError as error:
            return f"The campaign does not read yet: {one_line(str(error))}{remark}"
        return f"The campaign reads now: {len(campaign.passes)} passes.{remark}"

    def _attempt(self, what: str, work: Callable[[], None]) -> bool:
        """Do something; what goes wrong is said in the panel, since nothing else would."""
        self.error = ""
        try:
            work()
        except FieldmapError as error:
            self.error = str(error)
        except Exception as error:
            LOG.exception("%s failed", what)  # an exception in a handler reaches no user
            kind = type(error).__name__
            self.error = f"{what}: found a failure of the kit's own ({kind}: {error})."
        if self.error:
            self.status.value = _status(self.error, "")
        return not self.error

    @property
    def section(self) -> str:
        """The section as it would be written."""
        return section_text(self.fields.raw())


def _path(name: str) -> str:
    return str(Path(name).expanduser())


def _text(description: str, placeholder: str, hook: str) -> Any:
    import ipywidgets

    field = ipywidgets.Text(
        description=description,
        placeholder=placeholder,
        continuous_update=False,
        style={"description_width": "70px"},
    )
    return hooked(field, "fm-wide", hook)


def _status(error: str, words: str) -> str:
    if error:
        return f'<div role="alert" class="fm-alert">{escape(one_line(error))}</div>'
    return f'<div role="status" class="fm-ready">{escape(words)}</div>'
