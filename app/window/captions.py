"""What every export says of itself, below a picture."""

from collections.abc import Sequence

from PySide6.QtCore import QRect, Qt
from PySide6.QtGui import QColor, QFont, QFontMetrics, QImage, QPainter

from app.files.provenance import Provenance
from geometry.assess import Pose

_INK = QColor("#1d2a36")
_PAPER = QColor("#ffffff")
_MARGIN = 24


def picture_lines(pose: Pose, provenance: Provenance) -> tuple[str, ...]:
    """Return what a picture of one pose has to say."""
    angles = f"Gantry {pose.gantry_deg:.1f}°, couch {pose.couch_deg:.1f}° (IEC 61217)"
    return (
        f"{provenance.setup}, {provenance.room}. {angles}.",
        *(f"{mark}." for mark in provenance.marks),
        (
            f"Wideberth {provenance.version}, {provenance.date.isoformat()}, fingerprint {provenance.fingerprint}. "
            f"{provenance.survey}."
        ),
        " ".join(provenance.cautions),
    )


def captioned(image: QImage, lines: Sequence[str]) -> QImage:
    """Return the image with lines of text on white below it."""
    font = QFont()
    font.setPixelSize(max(image.width() // 90, 11))
    metrics = QFontMetrics(font)
    width = image.width() - 2 * _MARGIN
    flags = int(Qt.TextFlag.TextWordWrap | Qt.AlignmentFlag.AlignLeft)
    heights = [metrics.boundingRect(QRect(0, 0, width, 10_000), flags, line).height() for line in lines]
    gap = metrics.height() // 3
    below = sum(heights) + gap * (len(lines) - 1) + 2 * _MARGIN
    page = QImage(image.width(), image.height() + below, QImage.Format.Format_RGB32)
    page.fill(_PAPER)
    painter = QPainter(page)
    try:
        painter.drawImage(QRect(0, 0, image.width(), image.height()), image)
        painter.setFont(font)
        painter.setPen(_INK)
        top = image.height() + _MARGIN
        for line, height in zip(lines, heights, strict=True):
            painter.drawText(QRect(_MARGIN, top, width, height), flags, line)
            top += height + gap
    finally:
        painter.end()
    return page
