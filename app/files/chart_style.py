"""Letters and lines of everything that is drawn on paper, and how it is dated."""

import contextlib
import datetime
import warnings
from collections.abc import Iterator
from typing import Final

from matplotlib import font_manager, rc_context

from app.files.provenance import Provenance

_STYLE: Final[dict[str, object]] = {
    # TrueType, so that text in the PDF can be searched and copied.
    "pdf.fonttype": 42,
    "hatch.linewidth": 0.5,
}
# matplotlib brings the first; the others, where a computer has them, hold the letters of names that it lacks.
_FONTS: Final = (
    "DejaVu Sans",
    "Noto Sans CJK SC",
    "Noto Sans CJK JP",
    "Microsoft YaHei",
    "Yu Gothic",
    "Malgun Gothic",
    "Hiragino Sans",
    "Arial Unicode MS",
    "Noto Sans Devanagari",
    "Noto Sans Thai",
)


@contextlib.contextmanager
def drawing_style() -> Iterator[None]:
    """Hold fonts and lines while a page is made and saved: both ask for them."""
    style = _STYLE | {"font.family": _fonts_here()}
    with rc_context(style), warnings.catch_warnings():  # type: ignore[arg-type]  # keys are literals in the stub
        # A letter that no font here has becomes an empty box; the file's properties still hold it.
        warnings.filterwarnings("ignore", message="Glyph .* missing from")
        yield


def pdf_metadata(provenance: Provenance, title: str) -> dict[str, object]:
    """Return what a PDF says of itself: the provenance, and the day without the hour, so that it is the same again."""
    noon = datetime.datetime.combine(provenance.date, datetime.time(12), tzinfo=datetime.UTC)
    story = "\n".join(f"{label}: {text}" for label, text in provenance.lines())
    program = f"Wideberth {provenance.version}"
    return {"Title": title, "Subject": story, "Creator": program, "CreationDate": noon, "ModDate": noon}


def _fonts_here() -> list[str]:
    known = set(font_manager.get_font_names())
    return [name for name in _FONTS if name in known]
