"""The plan in the window: its fields and moves with their verdicts, playing them, and gaps measured in the room."""

from collections.abc import Sequence

from PySide6.QtCore import QModelIndex, Qt, Signal
from PySide6.QtWidgets import (
    QCheckBox,
    QComboBox,
    QHBoxLayout,
    QLabel,
    QPushButton,
    QSplitter,
    QToolButton,
    QVBoxLayout,
    QWidget,
)

from app.files.readings import own_scales
from app.files.wording import printable
from app.plan.gaps import GapPlace, GapRow
from app.window.fields.detail import FieldDetail
from app.window.fields.list import FieldsList
from app.window.fields.play import PlayBar
from app.window.fields.words import RowWords, better_words, rows_of, summary_words
from app.window.setup.rows import tint
from app.window.theme import LIGHT, Theme
from geometry.states import State
from geometry.treatment.data import CheckReport, FieldCheck, MoveCheck

_EMPTY = (
    "Open a treatment plan (RT Plan or RT Ion Plan) or a list of fields (.csv), or drop it onto the window: every "
    "field and every move between fields is held against this set-up."
)
_MEASURED_LESS = "A gap was measured smaller than it should be"
_STALE = "The set-up has changed: these verdicts are those of before."
_TABLES = (
    ("Table of plan and of set-up, each", "both"),
    ("Table where the plan has it", "plan"),
    ("Table where the set-up has it", "setup"),
)


class FieldsPanel(QWidget):
    """Shows a report and asks for things; computes nothing.

    `open_wanted`, `check_wanted`, `sheet_wanted`: the buttons. `field_chosen` (FieldCheck or None), `move_chosen`
    (MoveCheck or None). `pose_wanted` (gantry, couch, unwrapped) and `scene_pose_wanted` (Scene, gantry, couch): go to
    a place of the chosen field or move. `remedies_wanted` (FieldCheck). `fit_said` (place of the field in the plan,
    accessory; "none" for nothing, "" for what the set-up has). `table_said` ("both", "plan", "setup").
    `order_wanted` (True: the better one). `gap_typed`, `gap_removed` (MeasuredGap). Signals of playing are `play`'s.
    """

    open_wanted = Signal()
    check_wanted = Signal()
    sheet_wanted = Signal()
    field_chosen = Signal(object)
    move_chosen = Signal(object)
    pose_wanted = Signal(float, float)
    scene_pose_wanted = Signal(object, float, float)
    remedies_wanted = Signal(object)
    fit_said = Signal(int, str)
    table_said = Signal(str)
    order_wanted = Signal(bool)
    gap_typed = Signal(object)
    gap_removed = Signal(object)

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._report: CheckReport | None = None
        self._places: tuple[GapPlace, ...] = ()
        self._gaps: tuple[GapRow, ...] = ()
        self.open = QPushButton("Open a plan …")
        self.again = QToolButton()
        self.again.setText("Check again")
        self.again.setToolTip("Reads the plan's file again and checks it against the set-up as it is now.")
        self.sheet = QPushButton("Dry-run sheet …")
        self.sheet.setToolTip("Writes the sheet that goes to the machine for the dry run.")
        self.name, self.summary, self.message = QLabel(), QLabel(), QLabel()
        self.name.setObjectName("name")
        self.summary.setObjectName("summary")
        self.message.setObjectName("message")
        self.better = QCheckBox()
        self.table = QComboBox()
        self.table.setAccessibleName("Whose table positions count")
        self.table.setToolTip("Whose table positions count where plan and set-up differ; both: each field with both.")
        self.list = FieldsList()
        self.detail = FieldDetail()
        self.play = PlayBar()
        self._lay_out()
        self._connect()
        self.set_theme(LIGHT)
        self.show_report(None)

    def _lay_out(self) -> None:
        head = QVBoxLayout()
        head.setContentsMargins(10, 10, 10, 6)
        head.setSpacing(5)
        buttons = QHBoxLayout()
        buttons.setSpacing(5)
        for button in (self.open, self.sheet):
            buttons.addWidget(button)
        head.addLayout(buttons)
        for label in (self.name, self.summary, self.message):
            label.setWordWrap(True)
            label.setTextFormat(Qt.TextFormat.PlainText)
        plan = QHBoxLayout()
        plan.addWidget(self.name, 1)
        plan.addWidget(self.again, 0, Qt.AlignmentFlag.AlignTop)
        head.addLayout(plan)
        head.addWidget(self.summary)
        head.addWidget(self.message)
        for text, word in _TABLES:
            self.table.addItem(text, word)
        head.addWidget(self.better)
        head.addWidget(self.table)
        self.middle = QSplitter(Qt.Orientation.Vertical)
        self.middle.addWidget(self.list)
        self.middle.addWidget(self.detail)
        self.middle.setChildrenCollapsible(False)
        self.middle.setStretchFactor(0, 3)
        self.middle.setStretchFactor(1, 2)
        self.middle.setSizes([340, 230])
        column = QVBoxLayout(self)
        column.setContentsMargins(0, 0, 0, 0)
        column.setSpacing(0)
        column.addLayout(head)
        column.addWidget(self.middle, 1)
        column.addWidget(self.play)
        # What takes the room that the list leaves while there is none.
        self._below = QWidget()
        column.addWidget(self._below, 1)
        self.setMinimumWidth(300)

    def _connect(self) -> None:
        self.open.clicked.connect(self.open_wanted)
        self.again.clicked.connect(self.check_wanted)
        self.sheet.clicked.connect(self.sheet_wanted)
        self.better.toggled.connect(self._on_order)
        self.table.activated.connect(lambda index: self.table_said.emit(self.table.itemData(index)))
        self.list.row_chosen.connect(self._on_row)
        self.list.row_entered.connect(lambda _: self._go())
        self.detail.tightest_wanted.connect(self._go)
        self.detail.remedies_wanted.connect(self._on_remedies)
        self.detail.fit_said.connect(self._on_fit)
        self.detail.gaps.gap_typed.connect(self.gap_typed)
        self.detail.gaps.gap_removed.connect(self.gap_removed)

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        self.setStyleSheet(
            f"QLabel, QCheckBox {{ color: {theme.ink}; }} #name, #now, #notes {{ color: {theme.faint}; }}"
            f" #summary, #title {{ font-weight: 600; }} #message {{ color: {theme.marked}; }}"
            f" #detail {{ background: {theme.panel}; }}"
        )
        tint(self.better, theme)
        for widget in (self.list, self.detail, self.play):
            widget.set_theme(theme)

    def show_report(self, report: CheckReport | None, name: str = "") -> None:
        """Show a report on the plan of that file name, None for no plan. What was chosen stays chosen, quietly."""
        self._report = report
        self.list.set_stale(stale=False)
        known = report is not None
        for widget in (self.middle, self.play):
            widget.setVisible(known)
        self._below.setVisible(not known)
        self.again.setVisible(known)
        self.sheet.setEnabled(known)
        self.tell("")
        self.name.setText(name)
        self.name.setVisible(bool(name))
        self.summary.setText(summary_words(report) if report is not None else _EMPTY)
        self.summary.setObjectName("summary" if known else "name")
        self.summary.style().polish(self.summary)
        better = report.better if report is not None else None
        self.better.setVisible(better is not None)
        if report is not None and better is not None:
            self.better.setText(better_words(better, report))
            order = ", ".join(str(place + 1) for place in better.fields)
            self.better.setToolTip(f"Shows and plays the fields in the order {order}.")
        else:
            self.better.blockSignals(True)
            self.better.setChecked(False)
            self.better.blockSignals(False)
        fields = report.fields if report is not None else ()
        self.table.setVisible(any(None not in check.field.table_mm for check in fields))
        self._show_rows()

    def show_gaps(self, places: Sequence[GapPlace], rows: Sequence[GapRow]) -> None:
        """Show where to measure and what was measured, of all fields."""
        self._places, self._gaps = tuple(places), tuple(rows)
        flagged = list(dict.fromkeys(row.gap.field for row in rows if row.is_flagged))
        # Verdicts are of the model; where somebody measured less than it says, that comes first.
        if flagged:
            self.tell(f"{_MEASURED_LESS}: {', '.join(flagged)}. Find out why before anything is treated.")
        elif self.message.text().startswith(_MEASURED_LESS):
            self.tell("")
        self._show_detail()

    def set_stale(self, stale: bool) -> None:
        """Mark the verdicts as those of the set-up before; there is no sheet of them."""
        self.list.set_stale(stale)
        self.sheet.setEnabled(self._report is not None and not stale)
        self.tell(_STALE if stale else "")

    def show_table(self, table: str) -> None:
        """Show whose table positions count, quietly."""
        self.table.setCurrentIndex(self.table.findData(table))

    def tell(self, text: str) -> None:
        """Say what stands against the check as a whole, "" for nothing."""
        self.message.setText(text)
        self.message.setVisible(bool(text))

    def show_running(self, field: int | None, move: int | None) -> None:
        """Mark the field or move that is being played."""
        self.list.set_running("field" if field is not None else "move", field if field is not None else move)

    def chosen_field(self) -> int | None:
        """Return the place in the report of the field that is chosen."""
        row = self.list.chosen()
        return row.place if row is not None and row.kind == "field" and self._report is not None else None

    def choose_field(self, place: int | None) -> None:
        """Choose a field by its place in the report, or none."""
        if place is None:
            self.list.setCurrentIndex(QModelIndex())
        else:
            self.list.choose("field", place)

    def commit(self) -> None:
        """Ask for what was typed and not asked for yet."""
        self.detail.gaps.commit()

    def _check(self) -> FieldCheck | None:
        place = self.chosen_field()
        return None if place is None or self._report is None else self._report.fields[place]

    def _move(self) -> MoveCheck | None:
        row, report = self.list.chosen(), self._report
        if row is None or row.kind != "move" or report is None:
            return None
        moves = report.better.moves if self.better.isChecked() and report.better is not None else report.moves
        return moves[row.place]

    def _show_rows(self) -> None:
        report = self._report
        self.list.show_rows(() if report is None else rows_of(report, better=self.better.isChecked()))
        self._show_detail()

    def _show_detail(self) -> None:
        report, check, move = self._report, self._check(), self._move()
        if report is None or (check is None and move is None):
            self.detail.show_nothing(() if report is None else report.notes)
            return
        scales = own_scales(report.setup.room)
        if move is not None:
            self.detail.show_move(move, scales, report.notes)
        if check is not None:
            self.detail.show_field((self.chosen_field() or 0) + 1, check, scales, report.notes)
            name = printable(check.field.name)
            self.detail.show_gaps(
                [place for place in self._places if printable(place.field) == name],
                [row for row in self._gaps if printable(row.gap.field) == name],
            )

    def _on_row(self, _: RowWords | None) -> None:
        self._show_detail()
        self.field_chosen.emit(self._check())
        self.move_chosen.emit(self._move())

    def _on_order(self, better: bool) -> None:
        self._show_rows()
        self.order_wanted.emit(better)

    def _go(self) -> None:
        """Ask for the place of what is chosen that has to be looked at."""
        check, move = self._check(), self._move()
        if check is not None and check.state is not State.NO_TRAVEL:
            at = check.place
            angles = (at.gantry_deg, at.couch_deg) if at is not None else check.points_deg[0]
            self._ask_for(check.scene, angles)
        elif move is not None:
            for step in move.steps:
                found = step.verdict or step.table
                if step.state is not State.PERMITTED or step is move.steps[-1]:
                    at = found.first_short if found is not None else None
                    angles = (at.gantry_deg, at.couch_deg) if at is not None else step.points_deg[-1]
                    self._ask_for(step.scene, angles)
                    return

    def _ask_for(self, scene: object, angles: tuple[float, float]) -> None:
        self.scene_pose_wanted.emit(scene, *angles)
        self.pose_wanted.emit(*angles)

    def _on_remedies(self) -> None:
        check = self._check()
        if check is not None:
            self._go()
            self.remedies_wanted.emit(check)

    def _on_fit(self, accessory: str) -> None:
        place = self.chosen_field()
        if place is not None:
            self.fit_said.emit(place, accessory)
