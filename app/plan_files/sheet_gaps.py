"""Measured gaps beside the computed ones, on the dry-run sheet."""

from collections.abc import Sequence
from typing import Final

from app.files.readings import clearance_text
from app.plan.dry_run_words import angle_text
from app.plan.gaps import GapRow
from app.plan_files.sheet_page import BODY, INK, SMALL, Pages, line_mm, wrapped

_SHARES: Final = (0.16, 0.085, 0.085, 0.105, 0.105, 0.11, 0.35)
_TITLES: Final = ("Field", "Gantry", "Couch", "Measured", "Computed", "Difference", "By, on, remarks")
_PAD: Final = 1.3


def add_gaps(pages: Pages, gaps: Sequence[GapRow]) -> None:
    """Draw the table where there are any."""
    if not gaps:
        return
    lefts = [pages.left + sum(_SHARES[:k]) * pages.across for k in range(len(_SHARES))]

    def head() -> None:
        down = line_mm(BODY) + 1.4
        pages.page.box(pages.left, pages.y, pages.across, down, width=0.0, fill="#dedede")
        for left, title in zip(lefts, _TITLES, strict=True):
            pages.page.text(left + _PAD, pages.y + down / 2.0, title, BODY, bold=True)
        pages.y += down

    pages.heading("Gaps measured so far", keep_with=20.0)
    head()
    for row in gaps:
        cells = [
            wrapped(text, share * pages.across - 2.0 * _PAD, SMALL, bold=row.is_flagged)
            for text, share in zip(gap_texts(row), _SHARES, strict=True)
        ]
        down = max(len(lines) for lines in cells) * line_mm(SMALL) + 1.6
        pages.need(down, head)
        for left, lines in zip(lefts, cells, strict=True):
            pages.page.lines(left + _PAD, pages.y + 0.8, lines, SMALL, bold=row.is_flagged)
        pages.page.rule(pages.y, pages.left, pages.right, width=0.4)
        if row.is_flagged:
            pages.page.box(pages.left, pages.y + 0.2, pages.across, down - 0.4, width=1.6, edge=INK)
        pages.y += down


def gap_texts(row: GapRow) -> tuple[str, str, str, str, str, str, str]:
    """Return a row's cells in words, in the order of the columns."""
    gap = row.gap
    difference = "" if row.difference_mm is None else f"{row.difference_mm:+.1f} mm"
    remarks = ", ".join(text for text in (gap.by, gap.on) if text)
    return (
        gap.field,
        angle_text(gap.gantry_deg),
        angle_text(gap.couch_deg),
        f"{gap.measured_mm:.1f} mm",
        "none" if row.computed_mm is None else clearance_text(row.computed_mm),
        difference,
        "; ".join(text for text in (remarks, row.words) if text),
    )
