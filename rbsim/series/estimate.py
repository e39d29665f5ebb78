"""A number with its error: the value every statistic of this room returns."""

from __future__ import annotations

import math
from dataclasses import dataclass

from scipy.special import stdtrit

FEWEST_EFFECTIVE_SAMPLES = 10.0
"""With fewer effectively independent samples no finite interval is given.

On first-order autoregressive records of any length down to a tenth of their correlation time this threshold
keeps the share of intervals that hold the true mean above 93 % (measured here; common practice, no source).
"""


@dataclass(frozen=True)
class Estimate:
    """A statistic of a record and how well it is known.

    Parameters
    ----------
    mean : float
        The estimated value, in the units of the statistic.
    standard_error : float
        Standard deviation of the estimate, same units; infinite if nothing is known.
    ci95 : float
        Half width of the 95 % confidence interval, same units; infinite if the record is too short.
    correlation_time : float
        Integral time scale of the averaged quantity, in the units of the spacing (½ spacing for white noise).
    effective_samples : float
        Number of independent samples that would give the same error.
    samples : int
        Number of samples in the record.
    degrees_of_freedom : float
        Degrees of freedom of the standard error, for Student's t.
    method : str
        Estimator of the error, with its source.
    """

    mean: float
    standard_error: float
    ci95: float
    correlation_time: float
    effective_samples: float
    samples: int
    degrees_of_freedom: float
    method: str

    @property
    def lower(self) -> float:
        """Lower end of the 95 % interval."""
        return self.mean - self.ci95

    @property
    def upper(self) -> float:
        """Upper end of the 95 % interval."""
        return self.mean + self.ci95

    @property
    def relative_ci95(self) -> float:
        """Half width over the size of the value; infinite for a value of zero with an error."""
        if self.ci95 == 0.0:
            return 0.0
        return self.ci95 / abs(self.mean) if self.mean else math.inf

    def samples_for(self, half_width: float) -> float:
        """Return how many samples of the same spacing would give an interval of this half width.

        The error falls with the square root of the length; infinite while the error itself is unknown.

        Raises
        ------
        ValueError
            If the half width is not positive.
        """
        if not half_width > 0.0:
            raise ValueError(f"half width {half_width}: must be positive")
        return self.samples * (self.ci95 / half_width) ** 2


def half_width95(standard_error: float, degrees_of_freedom: float) -> float:
    """Return the half width of the 95 % interval from Student's t."""
    return float(stdtrit(max(degrees_of_freedom, 1.0), 0.975)) * standard_error


def unknown(value: float, samples: int, reason: str) -> Estimate:
    """Return an estimate of which nothing but the value is known: infinite error."""
    return Estimate(value, math.inf, math.inf, math.inf, 0.0, samples, 1.0, reason)
