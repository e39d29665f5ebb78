"""Synthetic records with known statistics."""

from collections.abc import Callable

import numpy as np
import numpy.typing as npt
import pytest
from scipy.signal import lfilter

Array = npt.NDArray[np.float64]
Maker = Callable[..., Array]


def _autoregressive(phi: float, samples: int, records: int, seed: int) -> Array:
    """Stationary Gaussian records of unit variance with autocorrelation phi**lag."""
    noise = np.random.default_rng(seed).standard_normal((records, samples)) * np.sqrt(1.0 - phi**2)
    noise[:, 0] /= np.sqrt(1.0 - phi**2)
    return lfilter([1.0], [1.0, -phi], noise, axis=-1)


def _oscillating(period: float, damping: float, samples: int, records: int, seed: int) -> Array:
    """Second-order autoregressive records, variance not normalised, long after their start."""
    r, angle, lead = np.exp(-1.0 / damping), 2.0 * np.pi / period, 500
    noise = np.random.default_rng(seed).standard_normal((records, samples + lead))
    return lfilter([1.0], [1.0, -2.0 * r * np.cos(angle), r**2], noise, axis=-1)[:, lead:]


def _smooth(samples: int, records: int, seed: int) -> Array:
    """Noise passed four times through the same low pass, unit variance: oversampled, differentiable."""
    noise = np.random.default_rng(seed).standard_normal((records, samples + 300))
    for _ in range(4):
        noise = lfilter([0.2], [1.0, -0.8], noise, axis=-1)
    return noise[:, 300:] / noise[:, 300:].std()


@pytest.fixture
def autoregressive() -> Maker:
    return _autoregressive


@pytest.fixture
def oscillating() -> Maker:
    return _oscillating


@pytest.fixture
def smooth() -> Maker:
    return _smooth
