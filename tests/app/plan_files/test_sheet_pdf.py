"""The sheet as it is read back: text out of the PDF, and every text's place on the page."""

import math
import re
from itertools import combinations
from pathlib import Path

import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import to_rgb
from matplotlib.text import Text
from pypdf import PdfReader

from app.cautions import CAUTIONS
from app.files.chart_style import drawing_style
from app.files.readings import own_scales
from app.plan.dry_run import dry_run
from app.plan.dry_run_words import point_text
from app.plan.gaps import MeasuredGap, compare_gaps
from app.plan_files.check_json import check_values
from app.plan_files.sheet_page import SMALL, Page, Paper
from app.plan_files.sheet_pdf import sheet_pages, write_sheet
from geometry.errors import BadInput
from geometry.treatment.data import CheckReport
from tests.app.files.assessments import ROOM, one_couch_angle, plain, unsurveyed, without_travel
from tests.app.files.reports import provenance_for, report_on, report_with_scales, small_report


def pdf_texts(path: Path) -> list[str]:
    """Return the text of each page, blanks in a row as one."""
    return [re.sub(r"\s+", " ", page.extract_text()) for page in PdfReader(path).pages]


@pytest.fixture(scope="module")
def small_sheet(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("sheet") / "small.pdf"
    gaps = compare_gaps([MeasuredGap("down", 130.0, 0.0, 60.0, "K", "2026-03-04")], small_report())
    write_sheet(small_report(), plain(), provenance_for(small_report()), path, gaps=gaps)
    return path


def test_figures_on_paper_are_the_jsons(small_sheet: Path) -> None:
    text = " ".join(pdf_texts(small_sheet))
    values = check_values(small_report(), provenance_for(small_report()))
    fields, moves = values["fields"], values["moves"]
    assert isinstance(fields, list)
    assert isinstance(moves, list)
    shown = 0
    for field in fields:
        least = field["least_clearance_mm"]
        if least is not None:
            assert f"≥ {math.floor(10.0 * least + 1e-6) / 10.0:.1f} mm" in text
            shown += 1
        if field["look_at"] is not None:
            assert f"gap {math.floor(10.0 * field['look_at']['clearance_mm'] + 1e-6) / 10.0:.1f} mm" in text
            shown += 1
    for move in moves:
        if move["state"] == "permitted":
            least = min(step["least_clearance_mm"] for step in move["steps"])
            assert f"Clearance ≥ {math.floor(10.0 * least + 1e-6) / 10.0:.1f} mm" in text
            shown += 1
    assert shown == 4 + 5 + 3
    for name, value in values["inputs"]:  # type: ignore[attr-defined]
        if name in dict(dry_run(small_report()).checks):
            assert value.replace(" ", "") in text.replace(" ", "")


def test_every_page_says_where_it_belongs(small_sheet: Path) -> None:
    provenance = provenance_for(small_report())
    pages = pdf_texts(small_sheet)
    assert 1 < len(pages) <= 3
    for number, text in enumerate(pages, start=1):
        assert f"page {number} of {len(pages)}" in text
        assert provenance.short_fingerprint in text
        assert "DEMONSTRATION" in text
        assert "local procedures stand above it" in text
    whole = " ".join(pages)
    assert all(caution in whole for caution in CAUTIONS)
    assert provenance.fingerprint in whole
    assert provenance.room in pages[0]
    assert provenance.setup in pages[0]
    assert "Medical physicist: name, signature, date" in pages[-1]


def test_what_is_not_permitted_cannot_be_overlooked(small_sheet: Path) -> None:
    pages = pdf_texts(small_sheet)
    assert "NOT PERMITTED: 2 of 6 fields, 2 of 5 moves" in pages[0]
    whole = " ".join(pages)
    # The head, two fields and two moves.
    assert whole.count("NOT PERMITTED") == 5
    assert whole.count("Do not run, unless your local rules") == 2
    assert whole.count("Do not drive this move") == 2
    assert "SET-UP FIELD" in whole


def test_where_a_field_is_first_short_stands_before_where_it_meets(small_sheet: Path) -> None:
    whole = " ".join(pdf_texts(small_sheet))
    (row,) = [row for row in dry_run(small_report()).fields if row.first is not None]
    assert row.first is not None
    assert row.first.parts is not None
    at = whole.index(f"Short from couch {point_text((0.0, row.first.couch_deg), own_scales(ROOM), ('couch',))[6:]}")
    assert at < whole.index("Contact (nearest approach) at")
    assert row.first.parts[0].partition("/")[2] in whole[at:]


def test_measured_gaps_are_shown_beside_the_computed_ones(small_sheet: Path) -> None:
    whole = " ".join(pdf_texts(small_sheet))
    assert "Gaps measured so far" in whole
    assert "60.0 mm" in whole
    assert "less than computed" in whole


def test_the_same_report_gives_the_same_bytes(small_sheet: Path, tmp_path: Path) -> None:
    again = tmp_path / "again.pdf"
    gaps = compare_gaps([MeasuredGap("down", 130.0, 0.0, 60.0, "K", "2026-03-04")], small_report())
    write_sheet(small_report(), plain(), provenance_for(small_report()), again, gaps=gaps)
    assert again.read_bytes() == small_sheet.read_bytes()


def test_the_file_itself_tells_its_provenance(small_sheet: Path) -> None:
    told = PdfReader(small_sheet).metadata
    assert told is not None
    assert told.title == "Dry-run sheet: Small set-up – Small room"
    assert told.creation_date is not None
    assert told.creation_date.date().isoformat() == "2026-03-04"
    assert provenance_for(small_report()).fingerprint in str(told.subject)


@pytest.mark.parametrize("paper", ["A4", "Letter"])
def test_papers_sizes(paper: Paper, tmp_path: Path) -> None:
    path = tmp_path / "sheet.pdf"
    write_sheet(report_with_scales(), None, provenance_for(report_with_scales()), path, paper)
    box = PdfReader(path).pages[0].mediabox
    millimetres = (float(box.width) * 25.4 / 72.0, float(box.height) * 25.4 / 72.0)
    assert millimetres == pytest.approx({"A4": (210.0, 297.0), "Letter": (215.9, 279.4)}[paper], abs=0.01)


def test_both_scales_are_written_where_the_room_has_its_own(tmp_path: Path) -> None:
    path = tmp_path / "sheet.pdf"
    write_sheet(report_with_scales(), None, provenance_for(report_with_scales()), path)
    whole = " ".join(pdf_texts(path))
    assert "Gantry 330° → 20° CW" in whole
    assert "machine 210° → 160°" in whole
    assert "Gantry to 331° CC (machine 209°)" in whole
    assert "Clearances are not shown" in whole


def test_a_file_that_cannot_be_written_is_a_clear_error(tmp_path: Path) -> None:
    with pytest.raises(BadInput, match="no folder"):
        write_sheet(small_report(), None, provenance_for(small_report()), tmp_path / "none" / "sheet.pdf")


def texts_of(page: Page) -> list[tuple[Text, tuple[float, float, float, float]]]:
    """Return what is written outside charts and pictures, with its box in mm from the lower left corner."""
    FigureCanvasAgg(page.figure)
    page.figure.dpi = 200
    per_mm = 200 / 25.4
    found = []
    for text in page.figure.axes[0].texts:
        box = text.get_window_extent()
        found.append((text, (box.x0 / per_mm, box.y0 / per_mm, box.x1 / per_mm, box.y1 / per_mm)))
    return found


@pytest.mark.parametrize("paper", ["A4", "Letter"])
@pytest.mark.parametrize("which", ["small", "long names", "no travel", "one couch angle", "unsurveyed"])
def test_nothing_is_written_over_anything_nor_off_the_page_nor_too_small(which: str, paper: Paper) -> None:
    report: CheckReport = {
        "small": small_report,
        "long names": lambda: report_with_scales(12),
        "no travel": lambda: report_on(without_travel().scene.setup),
        "one couch angle": lambda: report_on(one_couch_angle().scene.setup),
        "unsurveyed": lambda: report_on(unsurveyed().scene.setup),
    }[which]()
    words = "much less " * 10
    gap = MeasuredGap(words * 2, 30.0, 0.0, 10.0, words, "2026-03-04", "0" * 16)
    with drawing_style():
        pages = sheet_pages(report, None, provenance_for(report), paper, compare_gaps([gap], report))
        assert len(pages) <= 4
        for page in pages:
            written = texts_of(page)
            for text, (left, bottom, right, top) in written:
                assert text.get_fontsize() >= SMALL
                assert left >= 11.5, text.get_text()
                assert right <= page.width_mm - 11.5, text.get_text()
                assert bottom >= 3.0
                assert top <= page.height_mm - 8.0
            for (one, a), (other, b) in combinations(written, 2):
                across = min(a[2], b[2]) - max(a[0], b[0])
                down = min(a[3], b[3]) - max(a[1], b[1])
                # Descenders and ascenders of neighbouring lines come near each other.
                assert across <= 0.2 or down <= 0.9, (one.get_text(), other.get_text())


def test_no_meaning_hangs_on_a_colour() -> None:
    with drawing_style():
        pages = sheet_pages(small_report(), None, provenance_for(small_report()))
    drawn = 0
    for page in pages:
        for axes in page.figure.axes:
            colours = [text.get_color() for text in axes.texts]
            colours += [patch.get_facecolor() for patch in axes.patches]
            colours += [line.get_color() for line in axes.lines]
            for colour in colours:
                red, green, blue = to_rgb(colour)
                # The charts' ink is a grey with a touch of blue.
                assert max(red, green, blue) - min(red, green, blue) < 0.1
                drawn += 1
    assert drawn > 200


def test_a_chart_is_shaded_where_an_assessment_is_given() -> None:
    report = report_on(one_couch_angle().scene.setup)
    with drawing_style():
        flat = sheet_pages(report, one_couch_angle(), provenance_for(report))
        shaded = sheet_pages(small_report(), plain(), provenance_for(small_report()))
        bare = sheet_pages(small_report(), None, provenance_for(small_report()))
    meshes = [
        sum(len(axes.collections) for page in pages for axes in page.figure.axes) for pages in (flat, shaded, bare)
    ]
    assert meshes[0] == meshes[2] == 0
    # The coarse grid of this assessment makes no contours.
    assert meshes[1] == 1
