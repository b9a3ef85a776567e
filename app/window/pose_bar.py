"""The pose that is looked at, in words and as fields to type into."""

from enum import Enum

from PySide6.QtCore import Qt, Signal
from PySide6.QtWidgets import QHBoxLayout, QLabel, QSizePolicy, QWidget

from app.files.readings import clearance_text, required_text
from app.window.angle_box import AngleBox
from app.window.theme import Theme
from geometry.assess import Pose
from geometry.machine import Readout, Room
from geometry.states import State

# What a state means, said at the pose; more than the bare word where that could be misread.
_SAID = {
    State.NO_TRAVEL: "No travel",
    State.CONTACT: "Contact",
    State.SHORT: "Short of what is required",
    State.UNPROVED: "Unproved: not permitted",
}


class Proof(Enum):
    """What is proved of the pose: all of it, nothing yet, or the field that it belongs to and not the pose alone."""

    DONE = "done"
    UNDER_WAY = "under way"
    OF_FIELD = "of the field"


_AS_FIELD = "as the chosen field has it, not proved: "
_PERMITTED = {
    Proof.DONE: "Permitted",
    Proof.UNDER_WAY: "Proof under way",
    Proof.OF_FIELD: "Enough at this pose alone",
}


class PoseBar(QWidget):
    """Gantry and couch angle, clearance, state and the two parts, always in sight. `pose_wanted` (gantry, couch)."""

    pose_wanted = Signal(float, float)

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.gantry = AngleBox("Gantry angle, IEC 61217")
        self.couch = AngleBox("Couch angle, IEC 61217")
        self._gantry_readout, self._couch_readout = QLabel(), QLabel()
        self._readouts = Readout(), Readout()
        self.state = QLabel()
        self.detail = QLabel()
        self.detail.setSizePolicy(QSizePolicy.Policy.Ignored, QSizePolicy.Policy.Preferred)
        self.detail.setTextInteractionFlags(Qt.TextInteractionFlag.TextSelectableByMouse)
        row = QHBoxLayout(self)
        row.setContentsMargins(10, 6, 10, 6)
        row.setSpacing(8)
        for text, box, readout in (
            ("&Gantry", self.gantry, self._gantry_readout),
            ("&Couch", self.couch, self._couch_readout),
        ):
            label = QLabel(text)
            label.setBuddy(box)
            box.setToolTip("IEC 61217. Type any angle; arrow keys step by 1°.")
            box.setMinimumWidth(92)
            box.angle_wanted.connect(lambda _: self._ask())
            row.addWidget(label)
            row.addWidget(box)
            row.addWidget(readout)
        row.addSpacing(8)
        row.addWidget(self.state)
        row.addWidget(self.detail, 1)

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        for label in (self.detail, self._gantry_readout, self._couch_readout):
            label.setStyleSheet(f"color: {theme.faint};")
        self.state.setStyleSheet("font-weight: 600;")

    def show_room(self, room: Room) -> None:
        """Take over travel and readouts of a room."""
        self.gantry.set_travel(room.gantry.low, room.gantry.high)
        self.couch.set_travel(room.couch.turntable.low, room.couch.turntable.high)
        self._readouts = room.gantry.readout, room.couch.turntable.readout

    def show_angles(self, gantry_deg: float, couch_deg: float) -> None:
        """Show the angles, unwrapped, before anything is known of them."""
        self.gantry.show_angle(gantry_deg)
        self.couch.show_angle(couch_deg)
        for label, readout, angle in (
            (self._gantry_readout, self._readouts[0], gantry_deg),
            (self._couch_readout, self._readouts[1], couch_deg),
        ):
            label.setVisible(not readout.is_iec())
            label.setText(f"reads {readout.shown_deg(angle):.1f} °")

    def _ask(self) -> None:
        self.pose_wanted.emit(self.gantry.value(), self.couch.value())

    def show_pose(self, pose: Pose | None, proof: Proof) -> None:
        """Show what is known; without the proof a pose that would be permitted says what it waits for."""
        if pose is None:
            self.state.setText("")
            self.detail.setText("")
            return
        self.state.setText(_SAID[pose.state] if pose.state is not State.PERMITTED else _PERMITTED[proof])
        self.detail.setText((_AS_FIELD if proof is Proof.OF_FIELD else "") + _detail(pose))
        self.detail.setToolTip(self.detail.text())


def _detail(pose: Pose) -> str:
    if pose.scene.no_travel:
        return "; ".join(pose.scene.no_travel)
    if pose.machine_part is None or pose.couch_part is None:
        return "no distance is known" if pose.clearance_mm != float("inf") else "nothing to keep clear of"
    parts = f"{pose.machine_part.label} and {pose.couch_part.label}"
    if pose.state is State.CONTACT:
        return f"between {parts}"
    required = pose.scene.required_mm(pose.machine_part, pose.couch_part)
    return f"{clearance_text(pose.clearance_mm)} between {parts}, {required_text(required)} required"
