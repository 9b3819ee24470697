"""Follow a folder while the bench writes passes: word of what came, and what is missing."""

from __future__ import annotations

import functools
import logging
import threading
import time
from html import escape
from typing import TYPE_CHECKING, Any, Final

from fieldmap.errors import InputError
from fieldmap.readings.follow import Follower
from fieldmap.show.panels.parts import button, column, hooked, number_field, remembered, row
from fieldmap.show.panels.target import TargetPanel
from fieldmap.show.rows import one_line

if TYPE_CHECKING:
    from collections.abc import Callable

    from fieldmap.readings.follow import News, Offer
    from fieldmap.readings.passes import Campaign
    from fieldmap.show.panels.state import Reduction, Topic

__all__ = ["LivePanel"]

EVERY: Final = 2.0  # s between two looks
SOONEST: Final = 0.2
HINT: Final = (
    '<p role="status" class="fm-told">Are some passes not measured yet? Follow the folder to open '
    "the campaign with those that are there.</p>"
)
LOG: Final = logging.getLogger("fieldmap")


class LivePanel:
    """Switch following on and off, take in files that the campaign does not name, set a target.

    Parameters
    ----------
    state : Reduction
        What takes the passes.
    clock : callable
        A clock that never goes back, s.

    Attributes
    ----------
    on : ipywidgets.Checkbox
        Whether the folder is followed.
    every : ipywidgets.FloatText
        Seconds between two looks.
    told : ipywidgets.HTML
        What is awaited and why.
    offers : ipywidgets.VBox
        One row for each table that the campaign does not name: its probe, and a button to use it.
    target : TargetPanel
        Whether the uncertainty that is needed is reached.
    widget : ipywidgets.VBox
        To show.
    """

    def __init__(self, state: Reduction, clock: Callable[[], float] = time.monotonic) -> None:
        import ipywidgets

        self.state, self._clock = state, clock
        self._follower: Follower | None = None
        self._off = threading.Event()
        self._looking = threading.Lock()
        self._adopted: dict[str, str] = {}
        self._offered: tuple[Offer, ...] = ()
        self.on = hooked(
            ipywidgets.Checkbox(description="Follow the folder", indent=False), "fm-follow"
        )
        self.every = number_field("every", "fm-every")
        self.every.value, self.every.style.description_width = EVERY, "40px"
        seconds = hooked(ipywidgets.HTML("s"), "fm-unit")
        self.told = hooked(ipywidgets.HTML(), "fm-live-told")
        self.offers = hooked(ipywidgets.VBox(), "fm-offers")
        self.target = TargetPanel(state)
        switch = row((self.on, self.every, seconds), "fm-range")
        self.widget = column((switch, self.told, self.offers, self.target.widget), "fm-live")
        state.remember("adopted", lambda: self._adopted, self._put_adopted)
        remembered(state, "every", self.every)
        remembered(state, "live", self.on)
        self.on.observe(self._on_switch, names="value")
        state.listen(self._on_change)

    def look(self) -> None:
        """Look at the folder once; done again and again while it is followed."""
        follower = self._follower
        if follower is None:
            return
        with self._looking:  # one look at a time; files are read without the state's lock
            try:
                news = follower.look()
            except Exception as error:  # the thread goes on, and says so
                LOG.exception("following failed")
                kind = type(error).__name__
                self.told.value = _alert(f"following: found a failure of the kit's own ({kind}).")
                return
        with self.state.lock:
            if follower is self._follower:
                self._take(news)

    def close(self) -> None:
        """Stop following."""
        with self.state.lock:
            self._off.set()
            self._follower = None

    def _take(self, news: News) -> None:
        self.told.value = _told(news, self.state.campaign)
        if news.offers != self._offered:
            self._offer(news.offers, news.probes)
        if news.campaign is not None and not _same(news.campaign, self.state.campaign):
            self.state.renew(news.campaign, news.added)
            self.told.value = _told(news, self.state.campaign)

    def _on_switch(self, change: dict[str, Any]) -> None:
        with self.state.lock:
            self.close()
            self.told.value = ""
            self._offer(())
            if change["new"]:
                self._start()

    def _start(self) -> None:
        if self.state.source is None:
            self.told.value = _alert("Open a campaign file first: there is no folder to follow.")
            return
        self._follower = Follower(self.state.source, clock=self._clock)
        for name, probe in self._adopted.items():
            self._follower.adopt(name, probe)
        self._off = threading.Event()
        self.told.value = '<p role="status" class="fm-told">Following the folder.</p>'
        rounds = functools.partial(self._rounds, self._off)
        threading.Thread(target=rounds, name="fieldmap-follow", daemon=True).start()

    def _rounds(self, off: threading.Event) -> None:
        while not off.is_set():
            self.look()
            off.wait(max(self.every.value, SOONEST))

    def _on_change(self, topic: Topic) -> None:
        """Follow the folder of the campaign that is open."""
        source = self.state.source
        if topic != "campaign":
            return
        if self._follower is None:
            there = source is not None and source.is_file()
            self.told.value = HINT if there and self.state.campaign is None else ""
            return
        if self._follower.path == source:
            self._follower.again()  # it was opened by other means
            return
        self.close()
        self._adopted = {}
        self._offer(())
        if source is not None:
            self._start()

    def _offer(self, offers: tuple[Offer, ...], probes: tuple[str, ...] = ()) -> None:
        import ipywidgets

        old = self.offers.children
        self._offered = offers
        rows = []
        for offer in self._offered:
            probe = ipywidgets.Dropdown(
                description=one_line(offer.name),
                options=probes,
                style={"description_width": "auto"},
            )
            use = button("Use", f"Take {one_line(offer.name)} in as a pass", "fm-use")
            use.on_click(functools.partial(self._on_use, offer, probe))
            rows.append(row((hooked(probe, "fm-offer"), use)))
        self.offers.children = tuple(rows)
        for line in old:
            for part in (*line.children, line):
                part.close()

    def _on_use(self, offer: Offer, probe: Any, _: Any) -> None:
        with self.state.lock:
            if self._follower is not None and probe.value is not None:
                self._follower.adopt(offer.name, probe.value, offer.record)
                self._adopted = self._follower.adopted
                self.state.keep()
        self.look()

    def _put_adopted(self, value: Any) -> None:
        texts = isinstance(value, dict) and all(isinstance(one, str) for one in value.values())
        if not texts:
            raise InputError("files taken in", repr(value)[:60], "names of files with their probes")
        self._adopted = dict(value)


def _same(one: Campaign, other: Campaign | None) -> bool:
    """Whether a campaign says and holds the same as another."""
    return other is not None and _facts(one) == _facts(other)


def _facts(campaign: Campaign) -> tuple[str, list[tuple[str, str, str]]]:
    passes = [(one.name, one.sha256, one.probe.name) for one in campaign.passes]
    return campaign.sha256, passes


def _told(news: News, campaign: Campaign | None) -> str:
    """What a look at the folder gave, in words."""
    if news.error:
        return _alert(news.error)
    count = len(campaign.passes) if campaign else 0
    head = f"Following the folder: {count} passes are there"
    head += f", {len(news.waiting)} awaited." if news.waiting else "."
    items = "".join(
        f"<li>{escape(one_line(f'{one.name}: {one.why}.'))}</li>" for one in news.waiting
    )
    more = f'<ul class="fm-awaited">{items}</ul>' if items else ""
    return f'<p role="status" class="fm-told">{escape(head)}</p>{more}'


def _alert(words: str) -> str:
    return f'<p role="alert" class="fm-told fm-warn">{escape(one_line(words))}</p>'
