"""Write map.nc, results.json and report.html."""

from __future__ import annotations

from html import escape
from typing import TYPE_CHECKING, Any

from fieldmap.show.panels.parts import button, column, hooked, row
from fieldmap.show.panels.places import results_folder

if TYPE_CHECKING:
    from fieldmap.show.panels.state import Reduction, Topic

__all__ = ["SavePanel"]


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
        state.remember("folder", self._chosen, self._choose)
        self.folder.observe(self._on_folder, names="value")
        self.write.on_click(self._on_write)
        state.listen(self._on_change)

    def _chosen(self) -> str | None:
        """The folder, where it is not the proposed one."""
        return None if self.folder.value == self._proposed else str(self.folder.value)

    def _choose(self, folder: Any) -> None:
        self.folder.value = self._proposed if folder is None else folder

    def _on_folder(self, _: Any) -> None:
        self.state.keep()

    def _on_write(self, _: Any) -> None:
        self.state.save(self.folder.value)

    def _on_change(self, topic: Topic) -> None:
        if topic == "campaign":
            self._propose()
        if topic in {"campaign", "passes", "stale", "map", "results"}:
            self.told.value = ""  # what is shown is not what was written any more
        if topic == "saved":
            names = ", ".join(str(file) for file in self.state.saved)
            self.told.value = f'<p role="status">Written: {escape(names)}</p>' if names else ""

    def _propose(self) -> None:
        """Propose a folder of the campaign's name, unless another was typed."""
        if self.folder.value != self._proposed:
            return
        campaign = self.state.campaign
        self._proposed = str(results_folder(campaign.path if campaign else None))
        self.folder.value = self._proposed
