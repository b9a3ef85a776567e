"""The switch between the two ways of cutting the sphere of directions in two."""

from typing import Final

from PySide6.QtCore import QRect, Signal
from PySide6.QtWidgets import QHBoxLayout, QToolButton, QWidget

from app.window.theme import LIGHT, Theme
from geometry.directions.discs import Pairing

_LABELS: Final = {Pairing.FRONT_AND_BACK: "Front and back", Pairing.HEAD_AND_FEET: "Head and feet"}


class PairingSwitch(QWidget):
    """Two buttons, one of them down; `chosen` carries the `Pairing` of one that was pressed."""

    chosen = Signal(object)

    def __init__(self, parent: QWidget) -> None:
        super().__init__(parent)
        row = QHBoxLayout(self)
        row.setContentsMargins(0, 0, 0, 0)
        row.setSpacing(2)
        self._buttons: dict[Pairing, QToolButton] = {}
        for pairing in Pairing:
            button = QToolButton(self)
            button.setText(_LABELS[pairing])
            button.setToolTip(f"Show the directions {' and '.join(half.name for half in pairing.hemispheres)}")
            button.setCheckable(True)
            button.setAutoExclusive(True)
            button.clicked.connect(lambda _checked, chosen=pairing: self.chosen.emit(chosen))
            row.addWidget(button)
            self._buttons[pairing] = button
        self._buttons[Pairing.FRONT_AND_BACK].setChecked(True)

        self.set_theme(LIGHT)

    def set_theme(self, theme: Theme) -> None:
        """Show in the theme's colours which button is down."""
        self.setStyleSheet(
            f"QToolButton {{ color: {theme.ink}; background: {theme.panel}; border: 1px solid {theme.line};"
            " border-radius: 3px; padding: 3px 8px; }"
            f"QToolButton:checked {{ color: {theme.on_accent}; background: {theme.accent};"
            f" border-color: {theme.accent}; }}"
            f"QToolButton:hover:!checked, QToolButton:focus {{ border-color: {theme.ink}; }}"
        )

    def place(self, box: QRect) -> None:
        """Take up a box; at once, for it may be painted before it is shown."""
        self.setGeometry(box)
        row = self.layout()
        if row is not None:
            row.activate()

    def show_pairing(self, pairing: Pairing) -> None:
        """Press the button of a pairing; gives no signal."""
        self._buttons[pairing].setChecked(True)
