"""What is known of the chosen field or move, and what can be done about it."""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

from PySide6.QtCore import QSize, Qt, Signal
from PySide6.QtWidgets import (
    QComboBox,
    QFrame,
    QHBoxLayout,
    QLabel,
    QPushButton,
    QScrollArea,
    QSizePolicy,
    QVBoxLayout,
    QWidget,
)

from app.files.readings import OwnScales, clearance_text
from app.plan.dry_run_words import angle_text, turn_of
from app.plan.fitting import NOTHING
from app.plan.gaps import GapPlace, GapRow
from app.window.fields.gaps import GapsTable
from app.window.fields.words import (
    STATE_WORDS,
    missing_words,
    move_words,
    place_words,
    seconds_words,
    sentence,
    step_words,
)
from app.window.theme import Theme
from geometry.states import State
from geometry.treatment.data import FieldCheck, MoveCheck

_AS_SETUP: Final = "as the set-up has it"


@dataclass(frozen=True)
class _Choice:
    """What may be said to be fitted: the words for people, and what is told; see `app.plan.check.Choices`."""

    shown: str
    said: str


class FieldDetail(QScrollArea):
    """Words, buttons and measured gaps of one field. Emits what is asked for; the owner knows for which field.

    `tightest_wanted`, `remedies_wanted`: the buttons. `fit_said` (accessory, "none", or "" for what the set-up has).
    """

    tightest_wanted = Signal()
    remedies_wanted = Signal()
    fit_said = Signal(str)

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.title, self.text, self.notes, self.plan_notes = (_label() for _ in range(4))
        self.title.setObjectName("title")
        self.notes.setObjectName("notes")
        self.plan_notes.setObjectName("notes")
        self.go = QPushButton("Go to the tightest place")
        self.go.clicked.connect(self.tightest_wanted)
        self.remedies = QPushButton("What stands in the way?")
        self.remedies.setToolTip("Goes to the place, and looks for changes that would help there.")
        self.remedies.clicked.connect(self.remedies_wanted)
        self.fit = QComboBox()
        self.fit.setAccessibleName("Fitted for this field")
        self.fit.setSizeAdjustPolicy(QComboBox.SizeAdjustPolicy.AdjustToMinimumContentsLengthWithIcon)
        self.fit.setMinimumContentsLength(10)
        self.fit.activated.connect(lambda index: self.fit_said.emit(self.fit.itemData(index)))
        self.fit_row = QWidget()
        self.gaps = GapsTable()
        self.gaps_title = _label()
        self.gaps_title.setObjectName("title")
        self.gaps_title.setText("Measured gaps")
        self._lay_out()
        self.show_nothing(())

    def _lay_out(self) -> None:
        label = QLabel("Fitted")
        label.setBuddy(self.fit)
        line = QHBoxLayout(self.fit_row)
        line.setContentsMargins(0, 0, 0, 0)
        line.addWidget(label)
        line.addWidget(self.fit, 1)
        content = QWidget()
        content.setObjectName("detail")
        column = QVBoxLayout(content)
        column.setContentsMargins(10, 8, 10, 10)
        column.setSpacing(6)
        buttons = QHBoxLayout()
        buttons.setSpacing(5)
        buttons.addWidget(self.go)
        buttons.addWidget(self.remedies)
        for widget in (self.title, self.text, self.notes, self.fit_row):
            column.addWidget(widget)
        column.addLayout(buttons)
        for widget in (self.gaps_title, self.gaps, self.plan_notes):
            column.addWidget(widget)
        column.addStretch(1)
        self.setWidget(content)
        self.setWidgetResizable(True)
        self.setFrameShape(QFrame.Shape.NoFrame)
        self.setHorizontalScrollBarPolicy(Qt.ScrollBarPolicy.ScrollBarAlwaysOff)
        self.setMinimumHeight(90)

    def minimumSizeHint(self) -> QSize:
        """Return a size that leaves the width to the panel."""
        return QSize(200, 90)

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        self.gaps.set_theme(theme)

    def show_nothing(self, plan_notes: Sequence[str]) -> None:
        """Show what concerns the whole plan alone."""
        self._show("", "", (), plan_notes)

    def show_field(self, number: int, check: FieldCheck, scales: OwnScales, plan_notes: Sequence[str]) -> None:
        """Show a field."""
        title = f"{number}  {check.field.name}: {STATE_WORDS[check.state].lower()}"
        self._show(title, _field_text(check, scales), check.notes, plan_notes)
        known = check.place is not None
        self.go.setVisible(known)
        refused = check.state is not State.PERMITTED
        self.go.setText("Go to the place" if refused else "Go to the tightest place")
        self.remedies.setVisible(known and refused)
        self._show_fit(check)

    def show_move(self, move: MoveCheck, scales: OwnScales, plan_notes: Sequence[str]) -> None:
        """Show a move."""
        title = f"Move from field {move.before + 1} to {move.after + 1}: {STATE_WORDS[move.state].lower()}"
        steps = [f"{n}. {words}" for n, words in enumerate(step_words(move, scales), start=1)]
        found = move_words(move)
        text = "\n".join([*steps, *([found] if found else [])]) or "Nothing moves"
        self._show(title, text, (), plan_notes)

    def show_gaps(self, places: Sequence[GapPlace], rows: Sequence[GapRow]) -> None:
        """Show the gaps of the field; nothing where there are none to measure."""
        self.gaps.show_gaps(places, rows)
        for widget in (self.gaps_title, self.gaps):
            widget.setVisible(bool(places or rows))

    def _show(self, title: str, text: str, notes: Sequence[str], plan_notes: Sequence[str]) -> None:
        self.title.setText(title)
        self.text.setText(text)
        self.notes.setText("\n".join(f"• {sentence(note)}" for note in notes))
        of_plan = [f"• {sentence(note)}" for note in plan_notes]
        self.plan_notes.setText("\n".join(["Of the whole plan:", *of_plan]) if of_plan else "")
        for label in (self.title, self.text, self.notes, self.plan_notes):
            label.setVisible(bool(label.text()))
        for widget in (self.go, self.remedies, self.fit_row, self.gaps, self.gaps_title):
            widget.hide()

    def _show_fit(self, check: FieldCheck) -> None:
        """Offer the room's accessories where the plan names one, or leaves a doubt about it."""
        setup = check.scene.setup
        asked = bool(check.field.applicator or check.field.fit_doubts)
        self.fit_row.setVisible(asked and bool(setup.room.accessories))
        if self.fit_row.isHidden():
            return
        choices = [_Choice(_AS_SETUP, ""), _Choice("nothing", NOTHING)]
        choices += [_Choice(one.name, one.name) for one in setup.room.accessories]
        self.fit.clear()
        for choice in choices:
            self.fit.addItem(choice.shown, choice.said)
        doubtful = bool(check.verdict.reason)
        held = setup.fitted[0] if len(setup.fitted) == 1 else NOTHING if not setup.fitted else ""
        self.fit.setCurrentIndex(-1 if doubtful else self.fit.findData(held))
        self.fit.setPlaceholderText("say which is fitted")


def _label() -> QLabel:
    label = QLabel()
    label.setWordWrap(True)
    label.setTextFormat(Qt.TextFormat.PlainText)
    label.setTextInteractionFlags(Qt.TextInteractionFlag.TextSelectableByMouse)
    label.setSizePolicy(QSizePolicy.Policy.Ignored, QSizePolicy.Policy.Minimum)
    return label


def _field_text(check: FieldCheck, scales: OwnScales) -> str:
    lines = []
    for k, (name, own) in enumerate((("gantry", scales.gantry), ("couch", scales.couch))):
        turn = turn_of([point[k] for point in check.points_deg], "gantry" if k == 0 else "couch", own)
        sense = f" {turn.sense}" if turn.sense else ""
        reads = f", reads {turn.own}" if turn.own is not None else ""
        lines.append(f"{name.capitalize()} {turn.iec}{sense}{reads}")
    collimator = check.scene.setup.collimator_deg
    lines.append(f"Collimator {'any angle' if collimator is None else angle_text(collimator)}")
    if check.verdict.reason:
        lines.append(sentence(check.verdict.reason))
    if check.state is State.PERMITTED:
        bound = clearance_text(check.verdict.least_clearance_mm)
        lines.append(sentence(f"proved, tolerances included: at least {bound}"))
    place = place_words(check)
    if place:
        lines.append(sentence(f"tightest: {place}" if check.state is State.PERMITTED else place))
    if not math.isnan(check.shortfall_mm) and check.state is not State.CONTACT:
        within = " within the tolerances" if check.within is not None else ""
        lines.append(sentence(f"{missing_words(check.shortfall_mm)}{within}"))
    if check.seconds > 0.0:
        lines.append(f"At least {seconds_words(check.seconds)} min at the machine's speeds")
    return "\n".join(lines)
