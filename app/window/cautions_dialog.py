"""The cautions, shown at the first start and always at hand."""

from PySide6.QtWidgets import QDialog, QDialogButtonBox, QLabel, QVBoxLayout, QWidget

from app.cautions import CAUTIONS


class CautionsDialog(QDialog):
    """What to know before anything here is relied on."""

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.setWindowTitle("Before you rely on it")
        self.setMinimumWidth(520)
        column = QVBoxLayout(self)
        column.setContentsMargins(24, 20, 24, 16)
        column.setSpacing(10)
        for caution in CAUTIONS:
            line = QLabel(f"•  {caution}")
            line.setWordWrap(True)
            column.addWidget(line)
        buttons = QDialogButtonBox(QDialogButtonBox.StandardButton.Ok)
        buttons.button(QDialogButtonBox.StandardButton.Ok).setText("Understood")
        buttons.accepted.connect(self.accept)
        column.addSpacing(6)
        column.addWidget(buttons)
