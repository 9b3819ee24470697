"""What a fault is put into: a measured campaign, the field it measured, its noise."""

from __future__ import annotations

from dataclasses import dataclass, field, fields, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from fieldmap.bench.faults.table import Ints, Table, table_of
from fieldmap.bench.reading import warmed
from fieldmap.bench.response import flux
from fieldmap.readings.passes import FlipReference, Pass

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping, Sequence

    from fieldmap.bench.bench_errors import Noise
    from fieldmap.bench.sources import Source
    from fieldmap.readings.passes import Campaign, Floats
    from fieldmap.readings.probe import Probe

__all__ = ["Faulty", "Setting", "strength"]


def strength(one: Pass, nominal: float | None) -> Floats | float:
    """Reading of a pass over that at nominal current and reference temperature, as claimed."""
    made: Floats | float = 1.0
    if one.current is not None and nominal:
        made = one.current / nominal
    if one.temperature is not None:
        made = made * warmed(one.probe, one.temperature)
    return made


@dataclass(frozen=True, eq=False)
class Setting:
    """A campaign without a fault, and what is known of its truth.

    Parameters
    ----------
    campaign : Campaign
        As measured.
    source_of : callable
        The field along the line of a pass.
    noise : mapping of str to Noise
        Noise of each pass, by its name.
    """

    campaign: Campaign
    source_of: Callable[[Pass], Source]
    noise: Mapping[str, Noise]
    _kept: dict[tuple[int, Probe], Floats] = field(default_factory=dict, repr=False)

    @property
    def gap(self) -> float:
        """Full gap or bore of the magnet, m."""
        return self.campaign.magnet.gap

    def linked(
        self, index: int, probe: Probe | None = None, position: Floats | None = None
    ) -> Floats:
        """Flux through the probe of a pass, or another one, where it was read or elsewhere, V s.

        That of a wire is counted from the low end of the pass, where its circuit closes.
        """
        one = self.campaign.passes[index]
        probe = probe or one.probe
        if position is None:
            key = (index, probe)
            if key not in self._kept:
                self._kept[key] = self.linked(index, probe, one.position)
            return self._kept[key]
        source = self.source_of(one)
        linked = flux(source, probe, position)
        if probe.senses_level:
            linked = linked - flux(source, probe, float(one.position.min()))
        return np.asarray(linked)

    def level(self, index: int) -> float:
        """Largest field on the line of a pass, T."""
        places = np.linspace(*self.campaign.axis.integrate, 101)
        return float(np.abs(self.source_of(self.campaign.passes[index]).field(places)).max())

    def walked(self, index: int, duration: float) -> float:
        """Standard deviation of what the noise adds in some time (s), V s."""
        one = self.campaign.passes[index]
        noise = self.noise[one.name]
        return float(np.hypot(noise.walk * np.sqrt(duration), noise.read))

    def gap_time(self, index: int) -> float:
        """Time in which the probe travels a gap, s."""
        one = self.campaign.passes[index]
        duration = float(one.time[-1] - one.time[0])
        travel = float(np.abs(np.diff(one.position)).sum())
        return min(duration * self.gap / travel if travel else duration, duration)

    def sample_noise(self, index: int) -> float:
        """Standard deviation of one recorded sample, in its own unit."""
        one = self.campaign.passes[index]
        noise = self.noise[one.name]
        step = float(np.median(np.diff(one.time)))
        if one.record == "voltage":
            return float(noise.walk / step**0.5) if step > 0 else noise.walk
        single: float = max(noise.read, one.integrator.resolution, 1e-3 * noise.walk * step**0.5)
        return 2.0**0.5 * single if one.record == "increments" else single

    def instant(self, index: int, rng: np.random.Generator) -> int:
        """A row at random while the probe travels."""
        position = self.campaign.passes[index].position
        low, high = position.min(), position.max()
        edge = 0.1 * (high - low)
        inside = np.flatnonzero((position > low + edge) & (position < high - edge))
        return int(rng.choice(inside)) if inside.size else len(position) // 2

    def pick(self, rng: np.random.Generator) -> int:
        """A pass at random."""
        return int(rng.integers(len(self.campaign.passes)))

    def quiet(self, drifts: Mapping[str, float]) -> Setting:
        """The same without noise: what the stated probes read at the recorded positions.

        Parameters
        ----------
        drifts : mapping of str to float
            Drift rate of each pass, by its name, V s/s; that of the integrator if not given.

        Returns
        -------
        Setting
            A fault put into it with the same chance strikes the same readings.
        """
        passes = []
        for index, one in enumerate(self.campaign.passes):
            drift = drifts.get(one.name, one.integrator.drift)
            linked = self.linked(index) * strength(one, self.campaign.magnet.current)
            read = linked - linked[0] + drift * (one.time - one.time[0])
            facts = {name.name: getattr(one, name.name) for name in fields(Pass)}
            passes.append(Pass(**{**facts, "flux": read}))
        return replace(self, campaign=replace(self.campaign, passes=tuple(passes)), _kept={})

    def whole(self) -> Faulty:
        """Nothing changed yet."""
        return Faulty(self.campaign)


@dataclass(frozen=True, eq=False)
class Faulty:
    """A campaign with a fault.

    Parameters
    ----------
    campaign : Campaign
        What the engineer has in hand.
    where : tuple of str
        The passes, probes or keys that are wrong.
    rows : mapping of str to int array
        Row of the fault-free table that each reading was, by the pass's name; a pass that is
        not named has its rows unchanged.
    structural : bool
        Whether the tables themselves show the fault whatever the readings: rows that repeat, the
        same file twice.
    """

    campaign: Campaign
    where: tuple[str, ...] = ()
    rows: Mapping[str, Ints] = field(default_factory=dict)
    structural: bool = False

    def table(self, index: int) -> Table:
        """The table of a pass, to be changed."""
        return table_of(self.campaign.passes[index])

    def with_table(self, index: int, table: Table, *, structural: bool = False) -> Faulty:
        """The table of a pass put in its place."""
        one = table.as_pass()
        return replace(
            self._with_pass(index, one),
            where=(*self.where, one.name),
            rows={**self.rows, one.name: table.rows},
            structural=self.structural or structural,
        )

    def with_tables(self, change: Callable[[int, Table], Table]) -> Faulty:
        """Every table changed."""
        made = self
        for index in range(len(self.campaign.passes)):
            made = made.with_table(index, change(index, self.table(index)))
        return made

    def with_pass(self, index: int, **changed: Any) -> Faulty:
        """Something else that is said of a pass."""
        one = replace(self.campaign.passes[index], **changed)
        made = self._with_pass(index, one)
        return replace(made, where=(*self.where, self.campaign.passes[index].name))

    def with_probe(self, probe: Probe) -> Faulty:
        """Another description of a probe, wherever it is used."""
        name = probe.name
        passes = tuple(
            replace(one, probe=probe) if one.probe.name == name else one
            for one in self.campaign.passes
        )
        references = tuple(
            replace(ref, probe=probe)
            if isinstance(ref, FlipReference) and ref.probe.name == name
            else ref
            for ref in self.campaign.references
        )
        campaign = replace(self.campaign, passes=passes, references=references)
        return replace(self, campaign=campaign, where=(*self.where, name))

    def with_campaign(self, where: str, *, structural: bool = False, **changed: Any) -> Faulty:
        """Something else that the campaign file says."""
        campaign = replace(self.campaign, **changed)
        shown = self.structural or structural
        return replace(self, campaign=campaign, where=(*self.where, where), structural=shown)

    def _with_pass(self, index: int, one: Pass) -> Faulty:
        passes: Sequence[Pass] = self.campaign.passes
        changed = (*passes[:index], one, *passes[index + 1 :])
        return replace(self, campaign=replace(self.campaign, passes=changed))
