"""The posterior of a fit: what the readings and what was known beforehand say together."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from leachkin.inference import Interval, Posterior, sample_posterior
from leachkin.kinetics.fit_result import FitResult, Parameter
from leachkin.kinetics.fit_values import (
    FAST_RATE,
    natural_values,
    quantity_names,
    with_interval,
)
from leachkin.kinetics.intervals import design_of, fit_problem
from leachkin.kinetics.rate_law import RateLaw

Array = NDArray[np.float64]
Progress = Callable[[int, int], None]


@dataclass(frozen=True)
class FitPosterior:
    """Draws of a fit from its posterior.

    Attributes
    ----------
    fit : FitResult
        Where the walkers started.
    sampled : Posterior
        Acceptance, autocorrelation, length, and the draws on the fitted scales.
    """

    fit: FitResult
    sampled: Posterior

    def said(self) -> str:
        """Return acceptance, autocorrelation and length in one sentence."""
        return self.sampled.said()

    def draw_vectors(self, n: int, seed: int) -> Array:
        """Return n draws of the fitted vector, shape (n, p), seeded."""
        return self.sampled.draw_vectors(n, seed)

    def draw(self, n: int, seed: int) -> RateLaw:
        """Return the law with a batch of n draws of all its parameters together."""
        return self.fit.layout.law(self.draw_vectors(n, seed))

    def parameter(self, name: str, level: float | None = None) -> Parameter:
        """Return a parameter with its interval by quantiles of the draws.

        One that was not fitted itself (held, or not needed) comes back as it stands in the fit.

        Raises
        ------
        InputProblems
            For a name that the fit does not have.
        """
        asked = self.fit.level if level is None else level
        parameter = self.fit.parameter(name)
        at = quantity_names(self.fit.layout).get(name)
        if at is not None:
            return with_interval(parameter, self.sampled.interval(at, asked))
        if name == FAST_RATE and parameter.method != "held":
            return with_interval(parameter, self._fast_rate(parameter, asked))
        return parameter

    def parameters(
        self, names: Sequence[str] | None = None, level: float | None = None
    ) -> tuple[Parameter, ...]:
        """Return parameters with their intervals; all but the heads where no names are given."""
        if names is None:
            names = [p.name for p in self.fit.parameters if not p.name.startswith("head_")]
        return tuple(self.parameter(name, level) for name in names)

    def _fast_rate(self, parameter: Parameter, level: float) -> Interval:
        """Return the interval of a product of two quantities, absent where one of them is open."""
        positions = quantity_names(self.fit.layout)
        for factor in ("k_slow", "ratio"):
            if factor in positions:
                one = self.sampled.interval(positions[factor], level)
                if one.low is None or one.high is None:
                    why = f"{factor}: {one.why_not}"
                    return Interval(parameter.value, None, None, None, level, "none", why)
        values = natural_values(self.fit.layout, self.sampled.draws)[FAST_RATE]
        low, high = np.quantile(values, [0.5 * (1.0 - level), 0.5 * (1.0 + level)])
        error = float(np.std(values, ddof=1))
        return Interval(parameter.value, error, float(low), float(high), level, self.sampled.method)


def posterior_tests(
    fit: FitResult,
    *,
    seed: int,
    most_steps: int = 20000,
    walkers: int | None = None,
    progress: Progress | None = None,
) -> FitPosterior:
    """Return the posterior of a fit, sampled by walkers that start from its covariance.

    Beforehand every value within the bounds of the fit is equally likely on the fitted scale
    (logarithms of times, energies and exponents as they are; ultimate extractions and shares as the
    share itself);
    head assays and ``priors`` of the fit count as they were stated.

    Parameters
    ----------
    fit : FitResult
        Of ``fit_tests``, converged.
    seed : int
    most_steps : int
        Of each walker; fewer where the chain is 50 autocorrelation times long before.
    walkers : int, optional
        Even; twice the quantities and two where left out.
    progress : callable, optional
        Called with (steps done, most steps).

    Returns
    -------
    FitPosterior
        ``.parameters()`` with intervals, ``.draw(n, seed)`` as of a fit, and ``.said()``.

    Raises
    ------
    MissingExtraError
        Without the extra ``posterior``.
    InputProblems
        For a fit that does not carry its design, did not converge, or is exact.
    """
    design = design_of(fit)
    sampled = sample_posterior(
        fit_problem(fit),
        fit.estimate,
        design.squares,
        seed=seed,
        most_steps=most_steps,
        walkers=walkers,
        progress=progress,
    )
    return FitPosterior(fit, sampled)
