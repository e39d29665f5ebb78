"""Tails of a distribution: exponential or Gaussian, and which of the two fits better."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt
from scipy.optimize import brentq
from scipy.special import log_ndtr

from rbsim.series.averages import mean_with_error
from rbsim.series.estimate import Estimate, unknown
from rbsim.series.records import Array, checked_record, checked_spacing, standardise

THRESHOLD = 1.0
"""Distance from the mean, in rms, at which a tail begins (common practice, no source)."""
FEWEST_IN_TAIL = 10
NARROWEST = 1e-3
"""A Gaussian width below this share of the threshold is not searched: such a tail is a step."""

EXPONENTIAL, GAUSSIAN, UNDECIDED = "exponential", "gaussian", "undecided"


@dataclass(frozen=True)
class TailFit:
    """Both fits to one tail, in units of the rms.

    Parameters
    ----------
    side : str
        "upper" or "lower".
    threshold : float
        Distance from the mean where the tail begins, in rms.
    share : Estimate
        Share of the samples in the tail.
    slope : Estimate
        Decay rate s of the exponential tail exp(−s z), per rms.
    width : Estimate
        Width σ of the Gaussian tail exp(−z²/2σ²), in rms; 1 for a Gaussian record.
    preference : Estimate
        Mean difference of the log-likelihoods per sample, exponential minus Gaussian.
    preferred : str
        "exponential", "gaussian", or "undecided" where the 95 % interval of the preference holds 0.
    """

    side: str
    threshold: float
    share: Estimate
    slope: Estimate
    width: Estimate
    preference: Estimate
    preferred: str


def tail_fit(values: npt.ArrayLike, spacing: float, side: str, threshold: float = THRESHOLD) -> TailFit:
    """Fit an exponential and a Gaussian tail to a record by maximum likelihood.

    Parameters
    ----------
    values : array_like, shape (n,)
        Statistically steady record at even spacing.
    spacing : float
        Time between samples.
    side : str
        "upper" or "lower".
    threshold : float
        Distance from the mean where the tail begins, in rms.

    Returns
    -------
    TailFit
        Unknown fits with infinite errors if fewer than ten samples lie in the tail.

    Raises
    ------
    ValueError
        If the record, the spacing, the side or the threshold is not valid.

    Notes
    -----
    The mean and the rms of the record are taken as known, which errs on the safe side. Both models have one
    parameter and describe the samples beyond the threshold; errors from the mean of the score over the
    information, as a record (Huber 1967). Which fits better: Vuong 1989, Econometrica 57, 307, with the
    error of the mean log-likelihood ratio of an autocorrelated record.
    """
    record, step = checked_record(values), checked_spacing(spacing)
    if side not in ("upper", "lower"):
        raise ValueError(f"side {side!r}: must be 'upper' or 'lower'")
    if not (np.isfinite(threshold) and threshold > 0.0):
        raise ValueError(f"threshold {threshold}: must be positive and finite")
    rest = standardise(record)
    rms = float(np.sqrt(np.mean(rest.values**2)))
    z = rest.values / rms if rms else rest.values
    z = z if side == "upper" else -z
    inside = z > threshold
    share = mean_with_error(inside.astype(np.float64), step)
    if int(inside.sum()) < FEWEST_IN_TAIL:
        nothing = unknown(0.0, record.size, f"fewer than {FEWEST_IN_TAIL} samples in the tail")
        return TailFit(side, threshold, share, nothing, nothing, nothing, UNDECIDED)
    slope, straight = _exponential(z, inside, threshold, step)
    width, curved = _gaussian(z, inside, threshold, step)
    preference = mean_with_error(straight - curved, step)
    return TailFit(side, threshold, share, slope, width, preference, _preferred(preference))


def _exponential(
    z: Array, inside: npt.NDArray[np.bool_], threshold: float, spacing: float
) -> tuple[Estimate, Array]:
    """Slope of the exponential tail and the log-likelihood of every sample (0 outside)."""
    excess = np.where(inside, z - threshold, 0.0)
    share = float(inside.mean())
    slope = share / float(excess.mean())
    score = np.where(inside, 1.0 / slope - excess, 0.0)
    estimate = _from_score(slope, score, share / slope**2, spacing)
    return estimate, np.where(inside, math.log(slope) - slope * excess, 0.0)


def _gaussian(
    z: Array, inside: npt.NDArray[np.bool_], threshold: float, spacing: float
) -> tuple[Estimate, Array]:
    """Width of the Gaussian tail and the log-likelihood of every sample (0 outside)."""
    tail = z[inside]
    square = float(np.mean(tail**2))

    def mean_score(log_width: float) -> float:
        return float(_gaussian_score(square, math.exp(log_width), threshold))

    # the score of log σ falls through zero once, below the root mean square of the tail
    low, high = math.log(threshold * NARROWEST), 0.5 * math.log(square)
    if mean_score(low) <= 0.0:
        width = threshold * NARROWEST
        return unknown(width, z.size, "no Gaussian tail fits"), _gaussian_likelihood(
            z, inside, width, threshold
        )
    width = math.exp(brentq(mean_score, low, high, xtol=1e-10))
    score = np.where(inside, _gaussian_score(z**2, width, threshold), 0.0)
    step = 1e-4
    share = float(inside.mean())
    information = (
        share * (mean_score(math.log(width) - step) - mean_score(math.log(width) + step)) / (2 * step)
    )
    relative = _from_score(0.0, score, information, spacing)
    estimate = replace(
        relative, mean=width, standard_error=width * relative.standard_error, ci95=width * relative.ci95
    )
    return estimate, _gaussian_likelihood(z, inside, width, threshold)


def _gaussian_score(square: npt.ArrayLike, width: float, threshold: float) -> Array:
    """Derive by log σ of the log-likelihood of a sample of given square beyond the threshold."""
    u = threshold / width
    # density over tail probability at the threshold, from logarithms so that it exists far out
    hazard = math.exp(-0.5 * u**2 - 0.5 * math.log(2.0 * math.pi) - float(log_ndtr(-u)))
    score: Array = np.asarray(square) / width**2 - 1.0 - u * hazard
    return score


def _gaussian_likelihood(z: Array, inside: npt.NDArray[np.bool_], width: float, threshold: float) -> Array:
    """Log-likelihood of every sample of the tail under the Gaussian tail (0 outside)."""
    normal = math.log(width) + 0.5 * math.log(2.0 * math.pi) + float(log_ndtr(-threshold / width))
    likelihood: Array = np.where(inside, -0.5 * (z / width) ** 2 - normal, 0.0)
    return likelihood


def _from_score(value: float, score: Array, information: float, spacing: float) -> Estimate:
    """Estimate whose error is that of the mean score over the information."""
    if not information > 0.0:
        return unknown(value, score.size, "flat likelihood")
    estimate = mean_with_error(score, spacing)
    return replace(
        estimate,
        mean=value,
        standard_error=estimate.standard_error / information,
        ci95=estimate.ci95 / information,
    )


def _preferred(preference: Estimate) -> str:
    """Name of the tail that fits better than chance."""
    if abs(preference.mean) <= preference.ci95:
        return UNDECIDED
    return EXPONENTIAL if preference.mean > 0.0 else GAUSSIAN
