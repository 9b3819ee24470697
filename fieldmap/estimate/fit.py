"""The joint estimate of one line: all its passes and references at once."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.condition import weakest_unknown
from fieldmap.estimate.frame import common_frame
from fieldmap.estimate.line_fit import LineFit, PassFit
from fieldmap.estimate.linearised import Linearised
from fieldmap.estimate.model import (
    Information,
    PassModel,
    State,
    pass_information,
    reference_information,
    reference_rows,
)
from fieldmap.estimate.noise import total
from fieldmap.estimate.normal import NormalSystem, Undetermined
from fieldmap.estimate.parameters import GAINS, Nuisance, nuisances
from fieldmap.estimate.smoothing import Smoother
from fieldmap.estimate.solved import Solved
from fieldmap.estimate.variance import Fitted, NoiseLevel, improve_levels, initial_level
from fieldmap.progress import Tell, silent
from fieldmap.readings.passes import FlipReference

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.estimate.noise import Tridiagonal
    from fieldmap.estimate.spline import UniformSpline
    from fieldmap.readings.passes import Pass, Reference
    from fieldmap.readings.probe import Stage

__all__ = ["LineFit", "PassFit", "fit_line"]

Floats = npt.NDArray[np.float64]
Key = tuple[str, str]

# Rounds that relinearise (noise seen through the slope, gains, shifts), by the steps of the local
# smoothness that each takes; START takes the smoothness afresh, one weight for all.
START = -1
STATED = (START, 8, 2, 2, 2)
# The first solve knows no profile, and so no effect of a window on it; a ripple that the coil is
# blind to explains a wrong window until the smoothness has settled.
WINDOWED = (START, START, 8, 8, 8, 2, 2, 2)
OPEN = (START, START, START, START, 8, 2, 2, 2, *[0] * 12)  # noise levels to be found on the way
RESUMED = (1, 1)
SHIFT_WORTH_REBINNING = 0.02  # of a knot
WIDENING_WORTH_REBINNING = 3e-4  # of a window: the square of it is lost in the noise


def fit_line(
    passes: Sequence[Pass],
    references: Sequence[Reference],
    stage: Stage,
    spline: UniformSpline,
    grain: float,
    nominal_current: float | None = None,
    like: LineFit | None = None,
    tell: Tell = silent,
) -> LineFit:
    """Estimate the field along one line.

    Parameters
    ----------
    passes : sequence of Pass
        At least one.
    references : sequence
        Absolute references of this line.
    stage : Stage
        Position uncertainties.
    spline : UniformSpline
        The knots.
    grain : float
        Length over which the field's roughness changes, m: about the gap.
    nominal_current : float, optional
        A; readings that recorded the current are referred to it.
    like : LineFit, optional
        A fit of the same passes on other knots to start from.
    tell : callable, optional
        Told in a few words what is solved next.

    Returns
    -------
    LineFit

    Raises
    ------
    Undetermined
        Something is not determined by readings, references and priors; its `what` names it.
    """
    probes = [one.probe for one in passes]
    probes += [r.probe for r in references if isinstance(r, FlipReference)]
    solver = _Solver(
        passes=passes,
        references=references,
        stage=stage,
        spline=spline,
        unknowns=nuisances(passes, probes, stage),
        grain=grain,
        nominal_current=nominal_current,
    )
    if like is not None:
        solver.resume(like)
    try:
        return solver.run(tell)
    except Undetermined as error:
        error.what = weakest_unknown(error.direction, spline, solver.state.unknowns)
        raise


class _Solver:
    """Rounds of linearise, weigh, solve until nothing moves."""

    def __init__(
        self,
        passes: Sequence[Pass],
        references: Sequence[Reference],
        stage: Stage,
        spline: UniformSpline,
        unknowns: list[Nuisance],
        grain: float,
        nominal_current: float | None,
    ) -> None:
        self.references = references
        self.jitter = stage.u_position
        self.spline = spline
        self.nominal_current = nominal_current
        self.models = [PassModel(one, spline, nominal_current) for one in passes]
        self.frame = common_frame(
            [model.bins for model in self.models], [model.one.name for model in self.models]
        )
        expected = np.array([unknown.mean for unknown in unknowns])
        self.state = State(np.zeros(spline.size), expected, unknowns)
        self.levels = {
            key: initial_level([m for m in self.models if _key(m.one) == key])
            for key in {_key(one): None for one in passes}
        }
        self.first_levels = dict(self.levels)
        self.smoother = Smoother(
            spline.roughness(),
            spline.size + len(unknowns),
            reach=max(1, round(grain / spline.spacing)),
        )
        self.covariance = np.zeros((0, 0))
        stated = not any(level.open for level in self.levels.values())
        self.schedule: tuple[int, ...] = STATED if stated else OPEN
        if stated and any(unknown.kind == "window" for unknown in unknowns):
            self.schedule = WINDOWED

    def resume(self, like: LineFit) -> None:
        """Start from another fit: its field, nuisances, noise levels and smoothness."""
        b, eta = like.coefficients_for(self.spline), like.values[like.spline.size :]
        self.state = State(b, eta, self.state.unknowns)
        self.levels = {_key(one.one): one.level for one in like.passes}
        self.smoother.variance = like.roughness_for(self.spline)
        self.schedule = RESUMED

    def run(self, tell: Tell) -> LineFit:
        """Iterate, then gather the result."""
        enough = len(self.schedule) - self.schedule.count(0)
        for done, adaptations in enumerate(self.schedule):
            tell(f"solving for {self.spline.size} coefficients, round {done + 1}")
            before, levels = self.state.b, dict(self.levels)
            if done > 0:
                self._improve_levels()
            if done == max(enough - 3, 0):
                self._rebin()
            self._solve(adaptations)
            if done >= enough - 1 and self._settled(before, levels):
                break
        moves = self.frame.to_true(self.spline, self.state.b, self.state.unknowns)
        values, covariance = self._at_true_positions(moves)
        return LineFit(
            spline=self.spline,
            unknowns=self.state.unknowns,
            values=values,
            covariance=covariance,
            roughness=self.smoother.variance,
            passes=self._pass_fits(),
            evidence=self.linearised.evidence(
                self.state.unknowns, self.frame, moves, self.smoother
            ),
            solved=Solved(
                self.models,
                self.references,
                self.linearised,
                self.system,
                self.right,
                self.state,
                self.frame,
                self.jitter,
            ),
        )

    def _at_true_positions(self, moves: Floats) -> tuple[Floats, Floats]:
        """Values and covariance with the profile moved from recorded to true positions."""
        size, b, eta = self.spline.size, self.state.b, self.state.eta
        jacobian = np.eye(size + len(eta))
        jacobian[:size, size:] = moves
        values = np.concatenate([b + moves @ eta, eta])
        return values, jacobian @ self.covariance @ jacobian.T

    def _solve(self, adaptations: int) -> None:
        """Linearise at the present state, solve, and adapt the smoothness to the solution."""
        self.linearised = self._linearise()
        data = self._priors() + reference_information(self.linearised.references)
        for rows, noise in zip(self.linearised.passes, self.linearised.noise, strict=True):
            data = data + pass_information(rows, total(noise))
        size = self.spline.size
        if adaptations == START:
            self.smoother.start(data)
        else:
            self.smoother.heed(data)
            self.smoother.see(self._amplitude(), self.state.eta)
        solution = self._solve_weighed(data)
        for _ in range(adaptations):
            self.smoother.adapt(solution, self.covariance)
            solution = self._solve_weighed(data)
        self.state = State(solution[:size], solution[size:], self.state.unknowns)

    def _solve_weighed(self, data: Information) -> Floats:
        """Solution and covariance for the smoothness as it is."""
        self.system = NormalSystem(data.matrix + self.smoother.precision())
        self.covariance = self.system.inverse()
        self.right = data.right + self.smoother.right()
        return self.system.solve(
            self.right,
            lambda values: data.matrix @ values + self.smoother.times(values),
        )

    def _amplitude(self) -> Floats:
        """Change of the profile as recorded with each nuisance: a gain enlarges it.

        Several gains count by their mean; what tells them apart the readings see. The scale of
        the stage is a gain of wires.
        """
        probes = {model.one.probe.name: model.one.probe for model in self.models}
        columns = np.zeros((self.spline.size, len(self.state.eta)))
        share = self.state.b / len(probes)
        for name, probe in probes.items():
            for kind in GAINS:
                if (index := self.state.index(kind, name)) is not None:
                    columns[:, index] += share
            if probe.senses_level and (index := self.state.index("scale")) is not None:
                columns[:, index] += share
            own = [model.one.name for model in self.models if model.one.probe.name == name]
            for one in own:
                if (index := self.state.index("pass factor", one)) is not None:
                    columns[:, index] += share / len(own)
        return columns

    def _linearise(self) -> Linearised:
        """Rows and noise of all readings at the present state and noise levels."""
        return Linearised(
            references=reference_rows(self.references, self.spline, self.state, self.frame),
            passes=[model.rows(self.state, self.frame) for model in self.models],
            noise=[self._noise(model) for model in self.models],
        )

    def _noise(self, model: PassModel) -> dict[str, Tridiagonal]:
        """Covariance of a pass at the present state and noise levels, by its cause."""
        level = self.levels[_key(model.one)]
        return model.noise(self.state, level.walk, level.read, self.jitter)

    def _priors(self) -> Information:
        """What is known of the nuisances before the scan."""
        size, unknowns = self.spline.size, self.state.unknowns
        precision = np.array([unknown.sd**-2 for unknown in unknowns])
        mean = np.array([unknown.mean for unknown in unknowns])
        pad = np.zeros(size)
        return Information(
            np.diag(np.concatenate([pad, precision])),
            np.concatenate([pad, precision * mean]),
        )

    def _improve_levels(self) -> None:
        """Re-estimate the noise levels that the campaign leaves open."""
        for key, level in self.levels.items():
            if level.open:
                fitted = [self._fitted(m) for m in self.models if _key(m.one) == key]
                self.levels[key] = improve_levels(
                    level, self.first_levels[key], fitted, self.covariance
                )

    def _fitted(self, model: PassModel) -> Fitted:
        rows = model.rows(self.state, self.frame)
        values = np.concatenate([self.state.b, self.state.eta])
        noise = total(self._noise(model))
        return Fitted(model, rows, noise, rows.target - rows.design @ values)

    def _rebin(self) -> None:
        """Take the readings where, and the windows as wide as, they are found to be.

        Done where either is more than a linear step away from what was assumed.
        """
        for i, model in enumerate(self.models):
            shift = model.reading_shift(self.state, self.frame)
            widened = self.state.value("window", model.one.probe.name)
            moved = np.abs(shift).max() > SHIFT_WORTH_REBINNING * self.spline.spacing
            if moved or abs(widened - model.widened) > WIDENING_WORTH_REBINNING:
                applied = shift if moved else model.shift
                self.models[i] = PassModel(
                    model.one, self.spline, self.nominal_current, applied, widened
                )

    def _settled(self, before: Floats, levels: dict[Key, NoiseLevel]) -> bool:
        """Whether field and noise levels stand still against their uncertainties."""
        size = self.spline.size
        u = np.sqrt(np.diagonal(self.covariance)[:size])
        moved = float(np.max(np.abs(self.state.b - before) / u))
        quiet = all(level.close_to(levels[key]) for key, level in self.levels.items())
        return quiet and moved < 0.05

    def _pass_fits(self) -> list[PassFit]:
        fits = []
        for model in self.models:
            fitted = self._fitted(model)
            information = pass_information(fitted.rows, fitted.covariance)
            spent = float(np.vdot(information.matrix, self.covariance))
            middle = 0.5 * (model.bins.position[1:] + model.bins.position[:-1])
            fits.append(
                PassFit(
                    one=model.one,
                    position=middle,
                    residual=fitted.covariance.whiten(fitted.residual),
                    freedom=len(fitted.residual) - spent,
                    level=self.levels[_key(model.one)],
                )
            )
        return fits


def _key(one: Pass) -> Key:
    """Passes of one integrator and one kind of record share their noise levels."""
    return one.integrator.name, one.record
