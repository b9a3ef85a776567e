"""What must not be overlooked about a room or a set-up, above everything."""

from PySide6.QtCore import Signal
from PySide6.QtWidgets import QFrame, QHBoxLayout, QLabel, QPushButton, QWidget

from app.window.theme import Theme
from geometry.setup import Setup


class Banner(QFrame):
    """One line in words with a marked edge; hidden where there is nothing to say. `cautions_wanted`: a click."""

    cautions_wanted = Signal()

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.setObjectName("banner")
        self._text = QLabel()
        self._text.setWordWrap(True)
        cautions = QPushButton("Before you rely on it …")
        cautions.setFlat(True)
        cautions.clicked.connect(self.cautions_wanted)
        row = QHBoxLayout(self)
        row.setContentsMargins(12, 3, 8, 3)
        row.addWidget(self._text, 1)
        row.addWidget(cautions)

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        self.setStyleSheet(
            f"#banner {{ background: {theme.panel}; border-left: 6px solid {theme.marked};"
            f" border-bottom: 1px solid {theme.line}; }} #banner QPushButton {{ color: {theme.accent}; border: 0;"
            " padding: 2px 6px; }"
        )

    def show_setup(self, setup: Setup | None) -> None:
        """Tell what kind of room and set-up this is."""
        text = banner_text(setup) if setup is not None else ""
        self._text.setText(text)
        self.setVisible(bool(text))


def banner_text(setup: Setup) -> str:
    """Return what has to be said of a set-up's room; empty for a surveyed one."""
    room = setup.room
    if room.demonstration or setup.demonstration:
        what = " and ".join(
            name for name, flag in (("room", room.demonstration), ("patient", setup.demonstration)) if flag
        )
        return f"Demonstration: invented {what}. Nothing here is true of any machine or person."
    if room.survey is None:
        return "Unsurveyed: nobody has measured and accepted this room. Its angles count for nothing yet."
    return ""
