"""Runs a timeline at the machine's speeds or faster: a clock, a place in time, and where to pause."""

from typing import Final

from PySide6.QtCore import QElapsedTimer, QObject, QTimer, Signal

from app.plan.timeline_clearance import ClearanceOverTime, next_tight

# About thirty pictures a second.
_TICK_MS: Final = 33
# After a picture that took longer, the machine is not let jump further than this, s of the clock.
_MOST_TICK_S: Final = 0.25


class FieldsPlayer(QObject):
    """A place in time on a curve's timeline.

    `moved` (seconds) whenever it is another, `played` (bool) when playing begins or ends. The clock runs only
    while it plays.
    """

    moved = Signal(float)
    played = Signal(bool)

    def __init__(self, parent: QObject | None = None) -> None:
        super().__init__(parent)
        self.curve: ClearanceOverTime | None = None
        self.seconds = 0.0
        self.speed = 1
        self.pausing = False
        self._since = QElapsedTimer()
        self._timer = QTimer(self)
        self._timer.setInterval(_TICK_MS)
        self._timer.timeout.connect(self._tick)

    @property
    def is_playing(self) -> bool:
        """Whether the clock runs."""
        return self._timer.isActive()

    def set_curve(self, curve: ClearanceOverTime | None, seconds: float = 0.0) -> None:
        """Play another curve, None for nothing, from a time on; playing ends, and nothing is told of the time."""
        self.pause()
        self.curve = curve
        self.seconds = seconds

    def play(self) -> None:
        """Go on, from the start where the end is reached."""
        if self.curve is None or not self.curve.timeline.segments or self.is_playing:
            return
        if self.seconds >= self.curve.timeline.seconds:
            self.seek(0.0)
        self._since.start()
        self._timer.start()
        self.played.emit(True)

    def pause(self) -> None:
        """Stay where it is."""
        if self.is_playing:
            self._timer.stop()
            self.played.emit(False)

    def seek(self, seconds: float) -> None:
        """Go to a time, kept within the timeline."""
        if self.curve is None or not self.curve.timeline.segments:
            return
        self.seconds = min(max(seconds, 0.0), self.curve.timeline.seconds)
        self.moved.emit(self.seconds)

    def step(self, forth: int) -> None:
        """Go to the next tightest place, or to the one before, and stay there."""
        self.pause()
        time = next_tight(self.curve, self.seconds, forth) if self.curve is not None else None
        if time is not None:
            self.seek(time)

    def advance(self, clock_s: float) -> None:
        """Let some time of the clock pass: go on, to the end or to where to pause at most."""
        if self.curve is None:
            return
        wanted = self.seconds + clock_s * self.speed
        tight = next_tight(self.curve, self.seconds, 1) if self.pausing else None
        end = self.curve.timeline.seconds
        stop = end if tight is None else min(tight, end)
        self.seek(min(wanted, stop))
        if wanted >= stop:
            self.pause()

    def _tick(self) -> None:
        self.advance(min(self._since.restart() / 1000.0, _MOST_TICK_S))
