"""The angle chart as a picture: PNG, or PDF on A4 across."""

import datetime
import warnings
from pathlib import Path
from typing import BinaryIO, Final

from matplotlib import font_manager, rc_context
from matplotlib.figure import Figure

from app.files.atomic import write_atomically
from app.files.chart_curve import curve_page
from app.files.chart_map import map_page
from app.files.provenance import Provenance
from geometry.assess import Assessment
from geometry.errors import BadInput, Fault

_PNG_DOTS_PER_INCH: Final = 200
_PDF_DOTS_PER_INCH: Final = 300
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
SUFFIXES: Final = (".png", ".pdf")


def write_chart_picture(assessment: Assessment, provenance: Provenance, path: Path) -> None:
    """Write the chart in the format of the path's suffix. Raises BadInput for another, or where it cannot."""
    suffix = path.suffix.lower()
    if suffix not in SUFFIXES:
        raise BadInput([Fault(str(path), "", f"the suffix '{path.suffix}'", f"one of {', '.join(SUFFIXES)}")])
    style = _STYLE | {"font.family": _fonts_here()}
    # Hatches take their width, and text its font, when they are made and again when they are drawn.
    with rc_context(style), warnings.catch_warnings():  # type: ignore[arg-type]  # keys are literals in the stub
        # A letter that no font here has becomes an empty box; the file's properties still hold it.
        warnings.filterwarnings("ignore", message="Glyph .* missing from")
        page = chart_page(assessment, provenance)
        write_atomically(path, lambda stream: _save(page, stream, suffix, provenance))


def chart_page(assessment: Assessment, provenance: Provenance) -> Figure:
    """Return the chart: a map, or a curve where one of the axes cannot turn."""
    exact = assessment.map
    one_line = min(len(exact.gantry_deg), len(exact.couch_deg)) == 1
    return curve_page(assessment, provenance) if one_line else map_page(assessment, provenance)


def _fonts_here() -> list[str]:
    known = set(font_manager.get_font_names())
    return [name for name in _FONTS if name in known]


def _save(page: Figure, stream: BinaryIO, suffix: str, provenance: Provenance) -> None:
    """Save with the provenance inside, and without the hour, so that the same result gives the same file."""
    story = "\n".join(f"{label}: {text}" for label, text in provenance.lines())
    title = f"{provenance.setup} – {provenance.room}"
    program = f"Wideberth {provenance.version}"
    if suffix == ".png":
        metadata: dict[str, object] = {"Title": title, "Description": story, "Software": program}
        page.savefig(stream, format="png", dpi=_PNG_DOTS_PER_INCH, metadata=metadata)
        return
    noon = datetime.datetime.combine(provenance.date, datetime.time(12), tzinfo=datetime.UTC)
    metadata = {"Title": title, "Subject": story, "Creator": program, "CreationDate": noon, "ModDate": noon}
    page.savefig(stream, format="pdf", dpi=_PDF_DOTS_PER_INCH, metadata=metadata)
