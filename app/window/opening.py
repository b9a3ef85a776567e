"""What is on the screen while the program is loaded: it imports nothing but Qt."""

from PySide6.QtCore import Qt
from PySide6.QtWidgets import QApplication, QLabel, QVBoxLayout, QWidget


class Opening(QWidget):
    """A plain sheet of the window's size that says what is coming."""

    def __init__(self) -> None:
        super().__init__()
        self.setWindowTitle("Wideberth")
        self.resize(1280, 800)
        name = QLabel("Wideberth")
        font = name.font()
        font.setPointSize(26)
        name.setFont(font)
        name.setAlignment(Qt.AlignmentFlag.AlignHCenter)
        word = QLabel("Loading …")
        word.setAlignment(Qt.AlignmentFlag.AlignHCenter)
        column = QVBoxLayout(self)
        column.addStretch(1)
        column.addWidget(name)
        column.addWidget(word)
        column.addStretch(1)

    def show_now(self) -> None:
        """Be on the screen before anything slow begins."""
        self.show()
        QApplication.processEvents()
