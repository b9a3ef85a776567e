"""What a first look sees: what this is for, a sample room in one click, and one's own files."""

from collections.abc import Sequence
from pathlib import Path

from PySide6.QtCore import Qt, Signal
from PySide6.QtWidgets import (
    QFrame,
    QGridLayout,
    QHBoxLayout,
    QLabel,
    QPushButton,
    QScrollArea,
    QSizePolicy,
    QVBoxLayout,
    QWidget,
)

from app.cautions import CAUTIONS
from app.samples import SampleRoom
from app.window.theme import Theme

_PREFIX = "Demonstration: "
_COLUMN_WIDTH = 330


class StartScreen(QScrollArea):
    """Signals: `open_wanted` (a path), `sample_wanted` (a path), `browse_wanted`, `new_wanted`, `cautions_wanted`."""

    open_wanted = Signal(object)
    sample_wanted = Signal(object)
    browse_wanted = Signal()
    new_wanted = Signal()
    cautions_wanted = Signal()

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.setWidgetResizable(True)
        self.setFrameShape(QFrame.Shape.NoFrame)
        self._rooms: tuple[SampleRoom, ...] = ()
        page = QWidget()
        self.setWidget(page)
        column = QVBoxLayout(page)
        column.setContentsMargins(48, 32, 48, 24)
        column.setSpacing(6)
        title = QLabel("Wideberth")
        title.setObjectName("title")
        purpose = QLabel(
            "Which gantry and couch angles stay clear of this patient, and by how much? "
            "Open a set-up, look at the room, take the permitted angles away."
        )
        purpose.setObjectName("purpose")
        purpose.setWordWrap(True)
        column.addWidget(title)
        column.addWidget(purpose)
        column.addSpacing(14)
        column.addLayout(self._actions())
        self._recent = QVBoxLayout()
        self._recent.setSpacing(2)
        column.addLayout(self._recent)
        column.addSpacing(16)
        heading = QLabel("Look around in a sample room")
        heading.setObjectName("heading")
        column.addWidget(heading)
        hint = QLabel("Invented rooms and patients: no machine that anybody built. The samples stay as they are.")
        hint.setObjectName("faint")
        hint.setWordWrap(True)
        column.addWidget(hint)
        column.addSpacing(6)
        self._grid = QGridLayout()
        self._grid.setSpacing(14)
        column.addLayout(self._grid)
        column.addStretch(1)
        cautions = _link("Before you rely on it …", CAUTIONS[0])
        cautions.clicked.connect(self.cautions_wanted)
        column.addWidget(cautions)

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        self.setStyleSheet(
            f"#title {{ font-size: 26pt; font-weight: 300; color: {theme.ink}; }}"
            f"#purpose {{ font-size: 12pt; color: {theme.ink}; }}"
            f"#heading {{ font-size: 12pt; font-weight: 600; }} #faint, #notes {{ color: {theme.faint}; }}"
            f"#card {{ background: {theme.panel}; border: 1px solid {theme.line}; border-radius: 8px; }}"
            "#room { font-weight: 600; }"
            f"#setup {{ text-align: left; border: 0; padding: 3px 0; color: {theme.accent}; }}"
            f"#setup:hover, #setup:focus {{ text-decoration: underline; }}"
            f"#first {{ padding: 7px 16px; background: {theme.accent}; color: {theme.on_accent}; border-radius: 5px; }}"
            f"#first:focus {{ border: 2px solid {theme.ink}; }}"
        )

    def show_rooms(self, rooms: Sequence[SampleRoom]) -> None:
        """Show the sample rooms as cards."""
        self._rooms = tuple(rooms)
        self._lay_out()

    def show_recent(self, paths: Sequence[Path]) -> None:
        """Show the set-ups that were open lately, the latest first."""
        _empty(self._recent)
        if not paths:
            return
        heading = QLabel("Lately open")
        heading.setObjectName("heading")
        self._recent.addSpacing(14)
        self._recent.addWidget(heading)
        for path in paths[:5]:
            button = _link(f"{path.name}   ({path.parent.name})", str(path))
            button.clicked.connect(lambda _=False, path=path: self.open_wanted.emit(path))
            self._recent.addWidget(button)

    def resizeEvent(self, event: object) -> None:
        """Lay the cards out in as many columns as there is room for."""
        super().resizeEvent(event)  # type: ignore[arg-type]
        self._lay_out()

    def _actions(self) -> QHBoxLayout:
        row = QHBoxLayout()
        row.setSpacing(10)
        browse = QPushButton("Open a set-up …")
        browse.setObjectName("first")
        browse.clicked.connect(self.browse_wanted)
        new = QPushButton("New set-up in a room …")
        new.clicked.connect(self.new_wanted)
        drop = QLabel("or drop a set-up file onto this window")
        drop.setObjectName("faint")
        row.addWidget(browse)
        row.addWidget(new)
        row.addWidget(drop)
        row.addStretch(1)
        return row

    def _lay_out(self) -> None:
        columns = max((self.viewport().width() - 80) // _COLUMN_WIDTH, 1)
        if self._grid.property("columns") == columns and self._grid.count() == len(self._rooms):
            return
        _empty(self._grid)
        self._grid.setProperty("columns", columns)
        for column in range(max(self._grid.columnCount(), columns)):
            self._grid.setColumnStretch(column, 1 if column < columns else 0)
        for place, room in enumerate(self._rooms):
            self._grid.addWidget(self._card(room), place // columns, place % columns)

    def _card(self, room: SampleRoom) -> QFrame:
        card = QFrame()
        card.setObjectName("card")
        # Columns share the width, whatever is written in them.
        card.setMinimumWidth(1)
        card.setSizePolicy(QSizePolicy.Policy.Ignored, QSizePolicy.Policy.Preferred)
        column = QVBoxLayout(card)
        column.setContentsMargins(16, 12, 16, 12)
        column.setSpacing(2)
        name = room.name.removeprefix(_PREFIX)
        title = QLabel(name[:1].upper() + name[1:])
        title.setObjectName("room")
        title.setWordWrap(True)
        notes = QLabel(room.notes)
        notes.setObjectName("notes")
        notes.setWordWrap(True)
        column.addWidget(title)
        column.addWidget(notes)
        column.addSpacing(6)
        for setup in room.setups:
            button = _link(setup.name, setup.notes)
            button.clicked.connect(lambda _=False, path=setup.path: self.sample_wanted.emit(path))
            column.addWidget(button)
        column.addStretch(1)
        return card


def _link(text: str, tip: str) -> QPushButton:
    button = QPushButton(text)
    button.setObjectName("setup")
    button.setFlat(True)
    button.setToolTip(tip)
    button.setCursor(Qt.CursorShape.PointingHandCursor)
    return button


def _empty(layout: QVBoxLayout | QGridLayout) -> None:
    while (item := layout.takeAt(0)) is not None:
        widget = item.widget()
        if widget is not None:
            widget.deleteLater()
