"""The dry-run sheet as a PDF to print: A4 or Letter, readable in black and white."""

from collections.abc import Sequence
from pathlib import Path
from typing import BinaryIO, Final

from matplotlib.backends.backend_pdf import PdfPages

from app.files.atomic import write_atomically
from app.files.chart_style import drawing_style, pdf_metadata
from app.files.provenance import Provenance
from app.plan.dry_run import dry_run
from app.plan.gaps import GapRow
from app.plan_files.sheet_chart import add_chart
from app.plan_files.sheet_fields import add_fields
from app.plan_files.sheet_gaps import add_gaps
from app.plan_files.sheet_head import add_checks, add_end, add_feet, add_head, add_remarks
from app.plan_files.sheet_page import Page, Pages, Paper
from app.plan_files.sheet_picture import add_picture
from geometry.assess import Assessment
from geometry.treatment.data import CheckReport

_DOTS_PER_INCH: Final = 300


def write_sheet(
    report: CheckReport,
    assessment: Assessment | None,
    provenance: Provenance,
    path: Path,
    paper: Paper = "A4",
    gaps: Sequence[GapRow] = (),
) -> None:
    """Write the sheet. `assessment` shades the chart, `gaps` are shown where there are any.

    Raises BadInput where the file cannot be written.
    """
    with drawing_style():
        pages = sheet_pages(report, assessment, provenance, paper, gaps)
        metadata = pdf_metadata(provenance, f"Dry-run sheet: {provenance.setup} – {provenance.room}")
        write_atomically(path, lambda stream: _save(pages, stream, metadata))


def sheet_pages(
    report: CheckReport,
    assessment: Assessment | None,
    provenance: Provenance,
    paper: Paper = "A4",
    gaps: Sequence[GapRow] = (),
) -> list[Page]:
    """Return the pages, drawn; to be called and saved under `app.files.chart_style.drawing_style`."""
    rows = dry_run(report)
    room = report.setup.room
    pages = Pages(paper)
    add_head(pages, rows, provenance)
    gantry, couch = (min(max(0.0, axis.low), axis.high) for axis in (room.gantry, room.couch.turntable))
    add_picture(pages, report.scene, gantry, couch)
    add_checks(pages, rows)
    add_remarks(pages, rows)
    add_fields(pages, rows)
    add_gaps(pages, gaps)
    add_chart(pages, report, assessment)
    add_end(pages, provenance)
    add_feet(pages, provenance)
    return pages.all


def _save(pages: Sequence[Page], stream: BinaryIO, metadata: dict[str, object]) -> None:
    with PdfPages(stream, metadata=metadata) as book:
        for page in pages:
            book.savefig(page.figure, dpi=_DOTS_PER_INCH)
