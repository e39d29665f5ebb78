"""`rbsim onset`: where convection sets in, by theory."""

from __future__ import annotations

import argparse
import json
import math
from pathlib import Path
from typing import TYPE_CHECKING, Any

from rbsim.commands.plates import add_plate_arguments, describe, plates_of, use_one_matrix_thread

if TYPE_CHECKING:
    from rbsim.stability.disturbances import Disturbance
    from rbsim.stability.estimate import OnsetEstimate
    from rbsim.stability.forms import AnyPlate
    from rbsim.stability.marginal import MarginalMode

NAME = "onset"
HELP = "critical Rayleigh number, neutral curve, growth rates and shapes of small disturbances"
EXAMPLES = """  rbsim onset
  rbsim onset --top free-slip --top-thermal fixed-flux --json
  rbsim onset --bottom-thermal fixed-flux --top-thermal fixed-flux --period 10
  rbsim onset --neutral neutral.csv --figure neutral.png
  rbsim onset --rayleigh 2000 --prandtl 0.71 --wavenumber 3 --shapes mode.csv
  rbsim onset --from-data nu.csv --figure estimate.png
"""

#: Points of a neutral curve and of a shape.
CURVE_POINTS, SHAPE_POINTS = 121, 101


def add_arguments(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    add_plate_arguments(parser)
    parser.add_argument(
        "--period", type=float, metavar="G", help="only the wavenumbers of a cell of period G (H)"
    )
    parser.add_argument(
        "--mode", type=int, default=0, help="0: the first to grow (default), 1: the next, ..."
    )
    parser.add_argument("--neutral", metavar="CSV", help="write the neutral curve Ra(k)")
    parser.add_argument("--range", metavar="K1,K2", help="wavenumbers of the neutral curve (1/H)")
    parser.add_argument("--figure", metavar="FILE", help="draw the neutral curve, .png, .svg or .pdf")
    parser.add_argument("--rayleigh", type=float, metavar="RA", help="growth rates at this Rayleigh number")
    parser.add_argument(
        "--prandtl", type=float, default=1.0, metavar="PR", help="for growth rates (default 1)"
    )
    parser.add_argument("--wavenumber", type=float, metavar="K", help="for growth rates (default: critical)")
    parser.add_argument("--shapes", metavar="CSV", help="write the shape of the fastest disturbance")
    parser.add_argument("--from-data", metavar="CSV", help="estimate the onset from Ra,Nu or Ra,growth")
    parser.add_argument("--within", type=float, default=1.5, help="fit Nu up to this multiple of onset (1.5)")
    parser.add_argument("--json", action="store_true", help="print JSON")


def execute(args: argparse.Namespace) -> int:
    """Find the onset and what else was asked for."""
    use_one_matrix_thread()
    from rbsim.stability.marginal import critical_mode

    check(args)
    plates = plates_of(args)
    critical = critical_mode(*plates, args.mode, args.period)
    facts: dict[str, Any] = {
        "rayleigh_critical": critical.rayleigh,
        "wavenumber_critical": critical.wavenumber,
        "wavelength_critical": 2.0 * math.pi / critical.wavenumber if critical.wavenumber > 0 else None,
    }
    if args.rayleigh is not None:
        facts |= _growth(args, plates, critical)
    if args.from_data:
        facts |= _estimate(args, critical)
    if args.neutral or (args.figure and not args.from_data):
        _curve(args, plates, critical)
    print(json.dumps(facts, indent=2) if args.json else "\n".join(_lines(args, facts)))
    return 0


def check(args: argparse.Namespace) -> None:
    """Check the numbers.

    Raises
    ------
    ConfigError
        A number is out of its range.
    """
    from rbsim.errors import ConfigError

    faults = [
        f"--{name} {value:g}: must be positive and finite"
        for name in ("period", "rayleigh", "prandtl", "wavenumber")
        if (value := getattr(args, name)) is not None and not 0.0 < value < math.inf
    ]
    if not 1.05 <= args.within <= 10.0:
        faults.append(f"--within {args.within:g}: must be 1.05 ... 10")
    if not 0 <= args.mode <= 8:
        faults.append(f"--mode {args.mode}: must be 0 ... 8")
    if args.rayleigh is None and (args.shapes or args.wavenumber):
        faults.append("--shapes and --wavenumber need --rayleigh")
    if faults:
        raise ConfigError("\n".join(faults), tuple(faults))


def _growth(
    args: argparse.Namespace, plates: tuple[AnyPlate, AnyPlate], critical: MarginalMode
) -> dict[str, Any]:
    from rbsim.errors import ConfigError
    from rbsim.stability.disturbances import growth_rates

    k = args.wavenumber or critical.wavenumber
    if k == 0.0:
        raise ConfigError("--wavenumber: onset is at k = 0 between these plates; give one, or a --period")
    modes = growth_rates(plates, args.rayleigh, args.prandtl, k, count=4)
    if args.shapes:
        _write_shapes(Path(args.shapes), modes[0])
    free_fall = math.sqrt(args.rayleigh * args.prandtl)
    return {
        "wavenumber": k,
        "growth_rates": [mode.rate for mode in modes],
        "growth_rates_free_fall": [mode.rate / free_fall for mode in modes],
    }


def _write_shapes(path: Path, mode: Disturbance) -> None:
    import numpy as np

    from rbsim.files.tables import write_csv

    z = np.linspace(0.0, 1.0, SHAPE_POINTS)
    write_csv(path, {"z": z, **mode.shapes(z)})


def _estimate(args: argparse.Namespace, critical: MarginalMode) -> dict[str, Any]:
    from rbsim.files.tables import column_names, read_csv
    from rbsim.stability.estimate import onset_from_growth, onset_from_nusselt

    path = Path(args.from_data)
    growing = "growth" in column_names(path)
    name = "growth" if growing else "Nu"
    table = read_csv(path, ("Ra", name))
    if growing:
        found = onset_from_growth(table["Ra"], table[name])
    else:
        found = onset_from_nusselt(table["Ra"], table[name], args.within)
    if args.figure:
        _draw_estimate(args, table, found, critical.rayleigh)
    return {
        "rayleigh_estimate": found.rayleigh,
        "rayleigh_interval": list(found.interval),
        "points_used": int(found.used.sum()),
        "points": int(found.used.size),
        "law": "growth rates" if growing else "weakly nonlinear heat transport",
        "law_coefficients": list(found.coefficients),
    }


def _draw_estimate(
    args: argparse.Namespace, table: dict[str, Any], found: OnsetEstimate, theory: float
) -> None:
    import numpy as np

    from rbsim.report.onset_figures import onset_estimate_figure
    from rbsim.report.runfigures import save

    used = table["Ra"][found.used]
    rayleigh = np.linspace(used.min(), used.max(), 200)
    growing = "growth" in table
    law = found.growth(rayleigh) if growing else found.nusselt(rayleigh)
    measured = table["growth" if growing else "Nu"]
    figure = onset_estimate_figure(
        (table["Ra"], measured),
        (rayleigh, law),
        (found.rayleigh, *found.interval),
        theory,
        ("growth rate" if growing else "Nusselt number", describe(args)),
    )
    save(figure, Path(args.figure))


def _curve(args: argparse.Namespace, plates: tuple[AnyPlate, AnyPlate], critical: MarginalMode) -> None:
    import numpy as np

    from rbsim.stability.marginal import marginal_mode

    wavenumbers = np.linspace(*_range(args, critical.wavenumber), CURVE_POINTS)
    rayleigh = np.array([marginal_mode(*plates, float(k), args.mode).rayleigh for k in wavenumbers])
    if args.neutral:
        from rbsim.files.tables import write_csv

        write_csv(Path(args.neutral), {"wavenumber": wavenumbers, "rayleigh": rayleigh})
    if args.figure and not args.from_data:
        from rbsim.report.onset_figures import neutral_curve_figure
        from rbsim.report.runfigures import save

        point = (critical.wavenumber, critical.rayleigh)
        save(
            neutral_curve_figure(wavenumbers, rayleigh, point, describe(args), args.period), Path(args.figure)
        )


def _range(args: argparse.Namespace, critical: float) -> tuple[float, float]:
    from rbsim.errors import ConfigError

    if args.range is None:
        return (0.35 * critical, 2.6 * critical) if critical > 1.0 else (0.05, 6.0)
    try:
        first, last = (float(part) for part in args.range.split(","))
    except ValueError:
        first = last = 0.0
    if not 0.0 < first < last < 1e3:
        raise ConfigError(f"--range {args.range}: must be K1,K2 with 0 < K1 < K2 < 1000")
    return first, last


def _lines(args: argparse.Namespace, facts: dict[str, Any]) -> list[str]:
    wavelength = facts["wavelength_critical"]
    lines = [
        describe(args),
        f"critical Rayleigh number  {facts['rayleigh_critical']:.10g}",
        f"critical wavenumber       {facts['wavenumber_critical']:.10g} / H"
        + ("  (long-wave limit)" if wavelength is None else f"  (a roll pair is {wavelength:.6g} H wide)"),
    ]
    if "growth_rates" in facts:
        rates = "  ".join(f"{rate:.10g}" for rate in facts["growth_rates"])
        lines.append(
            f"growth at Ra = {args.rayleigh:g}, Pr = {args.prandtl:g}, k = {facts['wavenumber']:.6g}"
        )
        lines.append(f"  in kappa/H^2             {rates}")
        rates = "  ".join(f"{rate:.6g}" for rate in facts["growth_rates_free_fall"])
        lines.append(f"  in 1/free-fall time      {rates}")
    if "rayleigh_estimate" in facts:
        low, high = facts["rayleigh_interval"]
        lines.append(
            f"onset from the table      {facts['rayleigh_estimate']:.6g}  (95 %: {low:.6g} ... {high:.6g})"
        )
        lines.append(f"  {facts['law']}, {facts['points_used']} of {facts['points']} points in range")
    return lines
