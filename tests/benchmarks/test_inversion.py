"""A million inversions of the series law against a loop of a general root finder."""

import time

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import brentq

from leachkin.kinetics import ParticleLaw

COUNT = 1_000_000
LOOPED = 2_000


@pytest.mark.benchmark
def test_a_million_series_inversions():
    film, ash_layer, chemical = 1.0, 3.0, 2.0
    law = ParticleLaw(film, ash_layer, chemical)
    times = np.random.default_rng(3).random(COUNT) * law.complete_at

    def time_left(X, at):
        left = (1.0 - X) ** (1.0 / 3.0)
        ash = 1.0 - 3.0 * left * left + 2.0 * (1.0 - X)
        return film * X + ash_layer * ash + chemical * (1.0 - left) - at

    start = time.perf_counter()
    looped = [brentq(time_left, 0.0, 1.0, args=(at,), xtol=1e-15) for at in times[:LOOPED]]
    loop_s = (time.perf_counter() - start) * COUNT / LOOPED
    array_s = min(_seconds(law, times) for _ in range(3))
    print(
        f"\nseries inversions, {COUNT:,}: {array_s:.3f} s here ({COUNT / array_s / 1e6:.1f} "
        f"million a second), {loop_s:.1f} s by a brentq loop: {loop_s / array_s:.0f} times"
    )
    found = law.conversion(times[:LOOPED])
    print(f"largest difference {np.max(np.abs(found - looped)):.1e}")
    assert_allclose(found, looped, rtol=0, atol=1e-13)
    assert loop_s / array_s >= 100.0


def _seconds(law, times):
    start = time.perf_counter()
    law.conversion(times)
    return time.perf_counter() - start
