"""Which campaign: one of the demo, or a file of one's own."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Final

from fieldmap.shipped import demo_folder
from fieldmap.show.panels.parts import button, hooked, row

if TYPE_CHECKING:
    from pathlib import Path

    from fieldmap.show.panels.state import Reduction, Topic

__all__ = ["CampaignPanel", "demo_campaigns"]

OWN: Final = ""  # the choice that stands for a file of one's own
FIRST: Final = "gap_dipole"  # the demo that is opened if none is named


def demo_campaigns() -> dict[str, Path]:
    """Campaign files of the demo, by their folders; the one to begin with comes first.

    Returns
    -------
    dict of str to Path

    Examples
    --------
    >>> demo_campaigns()["slot"].name
    'campaign.toml'
    """
    root = demo_folder()
    found = {file.parent.relative_to(root).as_posix(): file for file in root.rglob("campaign.toml")}
    names = sorted(found, key=lambda name: (name != FIRST, name))
    return {name: found[name] for name in names}


class CampaignPanel:
    """Choose a campaign.

    Parameters
    ----------
    state : Reduction
        What opens it.

    Attributes
    ----------
    demo : ipywidgets.Dropdown
        Demo campaigns.
    path : ipywidgets.Text
        The campaign file; what stands there is what is open.
    again : ipywidgets.Button
        Reads the file again.
    reset : ipywidgets.Button
        Undoes all that was set by hand.
    widget : ipywidgets.Box
        To show.
    """

    def __init__(self, state: Reduction) -> None:
        import ipywidgets

        self.state = state
        self._following = False
        own = ("a file of your own", OWN)
        choices = [own, *((name, str(file)) for name, file in demo_campaigns().items())]
        self.demo = ipywidgets.Dropdown(
            description="Demo", options=choices, value=OWN, style={"description_width": "46px"}
        )
        self.path = ipywidgets.Text(
            description="Campaign",
            placeholder="path of a campaign.toml, or of its folder",
            continuous_update=False,
            style={"description_width": "70px"},
        )
        self.again = button("Read again", "Open the campaign file again", "fm-again")
        self.reset = button(
            "All as in the file",
            "All passes, references, limits and views as at first; forgets what was kept",
            "fm-reset",
        )
        hooked(self.demo, "fm-demo")
        hooked(self.path, "fm-path")
        self.widget = row((self.demo, self.path, self.again, self.reset), "fm-chooser")
        self.demo.observe(self._on_demo, names="value")
        self.path.observe(self._on_path, names="value")
        self.again.on_click(self._on_again)
        self.reset.on_click(self._on_reset)
        state.listen(self._on_change)

    def _on_demo(self, change: dict[str, Any]) -> None:
        with self.state.lock:
            if change["new"] != OWN and not self._following:
                self.path.value = change["new"]

    def _on_path(self, change: dict[str, Any]) -> None:
        with self.state.lock:
            if change["new"].strip() and not self._following:
                self.state.open(change["new"].strip())

    def _on_again(self, _: Any) -> None:
        if self.path.value.strip():
            self.state.open(self.path.value.strip())

    def _on_reset(self, _: Any) -> None:
        self.state.reset()

    def _on_change(self, topic: Topic) -> None:
        """Follow what was opened by other means."""
        if topic != "campaign":
            return
        self._following = True
        campaign = self.state.campaign
        if campaign is not None:
            self.path.value = str(campaign.path or "")
        known = {value for _, value in self.demo.options}
        self.demo.value = self.path.value if self.path.value in known else OWN
        self._following = False
