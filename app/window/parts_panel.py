"""Which parts of the room are drawn, and how: shown, see-through or hidden."""

from typing import Final

from PySide6.QtCore import Qt, Signal
from PySide6.QtWidgets import QLabel, QPushButton, QTreeWidget, QTreeWidgetItem, QVBoxLayout, QWidget

from app.window.theme import Theme
from geometry.scene import Scene, ScenePart, Side

_SIDES: Final = {
    Side.GANTRY: "Gantry and what it carries",
    Side.COUCH: "Couch, patient, devices",
    Side.ROOM: "What stands in the room",
}
_WORDS: Final = ("shown", "see-through", "hidden")


class PartsPanel(QWidget):
    """A list of parts; a click, or the space bar, goes from shown over see-through to hidden.

    `visibility_changed` holds a word for each part's label. What is hidden is computed all the same.
    """

    visibility_changed = Signal(object)

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._labels: tuple[str, ...] = ()
        hint = QLabel("A click goes from shown to see-through to hidden. Hidden parts count all the same.")
        hint.setWordWrap(True)
        hint.setObjectName("hint")
        self.tree = QTreeWidget()
        self.tree.setColumnCount(2)
        self.tree.setHeaderHidden(True)
        self.tree.setRootIsDecorated(True)
        self.tree.setAccessibleName("Parts of the room")
        self.tree.header().setStretchLastSection(False)
        self.tree.header().setSectionResizeMode(0, self.tree.header().ResizeMode.Stretch)
        self.tree.header().setSectionResizeMode(1, self.tree.header().ResizeMode.ResizeToContents)
        self.tree.itemClicked.connect(self._step)
        self.tree.itemActivated.connect(self._step)
        everything = QPushButton("Show everything")
        everything.clicked.connect(self.show_everything)
        column = QVBoxLayout(self)
        column.setContentsMargins(10, 10, 10, 10)
        column.addWidget(hint)
        column.addWidget(self.tree, 1)
        column.addWidget(everything)

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        self.setStyleSheet(f"#hint {{ color: {theme.faint}; }}")

    def show_scene(self, scene: Scene) -> None:
        """List the parts of a scene; those that were there before stay as they are drawn."""
        labels = tuple(part.label for part in scene.parts)
        if labels == self._labels:
            return
        before = self.visibility()
        self._labels = labels
        self.tree.clear()
        for side, name in _SIDES.items():
            self._add_side(name, [part for part in scene.parts if part.side is side], before)
        self.tree.expandAll()
        self.visibility_changed.emit(self.visibility())

    def visibility(self) -> dict[str, str]:
        """Return the word for each part's label."""
        return {item.data(0, Qt.ItemDataRole.UserRole): item.text(1) for item in self._items()}

    def show_everything(self) -> None:
        """Draw every part again."""
        for item in self._items():
            item.setText(1, _WORDS[0])
        self.visibility_changed.emit(self.visibility())

    def _add_side(self, name: str, parts: list[ScenePart], before: dict[str, str]) -> None:
        if not parts:
            return
        top = QTreeWidgetItem([name, ""])
        self.tree.addTopLevelItem(top)
        for part in parts:
            item = QTreeWidgetItem([part.name, before.get(part.label, _WORDS[0])])
            item.setData(0, Qt.ItemDataRole.UserRole, part.label)
            item.setToolTip(0, part.label)
            top.addChild(item)

    def _items(self) -> list[QTreeWidgetItem]:
        tops = [self.tree.topLevelItem(k) for k in range(self.tree.topLevelItemCount())]
        return [item for top in tops if top is not None for item in _children(top)]

    def _step(self, item: QTreeWidgetItem) -> None:
        """Take a part, or all of a side, one step on."""
        parts = [item] if item.parent() is not None else _children(item)
        word = _WORDS[(_WORDS.index(parts[0].text(1)) + 1) % len(_WORDS)]
        for part in parts:
            part.setText(1, word)
        self.visibility_changed.emit(self.visibility())


def _children(item: QTreeWidgetItem) -> list[QTreeWidgetItem]:
    children = [item.child(k) for k in range(item.childCount())]
    return [child for child in children if child is not None]
