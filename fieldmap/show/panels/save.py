"""Write map.nc, results.json and report.html."""

from __future__ import annotations

from html import escape
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

from fieldmap.show.panels.parts import button, column, hooked, row

if TYPE_CHECKING:
    from fieldmap.show.panels.state import Reduction, Topic

__all__ = ["SavePanel"]

FOLDER: Final = "fieldmap-results"


class SavePanel:
    """A folder and a button.

    Parameters
    ----------
    state : Reduction
        What is written.

    Attributes
    ----------
    folder : ipywidgets.Text
        Where to; a folder below the current one to begin with.
    write : ipywidgets.Button
        Writes.
    told : ipywidgets.HTML
        What was written.
    widget : ipywidgets.VBox
        To show.
    """

    def __init__(self, state: Reduction) -> None:
        import ipywidgets

        self.state = state
        self._proposed = ""
        self.folder = ipywidgets.Text(
            description="Folder", continuous_update=False, style={"description_width": "46px"}
        )
        hooked(self.folder, "fm-folder")
        files = "map.nc, results.json and report.html"
        self.write = button("Write files", f"Write {files} there", "fm-write")
        self.told = hooked(ipywidgets.HTML(), "fm-written")
        self.widget = column((row((self.folder, self.write)), self.told), "fm-save")
        self._propose()
        self.write.on_click(self._on_write)
        state.listen(self._on_change)

    def _on_write(self, _: Any) -> None:
        self.state.save(self.folder.value)

    def _on_change(self, topic: Topic) -> None:
        if topic == "campaign":
            self._propose()
        if topic in {"campaign", "map", "results"}:
            self.told.value = ""  # what is shown is not what was written any more
        if topic == "saved":
            names = ", ".join(str(file) for file in self.state.saved)
            self.told.value = f'<p role="status">Written: {escape(names)}</p>' if names else ""

    def _propose(self) -> None:
        """Propose a folder of the campaign's name, unless another was typed."""
        if self.folder.value != self._proposed:
            return
        campaign = self.state.campaign
        path = campaign.path if campaign else None
        self._proposed = str(Path.cwd() / FOLDER / (path.resolve().parent.name if path else ""))
        self.folder.value = self._proposed
