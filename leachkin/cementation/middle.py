"""One number of what may be a batch of draws."""

from __future__ import annotations

from typing import Any

import numpy as np


def middle(values: Any) -> float:
    """Return a number as it is, or the median of draws.

    Examples
    --------
    >>> middle(2.0), middle([1.0, 2.0, 9.0])
    (2.0, 2.0)
    """
    return float(np.median(np.asarray(values, dtype=np.float64)))
