"""How figures look: readable on a phone and by colour-blind readers, without touching anybody's settings."""

from __future__ import annotations

from collections.abc import Callable
from functools import wraps
from typing import Any, ParamSpec

import matplotlib as mpl
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from rbsim.diagnostics.quantities import Quantity

#: Colours that colour-blind readers can tell apart (Okabe & Ito 2008, Color Universal Design), and dashes.
COLOURS = ("#0072B2", "#D55E00", "#009E73", "#CC79A7", "#E69F00", "#56B4E9")
DASHES: tuple[str | tuple[int, tuple[int, ...]], ...] = (
    "-", "--", "-.", ":", (0, (5, 1, 1, 1)), (0, (3, 1, 1, 1, 1, 1)),
)  # fmt: skip

#: Width of all figures in inches and points per inch: letters of 11 pt stay legible 10 cm wide.
WIDTH, DPI = 6.0, 200

#: Axis label of every record.
TIME_LABEL = "time (free-fall times)"

#: Settings while something is drawn or saved.
SETTINGS: dict[Any, Any] = {
    "font.size": 11.0,
    "axes.titlesize": 11.0,
    "legend.fontsize": 10.0,
    "xtick.labelsize": 10.0,
    "ytick.labelsize": 10.0,
    "lines.linewidth": 1.2,
    "legend.frameon": False,
    "svg.hashsalt": "rbsim",  # the same drawing gives the same file
}

_UNITS = {"Delta": r"$\Delta$", "free-fall time": "free-fall times"}

P = ParamSpec("P")


def styled(draw: Callable[P, Figure]) -> Callable[P, Figure]:
    """Let a function draw with the settings of this house, and put back those it found."""

    @wraps(draw)
    def drawing(*args: P.args, **kwargs: P.kwargs) -> Figure:
        with mpl.rc_context(SETTINGS):
            return draw(*args, **kwargs)

    return drawing


def axis_label(quantity: Quantity, words: str = "") -> str:
    """Return symbol and unit of a quantity, behind a few words."""
    unit = "" if quantity.unit == "1" else f" ({_UNITS.get(quantity.unit, quantity.unit)})"
    return f"{words} {quantity.symbol}{unit}".strip()


def number(value: float) -> str:
    """Return a number for a headline, large and small ones as powers of ten (mathtext)."""
    mantissa, _, exponent = f"{value:.4g}".partition("e")
    if not exponent:
        return mantissa
    factor = "" if mantissa == "1" else rf"{mantissa} \times "
    return f"${factor}10^{{{int(exponent)}}}$"


def legend_below(axes: Axes, columns: int) -> None:
    """Put the legend below the labels of the axes."""
    handles, labels = axes.get_legend_handles_labels()
    assert isinstance(axes.figure, Figure)
    axes.figure.legend(handles, labels, loc="outside lower center", ncols=columns)
