"""The main window: assembles the desk, its widgets and the menus."""

from pathlib import Path

from PySide6.QtCore import QTimer
from PySide6.QtGui import QCloseEvent, QDragEnterEvent, QDropEvent, QGuiApplication
from PySide6.QtWidgets import QApplication, QFileDialog, QLabel, QMainWindow, QMessageBox, QProgressBar, QStackedWidget

from app.document.document import Document
from app.jobs import UNKNOWN, Jobs
from app.samples import sample_rooms, samples_folder
from app.saving.recent import recent_files
from app.window.cautions_dialog import CautionsDialog
from app.window.change_note import ChangeNote
from app.window.desk import Desk
from app.window.export_desk import ExportDesk
from app.window.fields.fields_desk import FieldsDesk
from app.window.fields.gap_keeper import GapKeeper
from app.window.file_desk import FileDesk
from app.window.menus import Commands, Menus
from app.window.remedies.remedy_desk import RemedyDesk
from app.window.settings import WindowSettings
from app.window.shading_desk import ShadingDesk
from app.window.start_screen import StartScreen
from app.window.theme import palette_of, theme_for
from app.window.workspace import Workspace

_SUFFIX = ".setup.toml"
_PLAN_SUFFIXES = (".dcm", ".csv")
_PLAN_FILTER = "RT Plans and lists of fields (*.dcm *.csv);;All files (*)"
_TOLD_MS = 15_000


class MainWindow(QMainWindow):
    """One set-up at a time. `desk`, `files`, `exports` do the work; this shows them and ends them."""

    def __init__(self, settings: WindowSettings | None = None) -> None:
        super().__init__()
        self.settings = settings or WindowSettings()
        self.jobs = Jobs(self)
        self.desk = Desk(self.jobs, self)
        self.files = FileDesk(self.desk, self)
        self.exports = ExportDesk(self.desk, self)
        self.start_screen = StartScreen()
        self.workspace = Workspace(self.desk)
        self.shading = ShadingDesk(self.desk, self.workspace, self)
        self.remedies = RemedyDesk(self.desk, self.workspace, self)
        self.change_note = ChangeNote(self.desk, self)
        curve = self.workspace.time_curve
        self.fields = FieldsDesk(self.desk, self.workspace.fields, curve, self.exports.write_sheet, self)
        self.gaps = GapKeeper(self.desk, self.fields, self)
        self.pages = QStackedWidget()
        self.pages.addWidget(self.start_screen)
        self.pages.addWidget(self.workspace)
        self.setCentralWidget(self.pages)
        self._progress = QProgressBar()
        self._progress.setMaximumWidth(180)
        self._progress.setTextVisible(False)
        self._progress.hide()
        self._doing = QLabel()
        self.statusBar().addPermanentWidget(self._doing)
        self.statusBar().addPermanentWidget(self._progress)
        self.menus = Menus(self, self._commands())
        self._may_close = False
        self.setAcceptDrops(True)
        self.setMinimumSize(900, 600)
        self._connect()
        self._restore()
        self.set_theme(self.settings.theme)
        self._show_start()
        QTimer.singleShot(0, self._after_first_paint)

    def _connect(self) -> None:
        self.start_screen.browse_wanted.connect(self.files.browse)
        self.start_screen.new_wanted.connect(self.files.new)
        self.start_screen.open_wanted.connect(self.files.open)
        self.start_screen.sample_wanted.connect(self.files.open_sample)
        self.desk.opened.connect(self._on_opened)
        self.desk.changed.connect(self._on_changed)
        self.jobs.progressed.connect(self._on_progress)
        self.jobs.finished.connect(self._on_finished)
        for asking in (self.workspace.banner, self.start_screen):
            asking.cautions_wanted.connect(self.show_cautions)
        for pointed in (self.workspace.pointed, self.shading.told):
            pointed.connect(self.show_pointed)
        self.change_note.noted.connect(self.workspace.setup_panel.set_change_note)
        self.change_note.noted.connect(self.tell)
        for panel in (self.workspace.setup_panel, self.workspace.fields):
            self.files.about_to_save.connect(panel.commit)
        self.files.saved.connect(self.gaps.keep)
        self.fields.fields_changed.connect(self.workspace.show_fields)
        self.fields.directions_changed.connect(self.workspace.discs.show_fields)
        self.fields.chosen_changed.connect(self.shading.set_field)
        self.fields.scene_wanted.connect(self.desk.show_instead)
        self.workspace.turned_by_hand.connect(self.fields.let_go)
        self.workspace.fields.open_wanted.connect(self.browse_plan)
        for source in (self.files, self.exports, self.fields, self.gaps):
            source.told.connect(self.tell)
        self.exports.failed.connect(self.warn)

    def _commands(self) -> Commands:
        return Commands(
            desk=self.desk,
            files=self.files,
            exports=self.exports,
            workspace=self.workspace,
            choose_shading=self.shading.choose,
            browse_plan=self.browse_plan,
            go_to_start=self.go_to_start,
            show_cautions=self.show_cautions,
            set_theme=self.set_theme,
        )

    def tell(self, text: str) -> None:
        """Say something in the status line, for a while."""
        if text:
            self.statusBar().showMessage(text, _TOLD_MS)
        else:
            self.statusBar().clearMessage()

    def warn(self, text: str) -> None:
        """Say what went wrong so that it is not overlooked."""
        box = QMessageBox(QMessageBox.Icon.NoIcon, "Wideberth", text, QMessageBox.StandardButton.Close, self)
        box.exec()

    def show_pointed(self, text: str) -> None:
        """Say what the pointer is on, as long as it is."""
        self.statusBar().showMessage(text)

    def set_theme(self, choice: str) -> None:
        """Take over colours: "system", "light" or "dark"."""
        self.settings.theme = choice
        application = QApplication.instance()
        if not isinstance(application, QGuiApplication):
            return
        theme = theme_for(application, choice)
        # Dialogs and tooltips as well.
        application.setPalette(palette_of(theme))
        for widget in (self.start_screen, self.workspace):
            widget.set_theme(theme)
        self.menus.show_theme(choice)

    def browse_plan(self) -> None:
        """Ask for a plan, or a list of fields, and check it."""
        document = self.desk.document
        folder = str(document.path.parent if document is not None and document.path is not None else Path.home())
        chosen, _ = QFileDialog.getOpenFileName(self, "Open a plan", folder, _PLAN_FILTER)
        if chosen:
            self.open_plan(Path(chosen))

    def open_plan(self, path: Path) -> None:
        """Check a plan, or a list of fields, against the set-up that is open."""
        if self.fields.open(path):
            self.workspace.left.setCurrentWidget(self.workspace.fields)
        else:
            self.tell("Open the patient's set-up first; the plan is checked against it.")

    def show_cautions(self) -> None:
        """Show what to know before anything here is relied on."""
        CautionsDialog(self).exec()
        self.settings.note_cautions_read()

    def go_to_start(self) -> None:
        """Leave the document for the start screen."""
        self.files.leave(self._close_document)

    def closeEvent(self, event: QCloseEvent) -> None:
        """Ask about unsaved changes, then leave nothing running."""
        if not self._may_close:
            self.files.leave(self._close_for_good)
        # Saving takes its time; the window closes once that is done, if it is.
        event.setAccepted(self._may_close)

    def _close_document(self) -> None:
        self.desk.close()
        self._show_start()

    def _close_for_good(self) -> None:
        self.settings.keep_state("window", self.saveGeometry())
        self.settings.keep_state("columns", self.workspace.columns.saveState())
        self.settings.keep_state("right", self.workspace.right.saveState())
        self.desk.close()
        self.workspace.scene_view.shutdown()
        self.jobs.shutdown()
        self.statusBar().clearMessage()
        self._may_close = True
        self.close()

    def dragEnterEvent(self, event: QDragEnterEvent) -> None:
        """Take set-up files."""
        if _dropped(event) is not None:
            event.acceptProposedAction()

    def dropEvent(self, event: QDropEvent) -> None:
        """Open the set-up file that was dropped."""
        path = _dropped(event)
        if path is not None:
            event.acceptProposedAction()
            # After the drag has ended: a question in between would hold up the program that it came from.
            opened = self.files.open if path.name.lower().endswith(_SUFFIX) else self.open_plan
            QTimer.singleShot(0, lambda: opened(path))

    def _restore(self) -> None:
        self.resize(1280, 800)
        window = self.settings.state("window")
        if window is not None:
            self.restoreGeometry(window)
        for name, splitter in (("columns", self.workspace.columns), ("right", self.workspace.right)):
            state = self.settings.state(name)
            if state is not None:
                splitter.restoreState(state)

    def _after_first_paint(self) -> None:
        self.workspace.scene_view.start()
        if not self.settings.cautions_read:
            self.show_cautions()
        if self.desk.session is None:
            self.files.offer_recovery()

    def _show_start(self) -> None:
        folder = samples_folder()
        self.start_screen.show_rooms(sample_rooms(folder) if folder is not None else ())
        self.start_screen.show_recent(recent_files())
        self.pages.setCurrentWidget(self.start_screen)
        self.setWindowTitle("Wideberth")
        self.menus.show_document(None)

    def _on_opened(self, _: Document) -> None:
        self.pages.setCurrentWidget(self.workspace)
        self.workspace.angle_view().setFocus()

    def _on_changed(self, document: Document) -> None:
        session = self.desk.session
        self.setWindowTitle(f"{document.name}[*] – {document.setup.room.name}")
        self.setWindowModified(session is not None and session.dirty)
        self.menus.show_document(session)

    def _on_progress(self, _: str, fraction: float, message: str) -> None:
        self._progress.setVisible(True)
        self._progress.setRange(0, 0 if fraction == UNKNOWN else 100)
        self._progress.setValue(round(100.0 * fraction))
        self._doing.setText(message)

    def _on_finished(self, _: str) -> None:
        if not self.jobs.is_busy():
            self._progress.setVisible(False)
            self._doing.setText("")


def _dropped(event: QDropEvent) -> Path | None:
    """Return the one set-up or plan file that is being dropped, None for anything else."""
    urls = event.mimeData().urls()
    if len(urls) != 1 or not urls[0].isLocalFile():
        return None
    path = Path(urls[0].toLocalFile())
    return path if path.name.lower().endswith((_SUFFIX, *_PLAN_SUFFIXES)) else None
