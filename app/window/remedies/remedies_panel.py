"""The panel 'What stands in the way?': the parts at a pose that is not permitted, and the changes that would help."""

import math
from collections.abc import Sequence
from typing import Final

from PySide6.QtCore import QModelIndex, Qt, Signal
from PySide6.QtWidgets import QHBoxLayout, QLabel, QPushButton, QVBoxLayout, QWidget

from app.window.remedies.list import REMEDY, RemediesModel, RemedyDelegate, RemedyList, millimetres
from app.window.theme import LIGHT, Theme
from geometry.assess import Pose
from geometry.remedies.find import Obstacle, Remedy
from geometry.states import State

_LISTED: Final = 2


class RemediesPanel(QWidget):
    """Says what is in the way at a pose, and lists changes as they are found.

    `preview_wanted` (Remedy, or None for none): what the pointer or the keyboard is on. `apply_wanted` (Remedy): Enter,
    a double click or the button.
    """

    preview_wanted = Signal(object)
    apply_wanted = Signal(object)

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._previewed: Remedy | None = None
        self._busy = False
        self._permitted = False
        self._title = QLabel("What stands in the way?")
        self._title.setObjectName("title")
        self._state = QLabel()
        self._state.setObjectName("state")
        self._parts = QLabel()
        self._parts.setTextFormat(Qt.TextFormat.PlainText)
        self._hint = QLabel()
        self._hint.setObjectName("hint")
        for label in (self._state, self._parts, self._hint):
            label.setWordWrap(True)
        self._model = RemediesModel(self)
        self._delegate = RemedyDelegate(self)
        self.list = RemedyList()
        self.list.setModel(self._model)
        self.list.setItemDelegate(self._delegate)
        self.list.setAccessibleName("Changes that would make the pose permitted")
        self.list.entered.connect(self._on_entered)
        self.list.left.connect(self._on_left)
        self.list.chosen.connect(self._apply)
        self.list.doubleClicked.connect(self._apply)
        self.list.selectionModel().currentChanged.connect(self._on_current)
        self.button = QPushButton("Apply")
        self.button.setToolTip("Make the chosen change (Enter). Undo takes it back.")
        self.button.clicked.connect(lambda: self._apply(self.list.currentIndex()))
        self._lay_out()
        self.set_theme(LIGHT)
        self.clear()

    def _lay_out(self) -> None:
        top = QHBoxLayout()
        top.addWidget(self._title, 1)
        top.addWidget(self.button)
        column = QVBoxLayout(self)
        column.setContentsMargins(10, 6, 10, 8)
        column.setSpacing(4)
        column.addLayout(top)
        for widget in (self._state, self._parts, self._hint):
            column.addWidget(widget)
        column.addWidget(self.list, 1)
        # With nothing listed the words stay at the top.
        self._rest = QWidget()
        column.addWidget(self._rest, 1)

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        self.setStyleSheet(
            f"#title {{ color: {theme.ink}; font-weight: 600; }} #state, QLabel {{ color: {theme.ink}; }}"
            f" #hint {{ color: {theme.faint}; }}"
        )
        self._delegate.theme = theme
        self.list.viewport().update()

    def clear(self) -> None:
        """Show nothing: no pose is known."""
        self._permitted = False
        self._state.clear()
        self._parts.clear()
        self._parts.setToolTip("")
        self.clear_remedies()
        self._refresh()

    def clear_remedies(self) -> None:
        """Drop the changes listed, and the preview of any."""
        self._model.clear()
        self._preview(None)
        self._refresh()

    def show_pose(self, pose: Pose, obstacles: Sequence[Obstacle]) -> None:
        """Say what is known of a pose, and drop the changes listed for another one.

        Of a permitted pose the obstacles are what comes nearest to standing in the way.
        """
        self._permitted = pose.state is State.PERMITTED
        self._state.setText(state_words(pose, obstacles))
        # Beyond the travel nothing stands anywhere.
        lines = [obstacle_words(o) for o in obstacles] if pose.state is not State.NO_TRAVEL else []
        more = len(lines) - _LISTED
        shown = lines if more <= 1 else [*lines[:_LISTED], f"and {more} more pairs"]
        self._parts.setText("\n".join(shown))
        self._parts.setToolTip("\n".join(lines) if more > 1 else "")
        self.clear_remedies()

    def add_remedy(self, remedy: Remedy) -> None:
        """List one more change, in its place."""
        self._model.add(remedy)
        self._refresh()

    def set_busy(self, busy: bool) -> None:
        """Tell whether changes are still being tried."""
        self._busy = busy
        self._refresh()

    def remedies(self) -> tuple[Remedy, ...]:
        """Return the changes listed, in order."""
        return tuple(self._model.remedies)

    def _refresh(self) -> None:
        count = len(self._model.remedies)
        self._state.setVisible(bool(self._state.text()))
        self._parts.setVisible(bool(self._parts.text()))
        self.list.setVisible(count > 0)
        self.button.setVisible(count > 0)
        self.button.setEnabled(self.list.currentIndex().isValid())
        self._hint.setText(self._hint_words(count))
        self._hint.setVisible(bool(self._hint.text()))
        self._rest.setVisible(count == 0)

    def _hint_words(self, count: int) -> str:
        if self._busy:
            return "Each helps alone, as computed; more being tried …" if count else "Trying single changes …"
        if count:
            return "Each of these changes helps alone, as computed:"
        known = bool(self._state.text() or self._parts.text())
        return "None of the single changes that were tried helps." if known and not self._permitted else ""

    def _preview(self, remedy: Remedy | None) -> None:
        if remedy is not self._previewed:
            self._previewed = remedy
            self.preview_wanted.emit(remedy)

    def _on_entered(self, index: QModelIndex) -> None:
        self._preview(index.data(REMEDY))

    def _on_left(self) -> None:
        """Go back to what is chosen when the pointer has gone, or to no preview."""
        self._preview(self.list.currentIndex().data(REMEDY) if self.list.hasFocus() else None)

    def _on_current(self, index: QModelIndex) -> None:
        self.button.setEnabled(index.isValid())
        if index.isValid():
            self._preview(index.data(REMEDY))

    def _apply(self, index: QModelIndex) -> None:
        if index.isValid():
            self.apply_wanted.emit(index.data(REMEDY))


def state_words(pose: Pose, obstacles: Sequence[Obstacle]) -> str:
    """Return how it stands with a pose, in a sentence; nothing where the obstacles say it all."""
    if pose.state is State.PERMITTED:
        spare = f", {millimetres(pose.slack_mm)} mm more than required" if math.isfinite(pose.slack_mm) else ""
        return f"Nothing: this pose is permitted{spare}."
    if pose.state is State.NO_TRAVEL:
        return "No travel: " + ("; ".join(pose.scene.no_travel) or "the angles are beyond the machine's travel") + "."
    if pose.state is State.UNPROVED and not obstacles:
        return "Unproved: clear at these very angles, but not proved over the readout tolerances."
    return ""


def obstacle_words(obstacle: Obstacle) -> str:
    """Return which parts are how near, and how much is missing."""
    parts = f"{obstacle.machine_part.name} – {obstacle.couch_part.name}"
    if math.isnan(obstacle.clearance_mm):
        return f"{parts}: distance unknown"
    near, required = millimetres(obstacle.clearance_mm), millimetres(obstacle.required_mm, up=True)
    if obstacle.missing_mm <= 0.0:
        return f"{parts}: {near} mm, {required} mm required"
    missing = f"{millimetres(obstacle.missing_mm, up=True)} mm missing"
    if obstacle.clearance_mm == 0.0:
        return f"{parts}: contact, at least {missing}"
    return f"{parts}: {missing}, {near} of {required} mm"
