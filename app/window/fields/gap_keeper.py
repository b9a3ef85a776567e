"""Keeps the measured gaps in the file beside the set-up's."""

from collections.abc import Callable
from functools import partial

from PySide6.QtCore import QObject, Signal

from app.document.document import Document
from app.jobs import Job
from app.plan.gaps import MeasuredGap
from app.plan_files.gaps_csv import read_kept_gaps, replace_gaps
from app.window.desk import Desk
from app.window.fields.fields_desk import FieldsDesk

LANE = "gaps"


class GapKeeper(QObject):
    """Reads gaps when a set-up is opened; writes them when they change or the set-up gets its file. `told` (text)."""

    told = Signal(str)

    def __init__(self, desk: Desk, fields: FieldsDesk, parent: QObject | None = None) -> None:
        super().__init__(parent)
        self._desk = desk
        self._fields = fields
        desk.opened.connect(self._read)
        fields.gaps_changed.connect(self._changed)

    def keep(self) -> None:
        """Write the gaps beside the set-up's file, which has just been written."""
        if self._fields.gaps:
            self._changed(self._fields.gaps)

    def _read(self, document: Document) -> None:
        if document.path is not None:
            self._start("", partial(read_kept_gaps, document.path), self._fields.set_gaps)

    def _changed(self, gaps: tuple[MeasuredGap, ...]) -> None:
        path = self._desk.document.path if self._desk.document is not None else None
        if path is None:
            self.told.emit("Measured gaps are kept beside the set-up's file: save the set-up to keep them.")
        else:
            self._start(f"keeping gaps of {path.name}", partial(replace_gaps, path, gaps), lambda _: None)

    def _start(self, label: str, work: Callable[[], object], on_done: Callable[..., object]) -> None:
        self._desk.jobs.start(
            Job(
                LANE,
                lambda _progress, _publish: work(),
                on_done=on_done,
                on_error=lambda error: self.told.emit(f"Measured gaps: {error}"),
                label=label,
                to_the_end=True,
            )
        )
