"""A document at work: undo and redo, whether it is saved, and who wants to know. No Qt."""

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Final

from app.document.document import Document
from app.document.fields import Edit

MOST_STEPS: Final = 500

Listener = Callable[[], object]


@dataclass(frozen=True)
class _Step:
    """What a step is called, and the document on its far side."""

    text: str
    document: Document


class Session:
    """The document that is open, and the steps that lead back from it and on again.

    `saved` False says that the document holds something that no file does, as one that was recovered.
    """

    def __init__(self, document: Document, *, saved: bool = True) -> None:
        self._document = document
        self._saved = document.setup if saved else None
        self._undo: list[_Step] = []
        self._redo: list[_Step] = []
        self._merge_key: str | None = None
        self._listeners: list[Listener] = []

    @property
    def document(self) -> Document:
        """The document as it is now."""
        return self._document

    @property
    def dirty(self) -> bool:
        """Whether the set-up differs from what is saved. How it is looked at (`options`) is not saved."""
        return self._document.setup is not self._saved and self._document.setup != self._saved

    @property
    def undo_text(self) -> str:
        """What `undo` would take back ("Undo isocentre, to the head"), "" where there is nothing."""
        return f"Undo {self._undo[-1].text}".rstrip() if self._undo else ""

    @property
    def redo_text(self) -> str:
        """What `redo` would do again, "" where there is nothing."""
        return f"Redo {self._redo[-1].text}".rstrip() if self._redo else ""

    def listen(self, listener: Listener) -> Callable[[], None]:
        """Have `listener` called after every change of document, saved state or undo list; return how to stop that."""
        self._listeners.append(listener)
        return lambda: self._listeners.remove(listener) if listener in self._listeners else None

    def apply(self, edit: Edit, text: str = "", merge_key: str | None = None) -> bool:
        """Change the document; return whether that changed anything.

        Edits in a row with the same `merge_key` are one step, until `end_merge`. What `edit` raises passes through, and
        the document stays as it was.
        """
        changed = edit(self._document)
        if changed == self._document:
            return False
        merged = merge_key is not None and merge_key == self._merge_key and bool(self._undo)
        if not merged:
            self._undo.append(_Step(text, self._document))
            del self._undo[:-MOST_STEPS]
        self._redo.clear()
        self._merge_key = merge_key
        self._document = changed
        self._tell()
        return True

    def end_merge(self) -> None:
        """Let the next edit be a step of its own. A merged step that led back to where it began is forgotten."""
        if self._merge_key is None:
            return
        self._merge_key = None
        if self._undo and _same(self._undo[-1].document, self._document):
            self._undo.pop()
            self._tell()

    def undo(self) -> bool:
        """Take the last step back; return whether there was one."""
        return self._step(self._undo, self._redo)

    def redo(self) -> bool:
        """Take a step that was taken back again; return whether there was one."""
        return self._step(self._redo, self._undo)

    def mark_saved(self, document: Document, of: Document | None = None) -> None:
        """Take over the document as it was saved; the steps stay.

        `of` is the document that was handed to the saving, where that took a while: what has been edited since then
        stays, and is still to be saved.
        """
        self._saved = document.setup
        edited_since = of is not None and of is not self._document
        self._document = _of_file(self._document, document) if edited_since else document
        self._merge_key = None
        self._tell()

    def replace_document(self, document: Document, *, saved: bool = True) -> None:
        """Open another document: nothing of the one before can be undone."""
        self._document = document
        self._saved = document.setup if saved else None
        self._undo.clear()
        self._redo.clear()
        self._merge_key = None
        self._tell()

    def _step(self, source: list[_Step], target: list[_Step]) -> bool:
        self._merge_key = None
        if not source:
            return False
        step = source.pop()
        target.append(_Step(step.text, self._document))
        # A step back changes what the set-up says, not which file it belongs to.
        self._document = _of_file(step.document, self._document)
        self._tell()
        return True

    def _tell(self) -> None:
        for listener in tuple(self._listeners):
            listener()


def _same(first: Document, second: Document) -> bool:
    return first.setup == second.setup and first.options == second.options


def _of_file(document: Document, current: Document) -> Document:
    """Return a document as one of the file that `current` belongs to."""
    return replace(document, path=current.path, stamp=current.stamp)
