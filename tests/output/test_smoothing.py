"""The line through noise: the running median of SciPy, and what counts as noise."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.ndimage import median_filter

from loopsim.output.smoothing import running_median
from loopsim.results import FloatArray

TIME = np.linspace(0.0, 1.0, 601)
NOISE = np.random.default_rng(3).normal(size=601)
STEP = np.where(TIME < 0.3, 0.0, 1.0)


@pytest.mark.parametrize("clean", [np.zeros(601), STEP, 1 - np.exp(-5 * TIME), np.sin(9 * TIME)])
def test_the_line_is_the_running_median(clean: FloatArray) -> None:
    """Against scipy.ndimage.median_filter, eleven points here, its ends held."""
    noisy = clean + 0.03 * NOISE
    found = running_median(noisy)
    assert found is not None
    assert found == pytest.approx(median_filter(noisy, size=11, mode="nearest"), abs=0)


def test_a_step_stays_where_it_is() -> None:
    found = running_median(STEP + 0.03 * NOISE)
    assert found is not None
    assert np.all(np.abs(found - STEP) < 0.5)


@pytest.mark.parametrize(
    "signal",
    [
        np.zeros(601),
        STEP,
        1 - np.exp(-5 * TIME),
        np.sin(2 * np.pi * 40 * TIME),
        np.sign(np.sin(2 * np.pi * 30 * TIME) + 0.1),
        np.round(5 * np.sin(9 * TIME)),
        STEP + 1e-5 * NOISE,
        np.full(601, np.nan),
        NOISE[:12],
    ],
    ids=["still", "step", "lag", "sine", "on and off", "counts", "slight", "no values", "short"],
)
def test_what_is_not_noise_is_left_alone(signal: FloatArray) -> None:
    assert running_median(signal) is None


def test_noise_that_a_controller_holds_between_its_scans_is_noise() -> None:
    assert running_median(STEP + 0.03 * np.repeat(NOISE, 3)[:601]) is not None
