"""Is the stated uncertainty good enough? The whole chain over again, many times.

Sources: JCGM 101:2008, propagation of distributions by trials, and clause 8, its use to confirm the
linear propagation; the bounds are those of the chi-square and the t distribution, since the
trials of a whole chain are few.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from fieldmap.bench.confirmation import Confirmation, confirmed
from fieldmap.bench.replay import replay
from fieldmap.bench.workers import processes, run_all
from fieldmap.errors import FieldmapError, InputError, RefusedError
from fieldmap.estimate.stitch import stitch
from fieldmap.magnet.evaluate import evaluate
from fieldmap.progress import Tell, silent

if TYPE_CHECKING:
    import xarray as xr

    from fieldmap.magnet.results import Results
    from fieldmap.readings.passes import Campaign

__all__ = ["confirm"]

Floats = npt.NDArray[np.float64]
Key = tuple[int, str]

SEED: Final = 101
FEWEST: Final = 5


@dataclass(frozen=True)
class _Trial:
    """What one trial came to: errors of the results by line and key, or why there are none."""

    errors: dict[Key, float]
    refusal: str = ""


@dataclass(frozen=True, eq=False)
class _Job:
    """What every trial starts from."""

    campaign: Campaign
    fmap: xr.Dataset
    spacing: float
    seed: int
    values: dict[Key, float]

    def run(self, number: int) -> _Trial:
        """Replay, reduce and compare."""
        rng = np.random.default_rng([self.seed, number])
        try:
            again = replay(self.campaign, self.fmap, rng)
            fmap = stitch(again.campaign, knot_spacing=self.spacing)
            found = _values(evaluate(fmap, self.campaign, fringe=False))
            true = self.values
            if again.truth is not self.fmap:
                true = _values(evaluate(again.truth, self.campaign, fringe=False))
        except FieldmapError as error:
            return _Trial({}, str(error))
        return _Trial({key: found[key] - true[key] for key in found if key in true})


def confirm(
    campaign: Campaign,
    fmap: xr.Dataset,
    results: Results | None = None,
    *,
    trials: int = 100,
    seed: int = SEED,
    workers: int | None = None,
    tell: Tell = silent,
) -> Confirmation:
    """Check the linear uncertainties by trials of the whole chain: bench, stitch, evaluate.

    Parameters
    ----------
    campaign : Campaign
        What was measured.
    fmap : xarray.Dataset
        From `stitch`, of this campaign.
    results : Results, optional
        What is to be confirmed; evaluated from the map if not given.
    trials : int
        How often the campaign is measured again.
    seed : int
        Each trial draws from a generator of its own; the number of workers changes nothing.
    workers : int, optional
        Processes, one thread each; all processors if not given.
    tell : callable, optional
        Told in a few words how far it is.

    Returns
    -------
    Confirmation
        For each result the linear value and u beside mean and spread of the trials, and whether
        the linear figure holds.

    Raises
    ------
    InputError
        Too few trials, or a map of another campaign.
    RefusedError
        Fewer than five trials could be reduced, or a worker process ended.

    Notes
    -----
    A hundred trials tell a ratio of spreads to a quarter (at 99.9 %); JCGM 101:2008, 7.2.3,
    allows for few trials where the model is as expensive as here. The field measured again is
    the map's own, so what no reading showed of the true one is in no trial either.

    Examples
    --------
    >>> import fieldmap
    >>> from fieldmap.shipped import demo_folder
    >>> campaign = fieldmap.load(demo_folder() / "foreign_tables")
    >>> found = confirm(campaign, fieldmap.stitch(campaign), trials=5, workers=1)
    >>> found["integrated_field"].trials
    5
    """
    if trials < FEWEST:
        raise InputError("argument 'trials'", repr(trials), f"{FEWEST} or more")
    workers = processes(workers, trials)
    campaign = replace(campaign, limits=())  # nothing is judged here
    own = evaluate(fmap, campaign, fringe=False)
    job = _Job(campaign, fmap, _spacing(fmap), seed, _values(own))
    replay(campaign, fmap, np.random.default_rng(seed))  # a wrong map is refused, not counted
    made: list[_Trial] = []
    for trial in run_all(job, trials, workers, "confirm"):
        made.append(trial)
        tell(f"trial {len(made)} of {trials}")
    done = [trial.errors for trial in made if not trial.refusal]
    refusals = tuple(trial.refusal for trial in made if trial.refusal)
    if len(done) < FEWEST:
        text = f"{len(refusals)} of {trials} trials were refused, the first with: {refusals[0]}"
        raise RefusedError("trials-refused", campaign.name, text)
    stated = own if results is None else results
    return Confirmation(
        campaign=campaign.name,
        trials=trials,
        refusals=refusals,
        results=tuple(
            confirmed(key, index, quantity, np.array([one[index, key] for one in given]))
            for index, line in enumerate(stated.lines)
            for key, quantity in line.results.items()
            if len(given := [one for one in done if (index, key) in one]) >= FEWEST
        ),
    )


def _spacing(fmap: xr.Dataset) -> float:
    """Knot spacing of the map, m; the finest where lines differ."""
    return float(np.nanmin(fmap["knots"].values[..., 1]))


def _values(results: Results) -> dict[Key, float]:
    return {
        (index, key): quantity.value
        for index, line in enumerate(results.lines)
        for key, quantity in line.results.items()
    }
