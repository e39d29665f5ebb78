"""What a run found: every Nusselt number with its error, and whether the definitions agree."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rbsim.diagnostics.nusselt import DEFINITIONS
from rbsim.series.averages import mean_with_error
from rbsim.series.estimate import Estimate
from rbsim.series.transient import Transient, latest_transient

Array = NDArray[np.float64]

#: Largest relative spread of the balanced means that counts as agreement, and as doubtful (common practice,
#: no source).
AGREES, DOUBTFUL = 0.01, 0.03

#: Records whose transient must be over before averages start: the kinetic energy settles last.
DECISIVE = ("kinetic_energy", "nusselt_bottom", "nusselt_top")

#: Fewest history samples from which averages are formed.
FEWEST_SAMPLES = 4


@dataclass(frozen=True)
class NusseltMean:
    """Time average of one definition of the Nusselt number.

    Parameters
    ----------
    raw : Estimate
        Average of the definition as it stands, with its error.
    storage : float
        Average of the unsteady term of the same window.
    """

    raw: Estimate
    storage: float

    @property
    def balanced(self) -> float:
        """Average with the unsteady term: the same for all definitions but for errors of the numerics."""
        return self.raw.mean + self.storage


@dataclass(frozen=True)
class Agreement:
    """Comparison of the six definitions.

    Parameters
    ----------
    spread : float
        Largest minus smallest balanced average, over their mean.
    verdict : {"agree", "doubtful", "disagree"}
        Spread up to 1 %, up to 3 %, above.
    advice : str
        What to do next.
    """

    spread: float
    verdict: str
    advice: str


@dataclass(frozen=True)
class Summary:
    """Averages of a run over its statistically steady part.

    Parameters
    ----------
    start, end : float
        Window of the averages in free-fall times.
    transient : Transient
        How its start was found.
    nusselt : mapping of str to NusseltMean
        By definition.
    reynolds : Estimate
        Reynolds number of the rms velocity.
    agreement : Agreement
        Whether the definitions agree.
    roll_pairs : tuple of (int, float)
        Most frequent number of roll pairs and its share of the window.
    tails : tuple of float
        Median spectral tails in x and z.
    """

    start: float
    end: float
    transient: Transient
    nusselt: Mapping[str, NusseltMean]
    reynolds: Estimate
    agreement: Agreement
    roll_pairs: tuple[int, float]
    tails: tuple[float, float]

    def as_dict(self) -> dict[str, Any]:
        """Return the summary as plain values for JSON; an unknown error is None."""
        return {
            "window": {
                "start": self.start,
                "end": self.end,
                "unit": "free-fall time",
                "steady": self.transient.trustworthy,
                "reason": self.transient.reason,
            },
            "nusselt": {
                name: {
                    "mean": value.raw.mean,
                    "ci95": _finite(value.raw.ci95),
                    "storage": value.storage,
                    "balanced": value.balanced,
                }
                for name, value in self.nusselt.items()
            },
            "reynolds": {"mean": self.reynolds.mean, "ci95": _finite(self.reynolds.ci95)},
            "agreement": {
                "spread": self.agreement.spread,
                "verdict": self.agreement.verdict,
                "advice": self.agreement.advice,
            },
            "roll_pairs": {"number": self.roll_pairs[0], "share_of_time": self.roll_pairs[1]},
            "tails": {"x": self.tails[0], "z": self.tails[1]},
            "error_method": self.nusselt["volume"].raw.method,
        }


def summarise(history: Mapping[str, Array], start: float | None = None) -> Summary | None:
    """Average a history over its steady part.

    Parameters
    ----------
    history : mapping of str to ndarray, shape (samples,)
        History quantities and ``time``.
    start : float, optional
        Start of the window in free-fall times instead of the detected end of the transient.

    Returns
    -------
    Summary or None
        None if there are too few samples to average.
    """
    time = history["time"]
    if time.size < FEWEST_SAMPLES:
        return None
    transient = latest_transient({name: history[name] for name in DECISIVE})
    if start is not None:
        first = min(int(np.searchsorted(time, start)), time.size - FEWEST_SAMPLES)
        transient = Transient(first, True, "start given by the user")
    window = slice(transient.index, None)
    cut = {name: values[window] for name, values in history.items()}
    spacing = float(cut["time"][-1] - cut["time"][0]) / (cut["time"].size - 1)
    nusselt = {name: _nusselt_mean(cut, name, spacing) for name in DEFINITIONS}
    return Summary(
        start=float(cut["time"][0]),
        end=float(cut["time"][-1]),
        transient=transient,
        nusselt=nusselt,
        reynolds=mean_with_error(cut["reynolds"], spacing),
        agreement=judge([value.balanced for value in nusselt.values()]),
        roll_pairs=_usual(cut["roll_pairs"]),
        tails=(float(np.median(cut["tail_x"])), float(np.median(cut["tail_z"]))),
    )


def judge(balanced: list[float]) -> Agreement:
    """Compare balanced averages of all definitions.

    Parameters
    ----------
    balanced : list of float
        Averages with their unsteady terms.
    """
    spread = float(np.ptp(balanced) / abs(np.mean(balanced)))
    if spread <= AGREES:
        return Agreement(spread, "agree", "the definitions agree; the error bars say how long to average")
    if spread <= DOUBTFUL:
        return Agreement(
            spread, "doubtful", "use a grid about 1.3 times finer in both directions and compare"
        )
    return Agreement(spread, "disagree", "the grid is too coarse for these numbers; do not use them")


def _nusselt_mean(cut: Mapping[str, Array], name: str, spacing: float) -> NusseltMean:
    storage = cut.get(f"storage_{name}")
    mean = 0.0 if storage is None else float(storage.mean())
    return NusseltMean(mean_with_error(cut[f"nusselt_{name}"], spacing), mean)


def _usual(pairs: Array) -> tuple[int, float]:
    values, counts = np.unique(pairs.astype(int), return_counts=True)
    usual = int(np.argmax(counts))
    return int(values[usual]), float(counts[usual] / pairs.size)


def _finite(value: float) -> float | None:
    return value if math.isfinite(value) else None
