"""What would go unseen? Every kind of fault put into the campaign, measured again, and reduced.

The map's own field is measured by the same passes, as in `fieldmap.bench.trials`; each fault is put
into those readings, and what the kit makes of them is held against the truth and against what it
said of the same readings without the fault.
"""

from __future__ import annotations

import zlib
from collections import Counter
from dataclasses import dataclass, replace
from functools import lru_cache
from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.bench.bench_errors import Noise
from fieldmap.bench.fault_outcome import JUDGED, Outcome, Twin, reduced, twin_of
from fieldmap.bench.faults import FAULTS, SEVERITIES, Setting, inject
from fieldmap.bench.faults.ideal import REVEALABLE, Observer
from fieldmap.bench.mapped import MappedField
from fieldmap.bench.replay import replay
from fieldmap.bench.workers import processes, run_all
from fieldmap.errors import FieldmapError, InputError, RefusedError
from fieldmap.estimate.map import map_lines, map_passes
from fieldmap.estimate.stitch import stitch
from fieldmap.magnet.evaluate import evaluate
from fieldmap.progress import Tell, silent

if TYPE_CHECKING:
    from collections.abc import Collection, Sequence

    import xarray as xr

    from fieldmap.bench.fault_outcome import OutcomeName
    from fieldmap.bench.faults import FaultKind
    from fieldmap.readings.passes import Campaign

__all__ = ["FaultTrial", "FaultTrials", "fault_trials"]

SEED: Final = 202


@dataclass(frozen=True)
class FaultTrial:
    """One fault put into the campaign measured again.

    Parameters
    ----------
    kind : str
        Key of the kind of fault.
    severity : int
        1 to 5.
    number : int
        Of the trial.
    outcome : {"harmless", "found", "refused", "off", "silent"}
        See `fieldmap.bench.fault_outcome.Outcome`.
    worst : float
        Largest error of a main result, in its u.
    told : bool
        Whether any test could have shown it: the ideal observer's statistic is large enough. True
        where it was not asked for.
    """

    kind: str
    severity: int
    number: int
    outcome: OutcomeName
    worst: float
    told: bool = True


@dataclass(frozen=True)
class FaultTrials:
    """What became of all faults put into one campaign.

    Parameters
    ----------
    campaign : str
        Its name.
    trials : int
        How often each kind was put in at each severity.
    made : tuple of FaultTrial
        One for each; kinds that the campaign has no place for are not among them.
    lonely : tuple of (float, float)
        Stretches within the limits of the integral that one pass alone covers, m.
    """

    campaign: str
    trials: int
    made: tuple[FaultTrial, ...]
    lonely: tuple[tuple[float, float], ...] = ()

    def count(self, kind: str, severity: int | None = None) -> Counter[str]:
        """Outcomes of a kind, at one severity or at all."""
        return Counter(
            one.outcome
            for one in self.made
            if one.kind == kind and severity in (None, one.severity)
        )

    @property
    def kinds(self) -> tuple[FaultKind, ...]:
        """Kinds that were put in."""
        put = {one.kind for one in self.made}
        return tuple(kind for key, kind in FAULTS.items() if key in put)

    @property
    def unseen(self) -> tuple[FaultKind, ...]:
        """Kinds that made a result wrong beyond 3U with nothing said."""
        silent_ones = {one.kind for one in self.made if one.outcome == "silent"}
        return tuple(kind for kind in self.kinds if kind.key in silent_ones)

    def worst(self, kind: str) -> FaultTrial:
        """The mildest fault of a kind that went unseen.

        Raises
        ------
        KeyError
            None did.
        """
        found = [one for one in self.made if one.kind == kind and one.outcome == "silent"]
        if not found:
            raise KeyError(kind)
        return min(found, key=lambda one: (one.severity, -one.worst))


def fault_trials(
    campaign: Campaign,
    fmap: xr.Dataset,
    *,
    trials: int = 1,
    kinds: Sequence[str] | None = None,
    severities: Sequence[int] = SEVERITIES,
    seed: int = SEED,
    workers: int | None = None,
    tell: Tell = silent,
) -> FaultTrials:
    """Put every kind of fault into a campaign and see what becomes of it.

    Parameters
    ----------
    campaign : Campaign
        What was measured.
    fmap : xarray.Dataset
        From `stitch`, of this campaign.
    trials : int
        How often each kind is put in at each severity.
    kinds : sequence of str, optional
        Keys of `fieldmap.bench.faults.FAULTS`; all of them if not given.
    severities : sequence of int
        Of 1, mildest, to 5, gross.
    seed : int
        Each trial draws from a generator of its own; the number of workers changes nothing.
    workers : int, optional
        Processes, one thread each; all processors if not given.
    tell : callable, optional
        Told in a few words how far it is.

    Returns
    -------
    FaultTrials

    Raises
    ------
    InputError
        No trial, no such kind or severity, or a map of another campaign.
    RefusedError
        A campaign measured again cannot be reduced even without a fault, or a process ended.

    Notes
    -----
    A trial of all kinds at all severities takes some 200 solves. The fault-free campaign of each
    trial is measured and reduced once in each process.

    Examples
    --------
    >>> import fieldmap
    >>> from fieldmap.shipped import demo_folder
    >>> campaign = fieldmap.load(demo_folder() / "foreign_tables")
    >>> fmap = fieldmap.stitch(campaign)
    >>> made = fault_trials(campaign, fmap, kinds=["flux-unit"], severities=[3], workers=1)
    >>> made.count("flux-unit")["silent"]
    0
    """
    if trials < 1:
        raise InputError("argument 'trials'", repr(trials), "1 or more")
    _check("kinds", kinds or (), FAULTS)
    _check("severities", severities, SEVERITIES)
    campaign = replace(campaign, limits=())  # nothing is judged here
    replay(campaign, fmap, np.random.default_rng(seed))  # a wrong map is refused at once
    tasks = [(number, kind) for number in range(trials) for kind in kinds or FAULTS]
    job = _Job(campaign, fmap, seed, tuple(tasks), tuple(severities))
    made: list[FaultTrial] = []
    count = processes(workers, len(tasks))
    for done, trial in enumerate(run_all(job, len(tasks), count, "fault_trials"), 1):
        made += trial
        tell(f"fault {done} of {len(tasks)}: {tasks[done - 1][1]}")
    return FaultTrials(campaign.name, trials, tuple(made), lonely_stretches(campaign))


def _check(argument: str, given: Collection[object], known: Collection[object]) -> None:
    """Refuse what is not known."""
    for one in given:
        if one not in known:
            expected = f"one of {', '.join(map(str, known))}"
            raise InputError(f"argument '{argument}'", repr(one), expected)


def lonely_stretches(campaign: Campaign) -> tuple[tuple[float, float], ...]:
    """Stretches within the limits of the integral that one pass alone covers.

    Parameters
    ----------
    campaign : Campaign
        Measured.

    Returns
    -------
    tuple of (float, float)
        m; on whichever line.
    """
    low, high = campaign.axis.integrate
    found = set()
    for at in dict.fromkeys((one.x, one.y) for one in campaign.passes):
        ends = [
            (one.position.min(), one.position.max())
            for one in campaign.passes
            if (one.x, one.y) == at
        ]
        marks = np.unique(np.clip([low, high, *np.ravel(ends)], low, high))
        for start, stop in zip(marks[:-1].tolist(), marks[1:].tolist(), strict=True):
            middle = (start + stop) / 2
            if sum(a <= middle <= b for a, b in ends) == 1:
                found.add((start, stop))
    return _joined(sorted(found))


def _joined(stretches: Sequence[tuple[float, float]]) -> tuple[tuple[float, float], ...]:
    """Stretches that touch made one."""
    made: list[tuple[float, float]] = []
    for start, stop in stretches:
        if made and start <= made[-1][1]:
            made[-1] = (made[-1][0], max(stop, made[-1][1]))
        else:
            made.append((start, stop))
    return tuple(made)


@dataclass(frozen=True, eq=False)
class _Whole:
    """The campaign measured again without a fault."""

    setting: Setting
    twin: Twin
    fmap: xr.Dataset


@dataclass(frozen=True, eq=False)
class _Job:
    """What every trial starts from."""

    campaign: Campaign
    fmap: xr.Dataset
    seed: int
    tasks: tuple[tuple[int, str], ...]
    severities: tuple[int, ...]

    def run(self, number: int) -> list[FaultTrial]:
        """One kind of fault at all severities."""
        trial, kind = self.tasks[number]
        made = (self._one(trial, kind, severity) for severity in self.severities)
        return [one for one in made if one is not None]

    def _one(self, trial: int, kind: str, severity: int) -> FaultTrial | None:
        whole = _measured_again(self, trial)
        try:
            faulty = inject(whole.setting, kind, severity, self._rng(trial, kind))
        except FieldmapError as error:  # what the reader of tables says
            outcome = Outcome("refused", said=(str(error),))
        else:
            if faulty is None:
                return None
            outcome = reduced(faulty.campaign, whole.twin)
        told = True
        if outcome.name == "silent":
            observer = Observer(whole.setting, whole.fmap)
            told = observer.statistic(kind, severity, self._rng(trial, kind)) >= REVEALABLE
        return FaultTrial(kind, severity, trial, outcome.name, outcome.worst, told)

    def _rng(self, trial: int, kind: str) -> np.random.Generator:
        """The same for all severities: the same pass, instant and sign."""
        return np.random.default_rng([self.seed, trial, zlib.crc32(kind.encode())])


@lru_cache(maxsize=1)
def _measured_again(job: _Job, trial: int) -> _Whole:
    """The campaign of one trial without a fault, reduced."""
    again = replay(job.campaign, job.fmap, np.random.default_rng([job.seed, trial]))
    try:
        fmap = stitch(again.campaign)
        results = evaluate(fmap, again.campaign, fringe=False)
    except FieldmapError as error:
        text = f"measured again, it cannot be reduced even without a fault: {error}"
        raise RefusedError("trials-refused", job.campaign.name, text) from None
    true = evaluate(again.truth, again.campaign, fringe=False)
    truth = {
        (index, key): line.results[key].value
        for index, line in enumerate(true.lines)
        for key in JUDGED
        if key in line.results
    }
    sources = {(line.x, line.y): MappedField(line) for line in map_lines(again.truth)}
    noise = {one["name"]: Noise(one["walk_noise"], one["read_noise"]) for one in map_passes(fmap)}
    setting = Setting(again.campaign, lambda one: sources[one.x, one.y], noise)
    return _Whole(setting, twin_of(results, truth), fmap)
