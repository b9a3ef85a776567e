"""A number field for an angle: shown in [0, 360) as IEC 61217 has it, held unwrapped within a travel."""

from PySide6.QtCore import Signal
from PySide6.QtGui import QValidator
from PySide6.QtWidgets import QDoubleSpinBox, QWidget

from geometry.frames import normalised_deg, unwrapped_deg


class AngleBox(QDoubleSpinBox):
    """An angle that a person types or steps. `angle_wanted` comes for theirs alone, not for `show_angle`.

    What is typed is any angle; of the unwrapped ones that the travel holds the nearest to the present one is taken.
    """

    angle_wanted = Signal(float)

    def __init__(self, name: str, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.setDecimals(2)
        self.setSuffix(" °")
        self.setSingleStep(1.0)
        self.setRange(-180.0, 180.0)
        self.setKeyboardTracking(False)
        self.setAccelerated(True)
        self.setAccessibleName(name)
        self.valueChanged.connect(self.angle_wanted)

    def set_travel(self, low_deg: float, high_deg: float) -> None:
        """Take over the travel of the axis, unwrapped."""
        self.blockSignals(True)
        self.setRange(low_deg, high_deg)
        self.setEnabled(high_deg > low_deg)
        self.blockSignals(False)

    def show_angle(self, angle_deg: float) -> None:
        """Show an unwrapped angle, quietly."""
        if self.hasFocus() and self.lineEdit().isModified():
            return
        self.blockSignals(True)
        self.setValue(angle_deg)
        self.blockSignals(False)

    def textFromValue(self, value: float) -> str:
        """Return an angle as people read it."""
        text = f"{_rounded(value):.2f}"
        return text.removesuffix("0")

    def valueFromText(self, text: str) -> float:
        """Return the angle within the travel that a text means."""
        wanted = _number(text)
        if wanted is None:
            return self.value()
        branches = unwrapped_deg(wanted, (self.minimum(), self.maximum()))
        if branches:
            return min(branches, key=lambda angle: abs(angle - self.value()))
        # Beyond the travel: the end that is nearer.
        ends = (self.minimum(), self.maximum())
        return min(ends, key=lambda end: abs((end - wanted + 180.0) % 360.0 - 180.0))

    def validate(self, text: str, place: int) -> tuple[QValidator.State, str, int]:
        """Accept numbers, and what could become one."""
        bare = text.replace("°", "").strip()
        if _number(text) is not None:
            return QValidator.State.Acceptable, text, place
        return (QValidator.State.Intermediate if bare in {"", "-", "+", "."} else QValidator.State.Invalid), text, place

    def stepBy(self, steps: int) -> None:
        """Step by whole degrees, or as finely as `singleStep` says."""
        self.setValue(min(max(self.value() + steps * self.singleStep(), self.minimum()), self.maximum()))


def _number(text: str) -> float | None:
    try:
        value = float(text.replace("°", "").replace(",", ".").strip())
    except ValueError:
        return None
    return value if abs(value) <= 1e6 else None


def _rounded(angle_deg: float) -> float:
    """Return an angle in [0, 360), to a hundredth, so that 359.996 does not read 360.0."""
    return round(normalised_deg(angle_deg), 2) % 360.0
