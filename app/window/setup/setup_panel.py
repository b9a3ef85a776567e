"""The set-up as a form: every value with its unit, what is allowed, and what it means."""

from collections.abc import Sequence

from PySide6.QtCore import Qt, Signal
from PySide6.QtWidgets import QLabel, QScrollArea, QSizePolicy, QVBoxLayout, QWidget

from app.document import patient_fields, setup_fields
from app.document.document import Document
from app.document.fields import NumberField
from app.files.readings import required_text
from app.window.setup.devices import DevicesEditor
from app.window.setup.fitted import FittedEditor, fitted_summary
from app.window.setup.group import Group
from app.window.setup.number import number_shown
from app.window.setup.required import ComponentsEditor
from app.window.setup.required_bar import RequiredBar
from app.window.setup.rows import NumberRow, Row, axis_of
from app.window.setup.words import ChoiceRow, TextRow
from app.window.theme import LIGHT, Theme
from geometry.setup import Surface


class SetupPanel(QWidget):
    """Groups of fields in the order in which a set-up is made.

    `edit_wanted` (edit: Document to Document, words for the undo list, merge key or None) comes for every change that
    a person makes and that the document as shown allows; `edit_finished` when a row of them is over. `show_document`
    emits nothing.
    """

    edit_wanted = Signal(object, str, object)
    edit_finished = Signal()

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.setObjectName("setup_panel")
        self._document: Document | None = None
        self._theme = LIGHT
        self.rows: list[Row] = []
        self.components = ComponentsEditor()
        self.bar = RequiredBar()
        self.fitted = FittedEditor()
        self.devices = DevicesEditor()
        self.messages = QLabel()
        self.messages.setObjectName("messages")
        self.messages.setWordWrap(True)
        self.messages.setTextInteractionFlags(Qt.TextInteractionFlag.TextSelectableByMouse)
        self.messages.hide()
        self.note = QLabel()
        self.note.setObjectName("note")
        self.note.setWordWrap(True)
        self.note.setAccessibleName("What the last change did")
        self.note.hide()
        self.source = QLabel()
        self.source.setObjectName("unit")
        self.source.setWordWrap(True)
        self._make_groups()
        self._lay_out()
        for editor in (self.components, self.fitted, self.devices):
            editor.edit_wanted.connect(self.edit_wanted)
            editor.edit_finished.connect(self.edit_finished)
        self.setEnabled(False)

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        self._theme = theme
        self.setStyleSheet(_style(theme))
        for group in self.groups:
            group.set_theme(theme)
        for row in self.rows:
            row.set_theme(theme)
        self.bar.set_theme(theme)
        self.components.set_theme(theme)
        self.fitted.set_theme(theme)
        self.devices.set_theme(theme)

    def show_document(self, document: Document) -> None:
        """Show a document quietly. What somebody is typing stays, and so does the focus."""
        self._document = document
        self.setEnabled(True)
        self._show_those_that_count(document)
        for row in self.rows:
            if not row.isHidden():
                row.show_document(document)
        for editor in (self.components, self.fitted, self.devices):
            editor.show_document(document)
        self.bar.show_required(document.setup.required)
        for group, text in zip(self.groups, _summaries(document), strict=True):
            group.header.set_summary(text)

    def set_messages(self, messages: Sequence[str]) -> None:
        """Show what stands against the set-up as a whole, above everything; nothing for none."""
        text = "\n".join(message[:1].upper() + message[1:] for message in messages)
        self.messages.setText(text)
        self.messages.setVisible(bool(text))

    def set_change_note(self, text: str) -> None:
        """Say in a line what the last change did; nothing for ""."""
        # Figures stay with their arrows and units where the line is broken.
        for mark in (" → ", " %", " sr", " mm"):
            text = text.replace(mark, mark.replace(" ", "\u00a0"))
        self.note.setText(text)
        self.note.setVisible(bool(text))

    def commit(self) -> None:
        """Ask for what was typed and not asked for yet, as before saving or closing."""
        for row in self.rows:
            row.commit()
        for editor in (self.components, self.fitted, self.devices):
            editor.commit()

    def group_named(self, title: str) -> Group:
        """Return the group with a title; KeyError if there is none."""
        return {group.header.text(): group for group in self.groups}[title]

    # Making

    def _make_groups(self) -> None:
        self.patient = Group("Patient and position", is_open=True)
        self.isocentre = Group("Isocentre", is_open=True)
        self.table = Group("Table", is_open=True)
        self.body = Group("Posture and body sizes")
        self.device_group = Group("Devices")
        self.fitted_group = Group("Fitted to the machine")
        self.required = Group("Required clearance")
        self.readouts = Group("Readouts and proof")
        self.notes = Group("Notes")
        self.groups = (
            self.patient,
            self.isocentre,
            self.table,
            self.body,
            self.device_group,
            self.fitted_group,
            self.required,
            self.readouts,
            self.notes,
        )
        self._add(self.patient, TextRow(setup_fields.NAME, lines=2), ChoiceRow(patient_fields.POSITION, is_long=True))
        self.patient.content.addWidget(self.source)
        self._offsets = [NumberRow(field) for field in setup_fields.OFFSETS]
        self._dicom = [NumberRow(field) for field in setup_fields.DICOM]
        self._add(self.isocentre, ChoiceRow(setup_fields.ORIGIN), *self._offsets, *self._dicom)
        self._couch = [NumberRow(field) for field in setup_fields.COUCH]
        self._add(self.table, *(NumberRow(field) for field in setup_fields.TABLE), *self._couch)
        self._body_rows: list[Row] = [
            *(ChoiceRow(field) for field in patient_fields.POSTURE),
            NumberRow(patient_fields.SLOPE),
            NumberRow(patient_fields.STATURE),
            NumberRow(patient_fields.MASS),
            ChoiceRow(patient_fields.BUILD),
            *(NumberRow(field) for field in patient_fields.BODY_SIZES),
        ]
        self._add(self.body, *self._body_rows[:7])
        self.body.content.addWidget(_hint("Measured on this patient, in place of averages"))
        self._add(self.body, *self._body_rows[7:])
        self.device_group.content.addWidget(self.devices)
        self.fitted_group.content.addWidget(self.fitted)
        self._add(
            self.required,
            NumberRow(setup_fields.FIXED),
            NumberRow(setup_fields.K),
            TextRow(setup_fields.REASON, lines=3),
        )
        self.required.content.addWidget(self.components)
        self.required.content.addWidget(self.bar)
        self._add(self.readouts, *(NumberRow(field) for field in setup_fields.OPTIONS))
        self.readouts.content.addWidget(_hint("They hold until another set-up is opened; its file does not keep them."))
        self._add(self.notes, TextRow(setup_fields.NOTES, lines=5, is_note=True))

    def _add(self, group: Group, *rows: Row) -> None:
        for row in rows:
            self.rows.append(row)
            row.edit_wanted.connect(self.edit_wanted)
            row.edit_finished.connect(self.edit_finished)
            group.content.addWidget(row)

    def _lay_out(self) -> None:
        page = QWidget()
        page.setObjectName("page")
        column = QVBoxLayout(page)
        column.setContentsMargins(0, 0, 0, 0)
        column.setSpacing(0)
        for group in self.groups:
            column.addWidget(group)
        column.addStretch(1)
        self.area = QScrollArea()
        self.area.setWidgetResizable(True)
        self.area.setFrameShape(QScrollArea.Shape.NoFrame)
        self.area.setHorizontalScrollBarPolicy(Qt.ScrollBarPolicy.ScrollBarAlwaysOff)
        self.area.setWidget(page)
        self.setSizePolicy(QSizePolicy.Policy.Preferred, QSizePolicy.Policy.Expanding)
        self.setMinimumWidth(290)
        outer = QVBoxLayout(self)
        outer.setContentsMargins(0, 0, 0, 0)
        outer.setSpacing(0)
        outer.addWidget(self.messages)
        outer.addWidget(self.note)
        outer.addWidget(self.area, 1)

    # Showing

    def _show_those_that_count(self, document: Document) -> None:
        """Hide what this envelope, isocentre or couch does not have."""
        setup = document.setup
        surface = setup.patient if isinstance(setup.patient, Surface) else None
        self.body.setVisible(surface is None)
        for row in self._body_rows:
            row.setVisible(surface is None)
        self.source.setVisible(surface is not None)
        self.source.setText(f"Envelope: {surface.source}." if surface is not None else "")
        in_dicom = setup.isocentre.landmark is None
        for row in self._offsets:
            row.setVisible(not in_dicom)
        for row in self._dicom:
            row.setVisible(in_dicom)
        for row in self._couch:
            axis = axis_of(setup.room, row.field.axes[0])
            row.setVisible(axis.low < axis.high or row.field.read(document) != 0.0)


def _summaries(document: Document) -> tuple[str, ...]:
    """Return a line about each group, for while it is folded."""
    setup = document.setup
    body = patient_fields.body_of(document)
    place = ", ".join(_shown(field, document) for field in setup_fields.TABLE)
    isocentre = setup.isocentre
    if isocentre.landmark is None:
        where = ", ".join(number_shown(value) for value in isocentre.dicom_mm or ())
    else:
        where = ", ".join([isocentre.landmark, *(f"{value:+g}" if value else "0" for value in isocentre.offset_mm)])
    person = "" if body is None else f"{body.stature_mm:g} mm"
    if body is not None and body.mass_kg is not None:
        person += f", {body.mass_kg:g} kg"
    if body is not None and body.slope_deg:
        person += f", slope {body.slope_deg:g}°"
    required = setup.required
    pairs = [required_text(required.of_pair_mm(with_patient)).removesuffix(" mm") for with_patient in (False, True)]
    options = document.options
    return (
        f"{setup.patient_position}, {setup.name}",
        where,
        place,
        person,
        ", ".join(device.name for device in setup.devices) or "none",
        fitted_summary(document),
        f"{' and '.join(dict.fromkeys(pairs))} mm",
        f"±{options.gantry_tolerance_deg:g}°, ±{options.couch_tolerance_deg:g}°, edge {options.edge_deg:g}°",
        " ".join(setup.notes.split()),
    )


def _shown(field: NumberField, document: Document) -> str:
    return f"{number_shown(field.read(document))} {field.unit}"


def _style(theme: Theme) -> str:
    return (
        f"#setup_panel, #page {{ background: {theme.panel}; }}"
        f"#unit {{ color: {theme.faint}; }}"
        f"#message {{ color: {theme.marked}; padding-left: 12px; }}"
        f"#messages {{ color: {theme.ink}; background: {theme.canvas}; border-left: 4px solid {theme.marked};"
        " padding: 6px 10px; }"
        f"#note {{ color: {theme.ink}; background: {theme.canvas}; border-bottom: 1px solid {theme.line};"
        " padding: 5px 10px; }"
    )


def _hint(text: str) -> QLabel:
    hint = QLabel(text)
    hint.setObjectName("unit")
    hint.setWordWrap(True)
    hint.setContentsMargins(12, 6, 0, 0)
    return hint
