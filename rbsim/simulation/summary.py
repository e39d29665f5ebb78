"""What a run found: every Nusselt number with its error, and whether the definitions agree."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import trapezoid

from rbsim.diagnostics.nusselt import DEFINITIONS
from rbsim.errors import ConfigError
from rbsim.files.reader import RunRecords
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
        """Average with the unsteady term: the same for all definitions but for errors of the grid."""
        return self.raw.mean + self.storage


@dataclass(frozen=True)
class Agreement:
    """Comparison of the six definitions.

    Parameters
    ----------
    spread : float
        Largest minus smallest balanced average, over their mean: an error of the grid.
    drift : float
        Difference between the averaged storage of energy or heat and what was stored from the first to the
        last sample, over the mean Nusselt number: an error of the time steps, or of a too sparse history.
    verdict : {"agree", "doubtful", "disagree"}
        The larger of both up to 1 %, up to 3 %, above.
    advice : str
        What to do next.
    """

    spread: float
    drift: float
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
                "drift": self.agreement.drift,
                "verdict": self.agreement.verdict,
                "advice": self.agreement.advice,
            },
            "roll_pairs": {"number": self.roll_pairs[0], "share_of_time": self.roll_pairs[1]},
            "tails": {"x": self.tails[0], "z": self.tails[1]},
            "error_method": self.nusselt["volume"].raw.method,
        }


def summarise(records: RunRecords, start: float | None = None) -> Summary | None:
    """Average the history of a run over its steady part; see `average_history`."""
    rayleigh, prandtl = (float(records.attributes[name]) for name in ("rayleigh", "prandtl"))
    return average_history(records.history, 1.0 / math.sqrt(rayleigh * prandtl), start)


def average_history(
    history: Mapping[str, Array], diffusivity: float, start: float | None = None
) -> Summary | None:
    """Average a history over its steady part.

    Parameters
    ----------
    history : mapping of str to ndarray, shape (samples,)
        History quantities and ``time``.
    diffusivity : float
        (Ra Pr)^(−1/2).
    start : float, optional
        Start of the window in free-fall times instead of the detected end of the transient.

    Returns
    -------
    Summary or None
        None if there are too few samples to average.

    Raises
    ------
    ConfigError
        If the wanted start leaves too few samples.
    """
    time = history["time"]
    if time.size < FEWEST_SAMPLES:
        return None
    transient = latest_transient({name: history[name] for name in DECISIVE})
    if start is not None:
        first = int(np.searchsorted(time, start))
        if first > time.size - FEWEST_SAMPLES:
            raise ConfigError(f"start of the averages {start:g}: must be well before the end {time[-1]:g}")
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
        agreement=judge([value.balanced for value in nusselt.values()], _drift(cut, diffusivity)),
        roll_pairs=_usual(cut["roll_pairs"]),
        tails=(float(np.median(cut["tail_x"])), float(np.median(cut["tail_z"]))),
    )


def judge(balanced: list[float], drift: float) -> Agreement:
    """Compare balanced averages of all definitions.

    Parameters
    ----------
    balanced : list of float
        Averages with their unsteady terms.
    drift : float
        Error of the budgets over the window, in units of the Nusselt number.
    """
    mean = abs(float(np.mean(balanced)))
    spread, drift = float(np.ptp(balanced)) / mean, drift / mean
    worst = max(spread, drift)
    if worst <= AGREES:
        return Agreement(spread, drift, "agree", "the error bars say whether the time was long enough")
    if spread >= drift:
        advice = "use a grid about 1.3 times finer in both directions and compare"
    else:
        advice = "use a shorter output.history_interval, or a smaller time.courant, and compare"
    return Agreement(spread, drift, "doubtful" if worst <= DOUBTFUL else "disagree", advice)


def _drift(cut: Mapping[str, Array], diffusivity: float) -> float:
    """Compare mean storage rates with what was stored from the first to the last sample.

    Kinetic energy and mean temperature are known at the ends; their rates come from the equations, so that an
    error of the time steps shows.
    """
    span = float(cut["time"][-1] - cut["time"][0])
    warming = cut["storage_top"] - cut["storage_bottom"]
    pairs = ((cut["storage_kinetic"], "kinetic_energy"), (warming, "temperature_mean"))
    errors = (
        float(trapezoid(rate, cut["time"])) - float(cut[name][-1] - cut[name][0]) / diffusivity
        for rate, name in pairs
    )
    return max(abs(error) for error in errors) / span


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
