"""What a change did: permitted area and accessible share, before and after."""

from PySide6.QtCore import QObject, Signal

from app.live import Stage
from app.window.desk import Desk, permitted_share


class ChangeNote(QObject):
    """Compares each proved set-up with the one proved before it. `noted` (text), empty for a document just opened."""

    noted = Signal(str)

    def __init__(self, desk: Desk, parent: QObject | None = None) -> None:
        super().__init__(parent)
        self._before: tuple[float, float] | None = None
        desk.opened.connect(self._forget)
        desk.staged.connect(self._compare)

    def _forget(self) -> None:
        self._before = None
        self.noted.emit("")

    def _compare(self, stage: Stage) -> None:
        if stage.assessment is None or stage.share is None:
            return
        now = 100.0 * permitted_share(stage.assessment), stage.share.permitted_sr
        before, self._before = self._before, now
        if before is not None and before != now:
            self.noted.emit(
                f"Permitted area {before[0]:.1f} → {now[0]:.1f} %, accessible {before[1]:.2f} → {now[1]:.2f} sr"
            )
