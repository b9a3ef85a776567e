"""Exports from the window: the same files as the command line writes, and pictures of what is on the screen."""

import datetime
import tempfile
from collections.abc import Callable
from pathlib import Path
from typing import Final

from PySide6.QtCore import QBuffer, QByteArray, QIODevice, QObject, QRect, Qt, Signal
from PySide6.QtGui import QImage, QImageWriter, QPageLayout, QPainter
from PySide6.QtPrintSupport import QPrintDialog, QPrinter
from PySide6.QtWidgets import QFileDialog, QWidget

from app.files.atomic import write_atomically
from app.files.exports import check_grid_path, check_map_path, check_pose_path, write_grid, write_map, write_pose
from app.files.provenance import Provenance, provenance_of
from app.jobs import Job
from app.plan.gaps import GapRow
from app.plan_files.check_exports import CheckExport, Paper, check_report_path, write_check
from app.window.captions import captioned, picture_lines
from app.window.desk import Desk
from geometry.assess import Assessment, Options
from geometry.errors import WideberthError
from geometry.treatment.data import CheckReport

LANE = "export"
_PICTURE_SIZE: Final = (1600, 1100)
_NOT_YET: Final = "The proof is still under way; try again once it is done."

_MAPS: Final = {
    "Workbook (*.xlsx)": ".xlsx",
    "Permitted-angle table (*.csv)": ".csv",
    "Angle chart as a page (*.pdf)": ".pdf",
    "Angle chart as a picture (*.png)": ".png",
    "Everything, for programs (*.json)": ".json",
}
_SHEETS: Final = {
    "Dry-run sheet, A4 (*.pdf)": ".pdf",
    "Dry-run sheet, Letter (*.pdf)": ".pdf",
    "Workbook (*.xlsx)": ".xlsx",
    "Everything, for programs (*.json)": ".json",
}
_POSES: Final = {"glTF (*.glb)": ".glb", "Polygons (*.ply)": ".ply", "Triangles (*.stl)": ".stl"}


class ExportDesk(QObject):
    """Asks where to, writes off the GUI's thread. `told` (text): what was written. `failed` (text)."""

    told = Signal(str)
    failed = Signal(str)

    def __init__(self, desk: Desk, window: QWidget) -> None:
        super().__init__(window)
        self._desk = desk
        self._window = window

    def export_map(self) -> None:
        """Ask for a file and write the permitted angles."""
        if not self._is_proved():
            return
        path = self._asked("Export the permitted angles", _MAPS, "permitted angles")
        if path is not None:
            self.write_map_to(path)

    def write_map_to(self, path: Path) -> None:
        """Write the permitted angles of the set-up as it is now."""
        assessment = self._desk.assessment
        if assessment is None:
            self.failed.emit(_NOT_YET)
            return
        provenance = provenance_of(assessment.scene, assessment.options, _today())
        self._start(path, check_map_path, lambda: write_map(assessment, provenance, path))

    def export_grid(self) -> None:
        """Ask for a file and write every pair of angles."""
        if not self._is_proved():
            return
        assessment = self._desk.assessment
        path = self._asked("Export every pair of angles", {"Every pair (*.csv)": ".csv"}, "every pair")
        if path is not None and assessment is not None:
            self._start(path, check_grid_path, lambda: write_grid(assessment, path))

    def export_pose(self) -> None:
        """Ask for a file and write the room in the pose that is looked at."""
        pose = self._desk.pose
        path = self._asked("Export the room in this pose", _POSES, "pose")
        if path is not None and pose is not None:
            provenance = provenance_of(pose.scene, Options(), _today())
            self._start(path, check_pose_path, lambda: write_pose(pose, provenance, path))

    def export_picture(self, picture: Callable[[int, int], QImage]) -> None:
        """Ask for a file and write a picture of the room, with what every export says below it."""
        pose = self._desk.pose
        path = self._asked("Export a picture of the room", {"Picture (*.png)": ".png"}, "room")
        if path is not None and pose is not None:
            lines = picture_lines(pose, provenance_of(pose.scene, Options(), _today()))
            content = png_of(captioned(picture(*_PICTURE_SIZE), lines))
            self._start(path, _any_path, lambda: write_atomically(path, lambda stream: stream.write(content)))

    def write_sheet(self, report: CheckReport, gaps: tuple[GapRow, ...]) -> None:
        """Ask for a file and write the dry-run sheet of a checked plan, or the same as a workbook or for programs."""
        path, kind = self._asked_kind("The dry-run sheet", _SHEETS, "dry run")
        if path is not None:
            provenance = provenance_of(report.scene, report.options, _today())
            paper: Paper = "Letter" if "Letter" in kind else "A4"
            export = CheckExport(report, provenance, self._desk.assessment, gaps, paper)
            self._start(path, check_report_path, lambda: write_check(export, path))

    def print_chart(self) -> None:
        """Ask for a printer and print the page that `map` writes as a chart."""
        assessment = self._desk.assessment
        if assessment is None:
            self.failed.emit(_NOT_YET)
            return
        provenance = provenance_of(assessment.scene, assessment.options, _today())
        self._desk.jobs.start(
            Job(
                LANE,
                lambda _progress, _publish: _chart_page(assessment, provenance),
                on_done=self._print,
                on_error=lambda error: self.failed.emit(f"The chart was not printed: {error}"),
                label="drawing the page",
            )
        )

    def _print(self, content: bytes) -> None:
        page = QImage.fromData(content)
        printer = QPrinter(QPrinter.PrinterMode.HighResolution)
        printer.setPageOrientation(QPageLayout.Orientation.Landscape)
        if QPrintDialog(printer, self._window).exec():
            paint_page(page, printer)

    def _is_proved(self) -> bool:
        """Tell whether there is a proof to write down, and say so where there is none."""
        if self._desk.assessment is None:
            self.failed.emit(_NOT_YET)
        return self._desk.assessment is not None

    def _asked(self, title: str, kinds: dict[str, str], what: str) -> Path | None:
        return self._asked_kind(title, kinds, what)[0]

    def _asked_kind(self, title: str, kinds: dict[str, str], what: str) -> tuple[Path | None, str]:
        """Ask for a file and its kind; None where the person would rather not."""
        document = self._desk.document
        if document is None:
            return None, ""
        folder = document.path.parent if document.path is not None else Path.home()
        stem = document.path.name.removesuffix(".setup.toml") if document.path is not None else "set-up"
        first = next(iter(kinds.values()))
        chosen, kind = QFileDialog.getSaveFileName(
            self._window, title, str(folder / f"{stem} {what}{first}"), ";;".join(kinds)
        )
        if not chosen:
            return None, ""
        path = Path(chosen)
        known = path.suffix.lower() in kinds.values()
        return path if known else path.with_name(path.name + kinds.get(kind, first)), kind

    def _start(self, path: Path, check: Callable[[Path], None], write: Callable[[], None]) -> None:
        try:
            check(path)
        except WideberthError as error:
            self.failed.emit(str(error))
            return
        self._desk.jobs.start(
            Job(
                LANE,
                lambda _progress, _publish: write(),
                on_done=lambda _: self.told.emit(f"Wrote {path}"),
                on_error=lambda error: self.failed.emit(f"{path.name} was not written: {error}"),
                label=f"writing {path.name}",
                to_the_end=True,
            )
        )


def png_of(image: QImage) -> bytes:
    """Return an image as the content of a PNG file."""
    data = QByteArray()
    buffer = QBuffer(data)
    buffer.open(QIODevice.OpenModeFlag.WriteOnly)
    QImageWriter(buffer, QByteArray(b"png")).write(image)
    return bytes(data.data())


def paint_page(page: QImage, printer: QPrinter) -> None:
    """Paint a page onto the paper, as large as fits."""
    painter = QPainter(printer)
    try:
        area = painter.viewport()
        size = page.size().scaled(area.size(), Qt.AspectRatioMode.KeepAspectRatio)
        painter.drawImage(QRect(area.topLeft(), size), page)
    finally:
        painter.end()


def _chart_page(assessment: Assessment, provenance: Provenance) -> bytes:
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "chart.png"
        write_map(assessment, provenance, path)
        return path.read_bytes()


def _any_path(_: Path) -> None:
    """Leave the checks to the writing."""


def _today() -> datetime.date:
    return datetime.datetime.now().astimezone().date()
