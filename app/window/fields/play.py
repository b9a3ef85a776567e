"""Controls for playing a field or the whole treatment."""

from collections.abc import Sequence
from typing import Final

from PySide6.QtCore import QRect, Qt, Signal
from PySide6.QtWidgets import QCheckBox, QComboBox, QHBoxLayout, QLabel, QToolButton, QVBoxLayout, QWidget

from app.window.fields.glyphs import pause_icon, play_icon, step_icon
from app.window.fields.words import seconds_words
from app.window.setup.rows import tint
from app.window.theme import LIGHT, Theme

SPEEDS: Final = (1, 4, 10)


class PlayBar(QWidget):
    """Asks and shows; plays nothing itself.

    `play_wanted` (play or pause), `whole_wanted` (whole treatment, or the chosen field alone), `speed_wanted` (factor),
    `pausing_wanted` (pause at tightest places), `step_wanted` (+1 next tightest place, -1 the one before).
    """

    play_wanted = Signal(bool)
    whole_wanted = Signal(bool)
    speed_wanted = Signal(int)
    pausing_wanted = Signal(bool)
    step_wanted = Signal(int)

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._theme = LIGHT
        self._is_playing = False
        self.play = _button("Play", "Play at the machine's speeds, or faster")
        self.play.clicked.connect(lambda: self.play_wanted.emit(not self._is_playing))
        self.before = _button("Tightest place before", "To the tightest place before this one")
        self.before.clicked.connect(lambda: self.step_wanted.emit(-1))
        self.after = _button("Next tightest place", "To the next tightest place")
        self.after.clicked.connect(lambda: self.step_wanted.emit(1))
        self.what = _combo("What to play", (("This field", False), ("Whole treatment", True)))
        self.what.activated.connect(lambda index: self.whole_wanted.emit(bool(self.what.itemData(index))))
        self.speed = _combo("Speed", tuple((f"× {speed}", speed) for speed in SPEEDS))
        self.speed.setToolTip("How much faster than the machine")
        self.speed.activated.connect(lambda index: self.speed_wanted.emit(int(self.speed.itemData(index))))
        self.pausing = QCheckBox("Pause at the tightest place")
        self.pausing.toggled.connect(self.pausing_wanted)
        self.time = QLabel()
        self.now = QLabel()
        self.now.setWordWrap(True)
        # The panel must not change its shape while it plays.
        self.now.setFixedHeight(2 * self.now.fontMetrics().lineSpacing() + 2)
        self.now.setAlignment(Qt.AlignmentFlag.AlignTop)
        self.now.setObjectName("now")
        self._lay_out()
        self.set_theme(LIGHT)
        self.show_time(None, 0.0)

    def _lay_out(self) -> None:
        first = QHBoxLayout()
        first.setSpacing(4)
        for widget in (self.before, self.play, self.after):
            first.addWidget(widget)
        first.addSpacing(4)
        first.addWidget(self.what, 1)
        first.addWidget(self.speed)
        second = QHBoxLayout()
        second.addWidget(self.pausing, 1)
        second.addWidget(self.time)
        column = QVBoxLayout(self)
        column.setContentsMargins(10, 6, 10, 8)
        column.setSpacing(4)
        column.addLayout(first)
        column.addLayout(second)
        column.addWidget(self.now)

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        self._theme = theme
        self.before.setIcon(step_icon(theme, forth=False))
        self.after.setIcon(step_icon(theme, forth=True))
        tint(self.pausing, theme)
        self._show_play()

    def show_playing(self, is_playing: bool) -> None:
        """Show whether it plays."""
        self._is_playing = is_playing
        self._show_play()

    def show_whole(self, whole: bool) -> None:
        """Show what is played, quietly."""
        self.what.setCurrentIndex(1 if whole else 0)

    def show_time(self, seconds: float | None, of_seconds: float, forms: Sequence[str] = ()) -> None:
        """Show the time, and what happens then in the longest form that fits; None: there is nothing to play."""
        self.setEnabled(seconds is not None)
        self.time.setText("" if seconds is None else f"{seconds_words(seconds)} of {seconds_words(of_seconds)}")
        self.now.setText(next((form for form in forms if self._fits(form)), forms[-1] if forms else ""))

    def _fits(self, text: str) -> bool:
        room = QRect(0, 0, self.now.width(), 10_000)
        flags = Qt.TextFlag.TextWordWrap.value
        return self.now.fontMetrics().boundingRect(room, flags, text).height() <= self.now.height()

    def _show_play(self) -> None:
        self.play.setIcon(pause_icon(self._theme) if self._is_playing else play_icon(self._theme))
        self.play.setAccessibleName("Pause" if self._is_playing else "Play")


def _button(name: str, tip: str) -> QToolButton:
    button = QToolButton()
    button.setAccessibleName(name)
    button.setToolTip(tip)
    button.setAutoRaise(True)
    return button


def _combo(name: str, entries: tuple[tuple[str, object], ...]) -> QComboBox:
    combo = QComboBox()
    combo.setAccessibleName(name)
    for text, value in entries:
        combo.addItem(text, value)
    return combo
