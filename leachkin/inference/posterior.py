"""The posterior of a least-squares problem, sampled by an ensemble of walkers.

Flat within the bounds on the fitted scales, for shares flat in the share itself; what is known
beforehand enters as rows of the problem.
Walkers step along the differences of others and stretch towards them, so that no step size is
tuned [terbraak2006, goodman2010]. Needs the extra ``posterior``.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from leachkin.errors import MissingExtraError
from leachkin.inference.distributions import check_level, normal_multiplier
from leachkin.inference.draws import draw_vectors
from leachkin.inference.estimate import Estimate, Interval
from leachkin.inference.least_squares import LeastSquaresProblem
from leachkin.inference.scales import Scale, to_natural
from leachkin.problems import argument_error

Array = NDArray[np.float64]
Squares = Callable[[Array], Array]
Progress = Callable[[int, int], None]

#: A chain shorter than this many autocorrelation times is not long enough to be trusted.
TIMES_NEEDED = 50.0
#: Share of all steps that is thrown away, and steps that are walked before the chain is looked at.
BURN_SHARE = 0.2
BLOCK_STEPS = 500
#: Every so many steps are kept: neighbours tell nearly the same.
KEEP_EVERY = 5
#: Share of the moves along the difference of two walkers; the others stretch towards a third.
DIFFERENCE_SHARE = 0.8
#: Walkers at least where none are asked for; else twice the quantities and two.
FEWEST_WALKERS = 32
#: Width of the strip in which a density is counted, in ranges of the middle 68 %.
STRIP = 0.1
#: Where a start lies along a quantity of which the covariance says nothing: share of its range.
BLIND_SHARE = 0.02
OPEN_END = "the data allow it as far as the end of its range"
WHOLE_RANGE = "the data allow its whole range"
INSTALL = "python -m pip install 'leachkin[posterior]'"


@dataclass(frozen=True)
class Posterior:
    """Draws of a posterior, and how well they were mixed.

    Attributes
    ----------
    names : tuple of str
    scales : tuple of "linear", "log", "logit"
    low, high : ndarray, shape (p,)
        Bounds on the fitted scales, within which all values were equally likely beforehand: on
        that scale, and of a log-odds on the scale of the share.
    best : ndarray, shape (p,)
        The least-squares estimate.
    draws : ndarray, shape (n, p)
        On the fitted scales, burn-in left out and thinned.
    acceptance : float
        Share of the proposed steps that were taken.
    autocorrelation : ndarray, shape (p,)
        Integrated autocorrelation time of each quantity, in steps.
    walkers, steps, burn_in : int
        Steps of each walker after the burn-in, and those before.
    """

    names: tuple[str, ...]
    scales: tuple[Scale, ...]
    low: Array
    high: Array
    best: Array
    draws: Array
    acceptance: float
    autocorrelation: Array
    walkers: int
    steps: int
    burn_in: int

    @property
    def longest_autocorrelation(self) -> float:
        """The largest autocorrelation time of all quantities, in steps."""
        return float(np.max(self.autocorrelation))

    @property
    def times_walked(self) -> float:
        """Length of the chain in its longest autocorrelation times."""
        return self.steps / self.longest_autocorrelation

    @property
    def long_enough(self) -> bool:
        """Whether the chain is 50 autocorrelation times long."""
        return self.times_walked >= TIMES_NEEDED

    @property
    def independent_draws(self) -> float:
        """How many independent draws the chain is worth, by its slowest quantity."""
        return self.walkers * self.times_walked

    def said(self) -> str:
        """Return acceptance, autocorrelation and length in one sentence."""
        length = f"{self.times_walked:.3g} autocorrelation times"
        if not self.long_enough:
            length += f": not long enough, {TIMES_NEEDED:g} are needed"
        return (
            f"{self.walkers} walkers, {self.steps} steps after {self.burn_in}, acceptance "
            f"{self.acceptance:.2f}, integrated autocorrelation time up to "
            f"{self.longest_autocorrelation:.3g} steps, {length}"
        )

    def draw_vectors(self, n: int, seed: int) -> Array:
        """Return n draws of the fitted vector, shape (n, p), seeded; none twice while they last.

        Raises
        ------
        InputProblems
            For fewer than one.
        """
        if n < 1:
            raise argument_error("n", str(n), "1 draw or more")
        count = self.draws.shape[0]
        generator = np.random.default_rng(seed)
        picked = [generator.permutation(count) for _ in range(-(-n // count))]
        return np.asarray(self.draws[np.concatenate(picked)[:n]])

    def interval(self, j: int, level: float = 0.95) -> Interval:
        """Return the interval of quantity j by quantiles of the draws, on its natural scale.

        A side on which the density has not fallen by what the level allows at the bound is open:
        the end is then None, and the other one is one-sided at the level.

        Raises
        ------
        InputProblems
            For a position that does not exist, or a level outside 0 to 1.
        """
        if not 0 <= j < len(self.names):
            raise argument_error("j", str(j), f"0 to {len(self.names) - 1}")
        column = self.draws[:, j]
        value = float(to_natural(self.scales[j], self.best[j]))
        bounds = _flat(self.scales[j], np.array([self.low[j], self.high[j]]))
        open_low, open_high = open_ends(
            _flat(self.scales[j], column), float(bounds[0]), float(bounds[1]), level
        )
        if open_low and open_high:
            return Interval(value, None, None, None, level, "none", WHOLE_RANGE)
        one_sided = open_low or open_high
        tail = (1.0 - level) if one_sided else 0.5 * (1.0 - level)
        ends = to_natural(self.scales[j], np.quantile(column, [tail, 1.0 - tail]))
        spread = float(np.std(to_natural(self.scales[j], column), ddof=1))
        return Interval(
            value,
            None if one_sided else spread,
            None if open_low else float(ends[0]),
            None if open_high else float(ends[1]),
            level,
            f"one-sided, {self.method}" if one_sided else self.method,
            OPEN_END if one_sided else "",
        )

    @property
    def method(self) -> str:
        """How intervals are made, and whether the chain was long enough for them."""
        return "posterior" if self.long_enough else "posterior, chain not long enough"


def _flat(scale: Scale, fitted: Array) -> Array:
    """Return values on the scale on which all were equally likely beforehand."""
    return to_natural(scale, fitted) if scale == "logit" else fitted


def open_ends(column: Array, low: float, high: float, level: float = 0.95) -> tuple[bool, bool]:
    """Return whether draws of a quantity leave it open at its low and at its high bound.

    A side is open where the density at the bound is above ``exp(-z^2/2)`` of the highest, z the
    normal multiplier of the level: as far as a likelihood may fall within the interval.

    Parameters
    ----------
    column : ndarray, shape (n,)
    low, high : float
        Bounds; an infinite one is never reached.
    level : float

    Returns
    -------
    tuple of bool
    """
    least = float(np.exp(-0.5 * normal_multiplier(check_level(level)) ** 2))
    inner = np.quantile(column, [0.16, 0.84])
    width = STRIP * float(inner[1] - inner[0])
    if not width > 0.0:
        return False, False
    ordered = np.sort(column)
    highest = int(_count_within(ordered, ordered, width).max())
    edges = np.array([low, high - width])
    at = np.where(np.isfinite(edges), _count_within(ordered, edges, width), 0)
    return bool(at[0] > least * highest), bool(at[1] > least * highest)


def _count_within(ordered: Array, start: Array, width: float) -> NDArray[np.intp]:
    """Return how many ordered values lie within strips of a width from their starts."""
    after = np.searchsorted(ordered, start + width, side="right")
    return np.asarray(after - np.searchsorted(ordered, start, side="left"))


def sample_posterior(
    problem: LeastSquaresProblem,
    estimate: Estimate,
    squares: Squares | None = None,
    *,
    seed: int,
    most_steps: int = 20000,
    walkers: int | None = None,
    progress: Progress | None = None,
) -> Posterior:
    """Return the posterior of a least-squares problem about its estimate.

    The chain is walked until it is 50 of its longest autocorrelation times, or the most steps.

    Parameters
    ----------
    problem : LeastSquaresProblem
        Its bounds are finite: beyond them nothing is possible, within them all is equally likely.
    estimate : Estimate
        Converged. Walkers start from its covariance.
    squares : callable, optional
        Vectors (n, p) -> sums of squares (n,); left out, the problem is asked one by one.
    seed : int
    most_steps : int
        Of each walker, burn-in included.
    walkers : int, optional
        Even, twice the quantities and two or more; that many, or 32, where left out.
    progress : callable, optional
        Called with (steps done, most steps).

    Returns
    -------
    Posterior

    Raises
    ------
    MissingExtraError
        Without the package that walks.
    InputProblems
        For a fit that did not converge or is exact, a bound that is not finite, too few walkers
        or steps.

    Notes
    -----
    With stated precision the density is ``exp(-S/2)``. Where the scatter was estimated (none
    stated, or larger than stated) it is integrated over with 1/sigma: ``S^(-n/2)``, n rows, which
    is Student's t for a linear model, with the degrees of freedom of the linearised interval
    [gelman2013]. Flat log-odds would put nearly all weight next to 0 and 1, so that shares are
    flat as they are.
    """
    emcee = _emcee()
    count = _checked(problem, estimate, walkers, most_steps)
    density = _Density(problem, estimate, squares or _one_by_one(problem))
    sampler = emcee.EnsembleSampler(
        count,
        len(problem.names),
        density,
        moves=[
            (emcee.moves.DEMove(), DIFFERENCE_SHARE),
            (emcee.moves.StretchMove(), 1.0 - DIFFERENCE_SHARE),
        ],
        vectorize=True,
    )
    sampler.random_state = np.random.RandomState(seed % 2**32).get_state()
    state = _starts(problem, estimate, density, count, seed)
    stored = most_steps // KEEP_EVERY
    while sampler.iteration < stored:
        block = min(BLOCK_STEPS // KEEP_EVERY, stored - sampler.iteration)
        state = sampler.run_mcmc(state, block, thin_by=KEEP_EVERY, skip_initial_state_check=True)
        if progress is not None:
            progress(sampler.iteration * KEEP_EVERY, most_steps)
        found = _posterior(problem, estimate, sampler, count)
        if found.long_enough:
            break
    return found


def _emcee() -> Any:
    try:
        import emcee
    except ImportError as error:
        raise MissingExtraError(
            f"a posterior needs the package emcee, which is not installed. Try: {INSTALL}"
        ) from error
    return emcee


def _checked(
    problem: LeastSquaresProblem, estimate: Estimate, walkers: int | None, most_steps: int
) -> int:
    """Return the number of walkers, or stop at what has no posterior."""
    p = len(problem.names)
    if not estimate.converged:
        raise argument_error("estimate", "a fit that did not converge", "a fit that did")
    if not p:
        raise argument_error("problem", "no quantity to sample", "one or more")
    if not estimate.scatter_variance > 0.0 or estimate.degrees_of_freedom < 1:
        raise argument_error("estimate", "no scatter to judge by", "more readings than quantities")
    if not (np.isfinite(problem.low).all() and np.isfinite(problem.high).all()):
        raise argument_error("problem", "a bound that is not finite", "finite bounds")
    if most_steps < BLOCK_STEPS:
        raise argument_error("most_steps", str(most_steps), f"{BLOCK_STEPS} or more")
    least = 2 * p + 2
    if walkers is None:
        return max(least, FEWEST_WALKERS)
    if walkers < least or walkers % 2:
        raise argument_error("walkers", str(walkers), f"an even number, {least} or more")
    return walkers


def _one_by_one(problem: LeastSquaresProblem) -> Squares:
    def squares(vectors: Array) -> Array:
        residuals = (problem.residuals_and_jacobian(vector)[0] for vector in vectors)
        return np.array([float(r @ r) for r in residuals])

    return squares


@dataclass(frozen=True)
class _Density:
    """Log density of vectors (n, p) up to a constant, shape (n,)."""

    problem: LeastSquaresProblem
    estimate: Estimate
    squares: Squares

    def __call__(self, vectors: Array) -> Array:
        found = np.full(vectors.shape[0], -np.inf)
        inside = (vectors >= self.problem.low).all(axis=1) & (vectors <= self.problem.high).all(
            axis=1
        )
        if inside.any():
            with np.errstate(over="ignore", invalid="ignore", divide="ignore", under="ignore"):
                found[inside] = self._of_squares(self.squares(vectors[inside]))
                found[inside] += self._of_shares(vectors[inside])
        found[~np.isfinite(found)] = -np.inf
        return found

    def _of_squares(self, squares: Array) -> Array:
        if self.estimate.student_degrees is None:
            return -0.5 * squares
        rows = self.estimate.residuals.size
        return np.asarray(-0.5 * rows * np.log(squares / self.estimate.sum_of_squares))

    def _of_shares(self, vectors: Array) -> Array:
        """Return what makes shares, and not their log-odds, equally likely: ln(u (1 - u))."""
        shares = [j for j, scale in enumerate(self.problem.scales) if scale == "logit"]
        odds = np.abs(vectors[:, shares])
        return np.asarray(-np.sum(odds + 2.0 * np.log1p(np.exp(-odds)), axis=1))


def _starts(
    problem: LeastSquaresProblem, estimate: Estimate, density: _Density, count: int, seed: int
) -> Array:
    """Return where the walkers start: from the covariance, within the bounds."""
    generator = np.random.default_rng(seed)
    spread = _alone(problem, estimate)
    vectors = draw_vectors(estimate.vector, estimate.covariance, count, seed)
    held = np.diag(estimate.covariance) > 0.0
    jitter = generator.standard_normal(vectors.shape) * np.where(held, 0.1, 1.0) * spread
    starts = _folded(vectors + jitter, problem.low, problem.high)
    for _ in range(30):
        outside = ~np.isfinite(density(starts))
        if not outside.any():
            return starts
        starts[outside] = 0.5 * (starts[outside] + estimate.vector)
    starts[outside] = starts[~outside][
        generator.integers(int((~outside).sum()), size=outside.sum())
    ]
    return starts


def _alone(problem: LeastSquaresProblem, estimate: Estimate) -> Array:
    """Return how far each quantity may move with the others held, at most a share of its range."""
    norms = np.linalg.norm(estimate.jacobian, axis=0)
    most = BLIND_SHARE * (problem.high - problem.low)
    root = np.sqrt(estimate.scatter_variance)
    return np.asarray(np.minimum(root / np.maximum(norms, root / most), most))


def _folded(vectors: Array, low: Array, high: Array) -> Array:
    """Return vectors with what lies beyond a bound mirrored back inside."""
    width = high - low
    turned = np.mod(vectors - low, 2.0 * width)
    return np.asarray(low + np.where(turned > width, 2.0 * width - turned, turned))


def _posterior(
    problem: LeastSquaresProblem, estimate: Estimate, sampler: Any, walkers: int
) -> Posterior:
    """Return what the chain gives so far."""
    stored = sampler.iteration
    burn = int(np.ceil(BURN_SHARE * stored))
    chain = sampler.get_chain(discard=burn)
    times = KEEP_EVERY * autocorrelation_times(chain)
    apart = max(1, int(0.5 * times.max() / KEEP_EVERY))
    return Posterior(
        names=problem.names,
        scales=problem.scales,
        low=problem.low,
        high=problem.high,
        best=estimate.vector,
        draws=chain[::apart].reshape(-1, chain.shape[-1]),
        acceptance=float(np.mean(sampler.acceptance_fraction)),
        autocorrelation=times,
        walkers=walkers,
        steps=chain.shape[0] * KEEP_EVERY,
        burn_in=burn * KEEP_EVERY,
    )


def autocorrelation_times(chain: Array) -> Array:
    """Return the integrated autocorrelation time of each quantity of a chain, in its steps.

    The sum of the autocorrelation, averaged over walkers, up to the first window of five times
    itself [sokal1997]; at least 1.

    Parameters
    ----------
    chain : ndarray, shape (steps, walkers, p)

    Returns
    -------
    ndarray, shape (p,)
    """
    steps = chain.shape[0]
    centred = chain - chain.mean(axis=0)
    length = 2 ** int(np.ceil(np.log2(2 * steps)))
    power = np.abs(np.fft.rfft(centred, length, axis=0)) ** 2
    summed = np.fft.irfft(power, length, axis=0)[:steps].sum(axis=1)
    still = summed[0] <= 0.0
    summed[:, still] = 0.0
    summed[0, still] = 1.0
    times = 2.0 * np.cumsum(summed / summed[0], axis=0) - 1.0
    enough = np.arange(steps)[:, None] >= 5.0 * times
    window = np.where(enough.any(axis=0), np.argmax(enough, axis=0), steps - 1)
    return np.asarray(np.maximum(times[window, np.arange(times.shape[1])], 1.0))
