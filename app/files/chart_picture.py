"""The angle chart as a picture: PNG, or PDF on A4 across."""

from pathlib import Path
from typing import BinaryIO, Final

from matplotlib.figure import Figure

from app.files.atomic import write_atomically
from app.files.chart_curve import curve_page
from app.files.chart_map import map_page
from app.files.chart_style import drawing_style, pdf_metadata
from app.files.provenance import Provenance
from geometry.assess import Assessment
from geometry.errors import BadInput, Fault

_PNG_DOTS_PER_INCH: Final = 200
_PDF_DOTS_PER_INCH: Final = 300
SUFFIXES: Final = (".png", ".pdf")


def write_chart_picture(assessment: Assessment, provenance: Provenance, path: Path) -> None:
    """Write the chart in the format of the path's suffix. Raises BadInput for another, or where it cannot."""
    suffix = path.suffix.lower()
    if suffix not in SUFFIXES:
        raise BadInput([Fault(str(path), "", f"the suffix '{path.suffix}'", f"one of {', '.join(SUFFIXES)}")])
    # Hatches take their width, and text its font, when they are made and again when they are drawn.
    with drawing_style():
        page = chart_page(assessment, provenance)
        write_atomically(path, lambda stream: _save(page, stream, suffix, provenance))


def chart_page(assessment: Assessment, provenance: Provenance) -> Figure:
    """Return the chart: a map, or a curve where one of the axes cannot turn."""
    exact = assessment.map
    one_line = min(len(exact.gantry_deg), len(exact.couch_deg)) == 1
    return curve_page(assessment, provenance) if one_line else map_page(assessment, provenance)


def _save(page: Figure, stream: BinaryIO, suffix: str, provenance: Provenance) -> None:
    """Save with the provenance inside, and without the hour, so that the same result gives the same file."""
    metadata = pdf_metadata(provenance, f"{provenance.setup} – {provenance.room}")
    if suffix == ".png":
        story = {"Description": metadata["Subject"], "Software": metadata["Creator"]}
        page.savefig(stream, format="png", dpi=_PNG_DOTS_PER_INCH, metadata={"Title": metadata["Title"], **story})
        return
    page.savefig(stream, format="pdf", dpi=_PDF_DOTS_PER_INCH, metadata=metadata)
