"""Seeded draws from a covariance."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from leachkin.problems import argument_error

Array = NDArray[np.float64]


def draw_vectors(
    vector: Array,
    covariance: Array,
    n: int,
    seed: int,
    degrees_of_freedom: int | None = None,
) -> Array:
    """Return n draws about a vector with a given covariance.

    Parameters
    ----------
    vector : ndarray, shape (p,)
    covariance : ndarray, shape (p, p)
        Rows of zeros hold a quantity at its value.
    n, seed : int
    degrees_of_freedom : int, optional
        Given: draws of Student's t, as the intervals are where the scatter itself was estimated.

    Returns
    -------
    ndarray, shape (n, p)
    """
    if n < 1:
        raise argument_error("n", str(n), "1 draw or more")
    generator = np.random.default_rng(seed)
    normal = generator.standard_normal((n, vector.size)) @ _root(covariance)
    if degrees_of_freedom is not None:
        chi = generator.chisquare(degrees_of_freedom, size=(n, 1))
        normal = normal * np.sqrt(degrees_of_freedom / chi)
    return np.asarray(vector + normal)


def _root(covariance: Array) -> Array:
    """Return R with R'R = covariance, by the eigenvectors of the correlation."""
    sd = np.sqrt(np.clip(np.diag(covariance), 0.0, None))
    scale = np.where(sd > 0, sd, 1.0)
    values, vectors = np.linalg.eigh(covariance / np.outer(scale, scale))
    root = np.sqrt(np.clip(values, 0.0, None))[:, None] * vectors.T
    return np.asarray(root * scale)
