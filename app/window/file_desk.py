"""Opening and saving: off the GUI's thread, with the questions that a person has to answer."""

from collections.abc import Callable
from dataclasses import replace
from functools import partial
from pathlib import Path
from typing import Any, Final

from PySide6.QtCore import QObject, QTimer, Signal
from PySide6.QtWidgets import QFileDialog, QMessageBox, QWidget

from app.document.document import Document, new_document, open_document
from app.jobs import Job
from app.saving.autosave import Autosave, Pending, Recovery, discard, pending_recovery
from app.saving.recent import remember_file
from app.saving.setup_writer import ChangedOnDisk, save_setup
from app.window.desk import Desk
from geometry.errors import BadInput, WideberthError

LANE: Final = "files"
SETUP_FILTER: Final = "Set-up files (*.setup.toml)"
_ROOM_FILTER: Final = "Room files (*.room.toml)"
_SUFFIX: Final = ".setup.toml"
_AUTOSAVE_MS: Final = 5000
_MOST_TOLD: Final = 6
_Button = QMessageBox.StandardButton

Then = Callable[[], object]


def _nothing() -> None:
    """Go on with nothing."""


class FileDesk(QObject):
    """Keeps the file of the document.

    `told` (text) says what was done; `about_to_save` comes before anything is asked, `saved` once the document has its
    file. What takes time is begun and returned from; what is to come after it is handed over as a function.
    """

    told = Signal(str)
    about_to_save = Signal()
    saved = Signal()

    def __init__(self, desk: Desk, window: QWidget) -> None:
        super().__init__(window)
        self._desk = desk
        self._window = window
        self._side_file = Autosave()
        self._timer = QTimer(self)
        self._timer.setSingleShot(True)
        self._timer.setInterval(_AUTOSAVE_MS)
        self._timer.timeout.connect(self.autosave)
        desk.changed.connect(lambda _: self._timer.start())
        desk.closed.connect(self._timer.stop)

    def browse(self) -> None:
        """Ask for a set-up file and open it."""
        chosen, _ = QFileDialog.getOpenFileName(self._window, "Open a set-up", self._folder(), SETUP_FILTER)
        if chosen:
            self.open(Path(chosen))

    def new(self) -> None:
        """Ask for a room and begin a set-up in it."""
        chosen, _ = QFileDialog.getOpenFileName(self._window, "A room for a new set-up", self._folder(), _ROOM_FILTER)
        if chosen:
            self.leave(lambda: self._load(Path(chosen).name, lambda: new_document(Path(chosen)), saved=False))

    def open(self, path: Path) -> None:
        """Open a set-up file, or what was being made of it when the program ended."""

        def load() -> None:
            self._load(path.name, lambda: open_document(path))

        self.leave(lambda: self._read(f"reading {path.name}", lambda: pending_recovery(path), self._offer(load)))

    def open_sample(self, path: Path) -> None:
        """Open a copy of a sample set-up: saving asks where to, and the sample stays as it is."""
        self.leave(lambda: self._load(path.name, lambda: replace(open_document(path), path=None, stamp=None)))

    def offer_recovery(self) -> None:
        """Offer what was being worked on, and never saved, when the program ended."""
        self._read("", lambda: pending_recovery(None), self._offer(_nothing))

    def save(self, then: Then = _nothing) -> None:
        """Save the document, then go on; asks where to where there is no file yet."""
        self.about_to_save.emit()
        document = self._desk.document
        if document is None or document.path is None:
            self.save_as(then)
        else:
            self._save(document.path, then)

    def save_as(self, then: Then = _nothing) -> None:
        """Ask where to save, save there, then go on."""
        self.about_to_save.emit()
        document = self._desk.document
        if document is None:
            return
        name = document.path or Path(self._folder()) / f"{_file_name(document.setup.name)}{_SUFFIX}"
        chosen, _ = QFileDialog.getSaveFileName(self._window, "Save the set-up", str(name), SETUP_FILTER)
        if chosen:
            path = Path(chosen)
            self._save(path if path.name.endswith(_SUFFIX) else path.with_name(path.name + _SUFFIX), then)

    def leave(self, then: Then) -> None:
        """Ask what to do with unsaved changes and, unless the person would rather stay, go on."""
        self.about_to_save.emit()
        session = self._desk.session
        if session is None or not session.dirty:
            self._left(then)
            return
        answer = self._ask(
            f"Save the changes to “{session.document.name}”?",
            "They are lost otherwise.",
            _Button.Save | _Button.Discard | _Button.Cancel,
        )
        if answer == _Button.Save:
            self.save(lambda: self._left(then))
        elif answer == _Button.Discard:
            self._left(then)

    def autosave(self) -> None:
        """Keep unsaved changes in a side file, in case the program does not live to save them."""
        session = self._desk.session
        if session is None:
            return
        document = session.document
        write = partial(self._side_file.write, document) if session.dirty else self._side_file.remove
        self._start(
            "",
            write,
            on_error=lambda error: self.told.emit(f"No side file could be written: {error}"),
            to_the_end=True,
        )

    def _left(self, then: Then) -> None:
        self._timer.stop()
        self._start("", self._side_file.remove, to_the_end=True)
        then()

    def _read(self, label: str, read: Callable[[], Any], then: Callable[[Any], object]) -> None:
        self._start(label, read, on_done=then, on_error=self._tell_unreadable)

    def _load(self, name: str, load: Callable[[], Document], *, saved: bool = True) -> None:
        """Open what `load` returns. What cannot be read leaves the open document as it was."""
        self._read(f"reading {name}", load, partial(self._opened, saved=saved))

    def _opened(self, document: Document, *, saved: bool) -> None:
        self._desk.open(document, saved=saved)
        if document.path is not None:
            remember_file(document.path)

    def _offer(self, otherwise: Then) -> Callable[[Pending], object]:
        def offer(pending: Pending) -> None:
            for message in pending.messages:
                self.told.emit(message)
            for found in pending.recoveries:
                if self._wants(found):
                    self._recover(found)
                    return
            otherwise()

        return offer

    def _recover(self, found: Recovery) -> None:
        self._side_file.adopt(found)
        self._opened(found.document, saved=False)

    def _save(self, path: Path, then: Then, *, despite_changes: bool = False) -> None:
        session = self._desk.session
        if session is None:
            return
        before = session.document

        def done(saved: Document) -> None:
            session.mark_saved(saved, of=before)
            self._start("", self._side_file.remove, to_the_end=True)
            remember_file(path)
            self.told.emit(f"Saved {path}")
            self.saved.emit()
            then()

        def failed(error: Exception) -> None:
            if isinstance(error, ChangedOnDisk):
                self._save_despite(error, path, then)
            else:
                self._tell("The set-up was not saved", error)

        save = partial(save_setup, before, path, despite_changes=despite_changes)
        self._start(f"saving {path.name}", save, on_done=done, on_error=failed, to_the_end=True)

    def _save_despite(self, error: ChangedOnDisk, path: Path, then: Then) -> None:
        answer = self._ask(
            f"“{path.name}”, or a file that it names, changed since it was opened.",
            f"{error}\n\nSave all the same, over what is there now?",
            _Button.Save | _Button.Cancel,
        )
        if answer == _Button.Save:
            self._save(path, then, despite_changes=True)

    def _start(
        self,
        label: str,
        work: Callable[[], Any],
        on_done: Callable[[Any], object] = lambda _: None,
        on_error: Callable[[Any], object] = lambda _: None,
        *,
        to_the_end: bool = False,
    ) -> None:
        """Do something with files off the GUI's thread, after whatever else is being done with files."""
        self._desk.jobs.start(
            Job(
                LANE,
                lambda _progress, _publish: work(),
                on_done=on_done,
                on_error=on_error,
                label=label,
                to_the_end=to_the_end,
            )
        )

    def _wants(self, found: Recovery) -> bool:
        answer = self._ask(
            "Go on with the changes that were not saved?",
            f"The program ended while “{found.name}” was being changed, on "
            f"{found.saved_at.astimezone():%Y-%m-%d at %H:%M}. The changes are still there.",
            _Button.Yes | _Button.Discard | _Button.Ignore,
            _Button.Ignore,
        )
        if answer == _Button.Discard:
            discard(found.side_file)
        return answer == _Button.Yes

    def _ask(
        self,
        text: str,
        detail: str,
        buttons: QMessageBox.StandardButton,
        escape: QMessageBox.StandardButton = _Button.Cancel,
    ) -> QMessageBox.StandardButton:
        """Ask, and return the answer; `escape` is that of somebody who would rather not say."""
        box = QMessageBox(QMessageBox.Icon.NoIcon, "Wideberth", text, buttons, self._window)
        box.setInformativeText(detail)
        box.setEscapeButton(escape)
        later = box.button(_Button.Ignore)
        if later is not None:
            later.setText("Later")
        return _Button(box.exec())

    def _tell_unreadable(self, error: Exception) -> None:
        self._tell("This cannot be opened", error)

    def _tell(self, text: str, error: Exception) -> None:
        if not isinstance(error, WideberthError):
            raise error
        faults = [str(fault) for fault in error.faults] if isinstance(error, BadInput) else [str(error)]
        more = [f"… and {len(faults) - _MOST_TOLD} more"] if len(faults) > _MOST_TOLD else []
        box = QMessageBox(QMessageBox.Icon.NoIcon, "Wideberth", text, _Button.Close, self._window)
        box.setInformativeText("\n\n".join([*faults[:_MOST_TOLD], *more]))
        box.exec()

    def _folder(self) -> str:
        document = self._desk.document
        if document is not None and document.path is not None:
            return str(document.path.parent)
        return str(Path.home())


def _file_name(name: str) -> str:
    """Return a set-up's name as one that every file system takes."""
    kept = "".join(letter if letter.isalnum() or letter in " -_" else " " for letter in name)
    return "_".join(kept.split()).lower()[:80] or "set-up"
