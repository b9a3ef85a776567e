"""The permitted spans at the current couch angle, as bars over the gantry's turn."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Final

from PySide6.QtCore import QEvent, QPointF, QSize, QSizeF, Qt, Signal
from PySide6.QtGui import QHelpEvent, QKeyEvent, QMouseEvent, QPainter, QPaintEvent
from PySide6.QtWidgets import QSizePolicy, QToolTip, QWidget

from app.files.readings import number_text, required_text
from app.window.chart.paint_spans import Strip, StripLayout, height_of, least_words
from app.window.chart.reading import IEC, angle_words, label_of
from app.window.theme import LIGHT, Theme
from geometry.machine import Readout
from geometry.spans import Span

# How near an end a click means that end.
_END_PIXELS: Final = 6.0


@dataclass(frozen=True)
class _Hit:
    """The place of the span under the pointer, and, at one of its ends, the angle there."""

    index: int
    end_deg: float | None


class SpanStrip(QWidget):
    """A strip of bars, one a span.

    Emits `span_clicked` (Span) on a click on a bar, and `pose_wanted` (gantry, unwrapped, and couch, deg) on one at
    its ends. With the keyboard: left and right choose a span, Enter clicks it, Home and End go to its ends.
    """

    span_clicked = Signal(object)
    pose_wanted = Signal(float, float)

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._theme = LIGHT
        self._strip = Strip()
        self._readout = IEC
        self._labels: tuple[str, ...] = ()
        self._hit: _Hit | None = None
        self._chosen: int | None = None
        self.setMouseTracking(True)
        self.setFocusPolicy(Qt.FocusPolicy.StrongFocus)
        self.setSizePolicy(QSizePolicy.Policy.Expanding, QSizePolicy.Policy.Fixed)
        self.setAccessibleName("Permitted spans")
        self.setWhatsThis(
            "Gantry angles permitted at the current couch angle. Click a span to see its ends in the room, click an "
            "end to go there. Left and right choose a span, Enter clicks it, Home and End go to its ends."
        )
        self._describe()

    def set_theme(self, theme: Theme) -> None:
        """Use these colours from now on."""
        self._theme = theme
        self.update()

    def set_travel(self, gantry: tuple[float, float]) -> None:
        """Set the gantry's travel, deg, unwrapped; the whole turn is shown in any case."""
        self._change(replace(self._strip, travel_deg=gantry))

    def set_readout(self, gantry: Readout) -> None:
        """Tell the room's own scale of the gantry, which the tooltips add."""
        self._readout = gantry
        self._describe()

    def set_axis(self, left: float, right: float, low_deg: float, high_deg: float) -> None:
        """Lie below a chart: its gantry axis runs between these pixels of this widget, and these angles."""
        self._change(replace(self._strip, axis=(left, right, low_deg, high_deg)))

    def set_part_names(self, labels: Sequence[str]) -> None:
        """Set the labels that the spans' part indices stand for."""
        self._labels = tuple(labels)
        self._describe()

    def set_pose(self, gantry_deg: float, couch_deg: float) -> None:  # noqa: ARG002 - as the charts'
        """Mark the gantry angle, unwrapped; the couch angle is that of the spans."""
        self._change(replace(self._strip, gantry_deg=gantry_deg))

    def show_spans(self, couch_deg: float, spans: Sequence[Span] | None, stale: bool) -> None:
        """Show the spans at a couch angle, faintly while they are those of the state before; None: not known."""
        shown = None if spans is None else tuple(spans)
        self._hit = None
        if self._chosen is not None and self._chosen >= len(shown or ()):
            self._chosen = None
        self._change(replace(self._strip, couch_deg=couch_deg, spans=shown, stale=stale))
        self._describe()

    def title(self) -> str:
        """Return what the strip says in one line."""
        return self._strip.titles[0]

    def span_words(self, span: Span) -> str:
        """Return all of a span in words, in lines."""
        ends = f"Gantry {angle_words(span.gantry_from_deg)} to {angle_words(span.gantry_to_deg)}, clockwise"
        lines = [f"{ends}, {number_text(round(span.extent_deg, 1))}°"]
        if not self._readout.is_iec():
            shown = [angle_words(angle, self._readout) for angle in (span.gantry_from_deg, span.gantry_to_deg)]
            lines.append(f"machine shows {shown[0]} to {shown[1]}")
        lines.append(f"At least {least_words(span)} mm, {required_text(span.required_mm)} required")
        parts = (label_of(self._labels, span.machine_part), label_of(self._labels, span.couch_part))
        if all(parts):
            lines.append(f"{parts[0]} – {parts[1]}")
        return "\n".join(lines)

    def sizeHint(self) -> QSize:  # noqa: D102 - Qt's
        return QSize(640, height_of(self.font()))

    def minimumSizeHint(self) -> QSize:  # noqa: D102 - Qt's
        return QSize(260, height_of(self.font()))

    def paintEvent(self, event: QPaintEvent) -> None:  # noqa: ARG002, D102 - Qt's
        with QPainter(self) as painter:
            self._layout().paint(painter, self._theme, self.devicePixelRatioF())

    # Pointing and keys.

    def mouseMoveEvent(self, event: QMouseEvent) -> None:  # noqa: D102 - Qt's
        self._point_at(self._hit_at(event.position()))

    def leaveEvent(self, event: QEvent) -> None:  # noqa: ARG002, D102 - Qt's
        self._point_at(None)

    def mousePressEvent(self, event: QMouseEvent) -> None:  # noqa: D102 - Qt's
        hit = self._hit_at(event.position())
        if event.button() != Qt.MouseButton.LeftButton or hit is None:
            return
        self._chosen = hit.index
        self.update()
        if hit.end_deg is not None:
            self.pose_wanted.emit(hit.end_deg, self._strip.couch_deg)
        else:
            self.span_clicked.emit(self._spans()[hit.index])

    def keyPressEvent(self, event: QKeyEvent) -> None:  # noqa: D102 - Qt's
        spans, key = self._spans(), event.key()
        chosen = None if self._chosen is None else spans[self._chosen]
        if key in {Qt.Key.Key_Left, Qt.Key.Key_Right} and spans:
            self._choose_next(1 if key == Qt.Key.Key_Right else -1)
        elif chosen is not None and key in {Qt.Key.Key_Return, Qt.Key.Key_Enter, Qt.Key.Key_Space}:
            self.span_clicked.emit(chosen)
        elif chosen is not None and key in {Qt.Key.Key_Home, Qt.Key.Key_End}:
            end = chosen.gantry_from_deg if key == Qt.Key.Key_Home else chosen.gantry_to_deg
            self.pose_wanted.emit(end, self._strip.couch_deg)
        else:
            super().keyPressEvent(event)

    def event(self, event: QEvent) -> bool:  # noqa: D102 - Qt's
        if isinstance(event, QHelpEvent) and event.type() == QEvent.Type.ToolTip:
            hit = self._hit_at(QPointF(event.pos()))
            if hit is None:
                QToolTip.hideText()
            else:
                span = self._spans()[hit.index]
                QToolTip.showText(event.globalPos(), self.span_words(span), self, self._layout().bar(span).toRect())
            return True
        if event.type() in {QEvent.Type.FocusIn, QEvent.Type.FocusOut}:
            self.update()
        return super().event(event)

    def _spans(self) -> tuple[Span, ...]:
        return self._strip.spans or ()

    def _layout(self) -> StripLayout:
        touched = None if self._hit is None else self._hit.index
        focused = self.hasFocus()
        strip = replace(self._strip, touched=touched, chosen=self._chosen if focused else None, focused=focused)
        return StripLayout(strip, QSizeF(self.size()), self.font())

    def _change(self, strip: Strip) -> None:
        if strip != self._strip:
            self._strip = strip
            self.update()

    def _choose_next(self, step: int) -> None:
        last = len(self._spans()) - 1
        if self._chosen is None:
            self._chosen = 0 if step > 0 else last
        else:
            self._chosen = min(max(self._chosen + step, 0), last)
        self._describe()
        self.update()

    def _point_at(self, hit: _Hit | None) -> None:
        if hit != self._hit:
            self._hit = hit
            shape = Qt.CursorShape.ArrowCursor
            if hit is not None:
                at_end = hit.end_deg is not None
                shape = Qt.CursorShape.SplitHCursor if at_end else Qt.CursorShape.PointingHandCursor
            self.setCursor(shape)
            self.update()

    def _hit_at(self, at: QPointF) -> _Hit | None:
        """Return the span at a place: its end on the last pixels of its bar, and on the labels under it."""
        layout = self._layout()
        track = layout.track
        if not track.top() - 3.0 <= at.y() <= self.height() or not track.left() <= at.x() <= track.right():
            return None
        below = at.y() > track.bottom() + 2.0
        for index, span in enumerate(self._spans()):
            bar = layout.bar(span)
            if not bar.left() - 2.0 <= at.x() <= bar.right() + 2.0:
                continue
            near = bar.width() / 2.0 if below else min(_END_PIXELS, bar.width() / 3.0)
            if at.x() <= bar.left() + near:
                return _Hit(index, span.gantry_from_deg)
            return _Hit(index, span.gantry_to_deg if at.x() >= bar.right() - near else None)
        return None

    def _describe(self) -> None:
        spans = self._spans()
        words = [self.title(), *(self.span_words(span).replace("\n", ", ") for span in spans)]
        if self._chosen is not None:
            words.insert(1, f"Chosen: {self.span_words(spans[self._chosen]).splitlines()[0]}")
        self.setAccessibleDescription(". ".join(words))
