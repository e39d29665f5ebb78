"""The progress line of a run, and its signals: alive on a terminal, quiet lines elsewhere."""

from __future__ import annotations

import math
import signal
import sys
import time
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from types import FrameType

    from rbsim.simulation.loop import Progress

#: Seconds between two reports, on a terminal and elsewhere.
EVERY, EVERY_QUIETLY = 0.5, 30.0


class ProgressLine:
    """Shows how far a run is.

    On a terminal one line is redrawn. Elsewhere a line of key=value pairs is written to standard error now
    and then, for logs and scripts.
    """

    def __init__(self) -> None:
        self._alive = sys.stderr.isatty()
        self._shown_at = 0.0
        self._drawn = False

    def show(self, progress: Progress) -> None:
        """Show the progress if the last report is old enough."""
        now = time.monotonic()
        if now - self._shown_at < (EVERY if self._alive else EVERY_QUIETLY):
            return
        self._shown_at = now
        if math.isnan(progress.seconds_left):
            return
        if self._alive:
            text = (
                f"t = {progress.time:.2f} of {progress.end:g}  left {_clock(progress.seconds_left)}  "
                f"dt {progress.step_size:.2e}  Courant {progress.courant:.2f}  Nu {progress.nusselt:.3f}"
            )
            print(f"\r{text:<90}", end="", file=sys.stderr, flush=True)
            self._drawn = True
        else:
            print(
                f"progress time={progress.time:.6g} end={progress.end:g} steps={progress.steps} "
                f"seconds_left={progress.seconds_left:.0f} step_size={progress.step_size:.3e} "
                f"courant={progress.courant:.3f} nusselt={progress.nusselt:.4f}",
                file=sys.stderr,
                flush=True,
            )

    def say(self, text: str) -> None:
        """Write a line of its own."""
        self.close()
        print(text, file=sys.stderr, flush=True)

    def close(self) -> None:
        """End the redrawn line."""
        if self._drawn:
            print(file=sys.stderr, flush=True)
            self._drawn = False


class StopOnSignal:
    """Remembers SIGINT and SIGTERM, so that a run can write its checkpoint; a second SIGINT ends at once."""

    def __init__(self) -> None:
        self._asked = False
        for number in (signal.SIGINT, signal.SIGTERM):
            signal.signal(number, self._remember)

    def __call__(self) -> bool:
        """Tell whether a signal has come."""
        return self._asked

    def _remember(self, number: int, _: FrameType | None) -> None:
        if self._asked and number == signal.SIGINT:
            raise KeyboardInterrupt
        self._asked = True


def _clock(seconds: float) -> str:
    minutes, rest = divmod(round(seconds), 60)
    hours, minutes = divmod(minutes, 60)
    return f"{hours}:{minutes:02d}:{rest:02d}" if hours else f"{minutes}:{rest:02d}"
