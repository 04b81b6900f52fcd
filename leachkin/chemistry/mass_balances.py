"""Equilibrium of any number of species by guarded Newton steps on the mass balances, in batches.

With ``x`` the logarithms of the free components, the species are ``c = exp(ln K + A x)`` and the
balances are the gradient of ``sum(c) - T x``, which is convex: a Newton step with a line search
falls to the one minimum from any start.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]

#: Largest move of a logarithm in a step.
LARGEST_STEP = 4.0
#: Logarithms of concentrations are kept below this on the way.
LARGEST_LOG = 30.0
#: Balances are closed to this share of what passes through them.
BALANCE_TOLERANCE = 1e-12
MOST_STEPS = 300
#: Share of the promised fall that a step has to reach.
ENOUGH_FALL = 1e-4
HALVINGS = 40


@dataclass(frozen=True)
class Balanced:
    """Free components and species that close the balances.

    Attributes
    ----------
    ln_components : ndarray, shape B + (c,)
    species : ndarray, shape B + (s,)
        Concentrations.
    imbalance : ndarray, shape B
        Largest balance error over what passes through that balance.
    converged : ndarray of bool, shape B
    steps : int
    """

    ln_components: Array
    species: Array
    imbalance: Array
    converged: NDArray[np.bool_]
    steps: int


def solve_mass_balances(
    ln_constants: ArrayLike,
    stoichiometry: ArrayLike,
    totals: ArrayLike,
    start: ArrayLike | None = None,
) -> Balanced:
    """Return the species that close every mass balance.

    Parameters
    ----------
    ln_constants : array_like, shape B + (s,)
        Logarithms of the formation constants, on concentrations.
    stoichiometry : array_like, shape (s, c)
        Components in each species; every component is a species of its own too.
    totals : array_like, shape B + (c,)
        Total of each component, above 0 where no species holds a negative number of it.
    start : array_like, shape B + (c,), optional
        Logarithms of the free components to start from.

    Returns
    -------
    Balanced

    Examples
    --------
    A weak acid, K 1e5, half of it with a mole of each in all:

    >>> found = solve_mass_balances(
    ...     [0.0, 0.0, np.log(1e5)], [[1, 0], [0, 1], [1, 1]], [1e-5, 1e-5]
    ... )
    >>> found.species.round(8).tolist()
    [6.18e-06, 6.18e-06, 3.82e-06]
    """
    A = np.asarray(stoichiometry, dtype=np.float64)
    ln_K = np.asarray(ln_constants, dtype=np.float64)
    T = np.asarray(totals, dtype=np.float64)
    shape = np.broadcast_shapes(ln_K.shape[:-1], T.shape[:-1])
    flat_K = np.broadcast_to(ln_K, (*shape, A.shape[0])).reshape(-1, A.shape[0])
    flat_T = np.broadcast_to(T, (*shape, A.shape[1])).reshape(-1, A.shape[1])
    x = np.log(np.maximum(flat_T, 1e-30)) if start is None else np.array(start, dtype=np.float64)
    x = np.broadcast_to(x, flat_T.shape if start is None else (*shape, A.shape[1]))
    x = _lowered(flat_K, A, flat_T, x.reshape(flat_T.shape).copy(), start is None)
    x, steps = _newton(flat_K, A, flat_T, x)
    c = _species(flat_K, A, x)
    error = _imbalance(c, A, flat_T)
    return Balanced(
        x.reshape(*shape, A.shape[1]),
        c.reshape(*shape, A.shape[0]),
        error.reshape(shape),
        (error <= 1e3 * BALANCE_TOLERANCE).reshape(shape),
        steps,
    )


def _species(ln_K: Array, A: Array, x: Array) -> Array:
    return np.asarray(np.exp(np.minimum(ln_K + x @ A.T, LARGEST_LOG)))


def _imbalance(c: Array, A: Array, T: Array) -> Array:
    through = c @ np.abs(A) + np.abs(T)
    return np.asarray((np.abs(c @ A - T) / np.maximum(through, 1e-300)).max(axis=-1))


def _lowered(ln_K: Array, A: Array, T: Array, x: Array, cold: bool) -> Array:
    """Bring a cold start down until no species alone holds more than the totals allow."""
    if not cold:
        return x
    for _ in range(40):
        c = _species(ln_K, A, x)
        held = c @ np.maximum(A, 0.0)
        allowed = T + c @ np.maximum(-A, 0.0)
        excess = np.log(np.maximum(held, 1e-300) / np.maximum(allowed, 1e-300))
        if not np.any(excess > 1.0):
            break
        x = x - np.where(excess > 1.0, 0.5 * excess, 0.0)
    return x


def _newton(ln_K: Array, A: Array, T: Array, x: Array) -> tuple[Array, int]:
    active = np.arange(x.shape[0])
    for step in range(MOST_STEPS):
        c = _species(ln_K[active], A, x[active])
        open_ = _imbalance(c, A, T[active]) > BALANCE_TOLERANCE
        active, c = active[open_], c[open_]
        if active.size == 0:
            return x, step
        gradient = c @ A - T[active]
        x[active], moved = _step(ln_K[active], A, T[active], x[active], c, gradient)
        active = active[moved]
    return x, MOST_STEPS


def _step(
    ln_K: Array, A: Array, T: Array, x: Array, c: Array, gradient: Array
) -> tuple[Array, NDArray[np.bool_]]:
    """Return x after one step that lowers the convex function, and which rows still move."""
    direction = _direction(A, c, gradient)
    length = np.minimum(1.0, LARGEST_STEP / np.maximum(np.abs(direction).max(axis=-1), 1e-300))
    promised = (gradient * direction).sum(axis=-1)
    done = np.zeros(x.shape[0], dtype=bool)
    best = x.copy()
    for _ in range(HALVINGS):
        trial = x + length[:, None] * direction
        fall = _fall(ln_K, A, T, x, trial, c)
        good = ~done & (fall <= ENOUGH_FALL * length * promised + 1e-15 * c.sum(axis=-1))
        best[good] = trial[good]
        done |= good
        if done.all():
            break
        length = np.where(done, length, 0.5 * length)
    return best, done


def _direction(A: Array, c: Array, gradient: Array) -> Array:
    """Newton's direction, rows and columns scaled by the diagonal of the Hessian."""
    n = A.shape[1]
    products = (A[:, :, None] * A[:, None, :]).reshape(-1, n * n)
    hessian = (c @ products).reshape(-1, n, n)
    scale = 1.0 / np.sqrt(np.maximum(np.einsum("bcc->bc", hessian), 1e-300))
    scaled = hessian * scale[:, :, None] * scale[:, None, :]
    scaled = scaled + 1e-13 * np.eye(n)
    solved = np.linalg.solve(scaled, -(gradient * scale)[:, :, None])[:, :, 0]
    return np.asarray(solved * scale)


def _fall(ln_K: Array, A: Array, T: Array, x: Array, trial: Array, c: Array) -> Array:
    """Change of ``sum(c) - T x``, each species by its own change."""
    change = (trial - x) @ A.T
    room = np.minimum(change, LARGEST_LOG - (ln_K + x @ A.T))
    return np.asarray((c * np.expm1(room)).sum(axis=-1) - (T * (trial - x)).sum(axis=-1))
