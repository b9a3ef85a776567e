"""A renderer on a thread of its own, so that no picture ever holds up the window."""

from collections.abc import Callable
from concurrent.futures import Future, ThreadPoolExecutor
from typing import TypeVar

from PySide6.QtCore import QObject, Signal
from PySide6.QtGui import QImage

from app.window.room.rendering import Frame, Renderer

_Made = TypeVar("_Made")


class Drawing(QObject):
    """Makes a renderer, and pictures with it, one after the other.

    `ready` tells that the renderer is there, `drawn` brings a picture, `failed` says what went wrong: nothing comes
    after that. With `threaded` false it all happens at once, on the calling thread, for platforms that want it so.
    """

    ready = Signal()
    drawn = Signal(QImage)
    failed = Signal(str)

    def __init__(self, make: Callable[[], Renderer], *, threaded: bool, parent: QObject | None = None) -> None:
        super().__init__(parent)
        self._make = make
        self._renderer: Renderer | None = None
        self._thread = ThreadPoolExecutor(1, "drawing") if threaded else None
        self._closed = False

    def begin(self) -> None:
        """Make the renderer; `ready` or `failed` follows."""
        self._run(self._begin)

    def draw(self, frame: Frame) -> None:
        """Draw a frame; `drawn` or `failed` follows."""
        self._run(lambda: self._draw(frame))

    def picture(self, frame: Frame) -> QImage:
        """Return the picture of a frame, waiting for it. RuntimeError without a renderer."""
        return self._run(lambda: self._picture(frame)).result()

    def close(self) -> None:
        """Finish what is being drawn, and give everything back."""
        if not self._closed:
            self._closed = True
            self._run(self._close)
            if self._thread is not None:
                self._thread.shutdown(wait=True)

    def _run(self, work: Callable[[], _Made]) -> Future[_Made]:
        if self._thread is not None:
            return self._thread.submit(work)
        done: Future[_Made] = Future()
        done.set_result(work())
        return done

    def _begin(self) -> None:
        try:
            self._renderer = self._make()
        # Whatever a graphics driver or a compiler has to complain of, the window has another way to draw.
        except Exception as error:  # noqa: BLE001
            self._fail(error)
        else:
            if not self._closed:
                self.ready.emit()

    def _draw(self, frame: Frame) -> None:
        if self._closed:
            return
        try:
            image = self._picture(frame)
        except Exception as error:  # noqa: BLE001  # as above
            self._fail(error)
        else:
            if not self._closed:
                self.drawn.emit(image)

    def _fail(self, error: Exception) -> None:
        if not self._closed:
            self.failed.emit(str(error))

    def _picture(self, frame: Frame) -> QImage:
        if self._renderer is None:
            raise RuntimeError("there is no renderer")
        return self._renderer.draw(frame)

    def _close(self) -> None:
        if self._renderer is not None:
            self._renderer.close()
            self._renderer = None
