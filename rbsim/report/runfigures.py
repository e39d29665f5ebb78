"""The figures of a run folder: takes records, calls the figures, saves them at once."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import matplotlib as mpl
import numpy as np
from matplotlib.figure import Figure

from rbsim.errors import ConfigError, RunFolderError
from rbsim.files.atomic import replacing
from rbsim.files.fieldfile import Snapshot, read_snapshot, snapshot_time
from rbsim.files.reader import RunRecords
from rbsim.report.figures import Trace, mean_profiles, nusselt_history, temperature_field, thermometer_traces
from rbsim.report.style import DPI, SETTINGS, number
from rbsim.simulation.summary import summarise

#: Endings, and what keeps the date out, so that the same drawing gives the same file.
UNDATED: dict[str, dict[str, Any]] = {"png": {}, "svg": {"Date": None}, "pdf": {"CreationDate": None}}


def draw_run(records: RunRecords) -> list[Path]:
    """Draw all figures of a run into its folder.

    Parameters
    ----------
    records : RunRecords
        The run.

    Returns
    -------
    list of Path
        Files drawn.
    """
    folder, title = records.folder.figures, _title(records)
    summary = summarise(records)
    window = (summary.start, summary.end) if summary else None
    figures = {"nusselt_history": nusselt_history(records.history, window, title)}
    if records.thermometers:
        figures["thermometer_traces"] = thermometer_traces(_traces(records), title)
    figures["profiles"] = mean_profiles(*_averaged_profiles(records, window), title)
    snapshots = records.folder.snapshots()
    if snapshots:
        figures["temperature"] = _field_figure(records, read_snapshot(snapshots[-1]))
    folder.mkdir(exist_ok=True)
    return [save(figure, folder / f"{name}.png") for name, figure in figures.items()]


def draw_snapshot(records: RunRecords, path: Path, time: float | None = None) -> float:
    """Draw one temperature field.

    Parameters
    ----------
    records : RunRecords
        The run.
    path : Path
        File to draw; its ending chooses the format.
    time : float, optional
        Draw the snapshot closest to this time instead of the last one.

    Returns
    -------
    float
        Time of the snapshot in free-fall times.

    Raises
    ------
    ConfigError
        If the ending is not one of png, svg, pdf.
    RunFolderError
        If the run has no snapshots.
    """
    snapshots = records.folder.snapshots()
    if not snapshots:
        raise RunFolderError(f"{records.folder.path}: has no snapshots; run with output.field_interval > 0")
    file = snapshots[-1] if time is None else min(snapshots, key=lambda s: abs(snapshot_time(s) - time))
    snapshot = read_snapshot(file)
    save(_field_figure(records, snapshot), path)
    return snapshot.time


def save(figure: Figure, path: Path) -> Path:
    """Save a figure at once.

    Raises
    ------
    ConfigError
        If the ending of the file is not one of png, svg, pdf.
    RunFolderError
        If the file cannot be written.
    """
    kind = path.suffix.lstrip(".").lower()
    if kind not in UNDATED:
        raise ConfigError(f"{path}: the ending must be one of {', '.join(f'.{k}' for k in UNDATED)}")
    with replacing(path) as temporary, mpl.rc_context(SETTINGS):
        figure.savefig(temporary, format=kind, dpi=DPI, metadata=UNDATED[kind])
    return path


def _field_figure(records: RunRecords, snapshot: Snapshot) -> Figure:
    period = float(records.attributes["aspect_ratio"])
    title = f"{_title(records)}, t = {snapshot.time:g}"
    return temperature_field(snapshot.x, snapshot.z, snapshot.temperature, period, title, _traces(records))


def _averaged_profiles(
    records: RunRecords, window: tuple[float, float] | None
) -> tuple[np.ndarray, dict[str, np.ndarray]]:
    time = records.profiles["time"]
    inside = time >= window[0] if window and np.any(time >= window[0]) else np.ones(time.size, dtype=bool)
    names = [name for name in records.profiles if name not in ("time", "z")]
    return records.profiles["z"], {name: records.profiles[name][inside].mean(axis=0) for name in names}


def _traces(records: RunRecords) -> list[Trace]:
    return [Trace(name, r.x, r.z, r.time, r.temperature) for name, r in records.thermometers.items()]


def _title(records: RunRecords) -> str:
    facts = records.attributes
    return f"Ra = {number(facts['rayleigh'])}, Pr = {number(facts['prandtl'])}, Γ = {facts['aspect_ratio']:g}"
