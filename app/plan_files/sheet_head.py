"""Head, foot, checks, cautions and signatures of the dry-run sheet."""

import math
from typing import Final

from app.files.provenance import Provenance
from app.plan.dry_run import DO_NOT_RUN, DryRun
from app.plan_files.sheet_page import BODY, GREY, INK, SMALL, Pages, line_mm, shortened, width_mm, wrapped

_MARK_SIZE: Final = 9.0
_SIGNATURES: Final = ("Dry run done by", "Checked by", "Medical physicist")
# Of what stands in the head already.
_IN_THE_HEAD: Final = ("Room", "Set-up", "Mark", "Date", "Program", "Survey", "Caution", "Grid", "No travel")
_MOST_BASIS_LINES: Final = 10


def add_head(pages: Pages, rows: DryRun, provenance: Provenance) -> None:
    """Write what the sheet is, whose, of when, its marks, and the verdict."""
    page = pages.page
    page.text(pages.left, pages.y + 3.2, "Dry-run sheet", 18.0, bold=True)
    y = pages.y + 0.4
    for mark in provenance.marks:
        across = width_mm(mark, _MARK_SIZE, bold=True) + 3.0
        page.box(pages.right - across, y, across, 5.2, width=0.0, fill=INK)
        page.text(pages.right - 1.5, y + 2.6, mark, _MARK_SIZE, bold=True, colour="white", align="right")
        y += 6.0
    pages.y = max(pages.y + 8.0, y if len(provenance.marks) > 1 else 0.0)
    for words, size in ((provenance.setup, 12.0), (provenance.room, 10.0)):
        for line in wrapped(words, pages.across, size, bold=size > 11.0, most=2):
            pages.y = page.lines(pages.left, pages.y, [line], size, bold=size > 11.0)
    facts = (
        f"{provenance.date.isoformat()}, Wideberth {provenance.version}, fingerprint {provenance.short_fingerprint}; "
        f"{provenance.survey}"
    )
    pages.paragraph(facts, BODY)
    pages.y += 1.2
    _verdict(pages, rows)
    for excess in provenance.no_travel:
        pages.paragraph(excess, BODY, bold=True)


def add_feet(pages: Pages, provenance: Provenance) -> None:
    """Write at every foot what belongs together, the marks and the page's number."""
    count = len(pages.all)
    for number, page in enumerate(pages.all, start=1):
        y = page.height_mm - 9.6
        page.rule(y - 2.6, pages.left, pages.right, width=0.6)
        right = f"fingerprint {provenance.short_fingerprint}   page {number} of {count}"
        page.text(pages.right, y, right, SMALL, bold=True, align="right")
        room = pages.across - width_mm(right, SMALL, bold=True) - 6.0
        names = f"{provenance.date.isoformat()}   {shortened(provenance.setup, 0.5 * room, SMALL)}   {provenance.room}"
        page.text(pages.left, y, shortened(names, room, SMALL), SMALL)
        marks = "   ".join(mark.partition(":")[0] for mark in provenance.marks)
        page.text(pages.right, y + 3.7, marks, SMALL, bold=True, align="right")
        caution = "Planning aid: interlocks and local procedures stand above it. Watch the patient throughout."
        page.text(pages.left, y + 3.7, caution, SMALL, colour=GREY)


def add_checks(pages: Pages, rows: DryRun) -> None:
    """Draw the values that people check in the room, with boxes to tick, in two columns."""
    pages.heading("Check before anything moves", keep_with=20.0)
    across = (pages.across - 6.0) / 2.0
    label = 0.34 * across
    entries = [(name, wrapped(text, across - label - 6.0, BODY, bold=True)) for name, text in rows.checks]
    heights = [len(lines) * line_mm(BODY) + 1.1 for _, lines in entries]
    half = _half(heights)
    top = pages.y
    ends = []
    for column, span in enumerate((range(half), range(half, len(entries)))):
        left, y = pages.left + column * (across + 6.0), top
        for k in span:
            name, lines = entries[k]
            pages.page.tick_box(left, y + line_mm(BODY) / 2.0 + 0.3, 2.9)
            pages.page.text(
                left + 4.6, y + line_mm(BODY) / 2.0 + 0.3, shortened(name, label, SMALL), SMALL, colour=GREY
            )
            pages.page.lines(left + 5.5 + label, y + 0.3, lines, BODY, bold=True)
            y += heights[k]
            pages.page.rule(y, left, left + across, width=0.3)
        ends.append(y)
    pages.y = max(ends)


def add_remarks(pages: Pages, rows: DryRun) -> None:
    """Write what differs between plan and set-up, and what else is worth knowing."""
    if not rows.remarks:
        return
    pages.heading("Remarks", keep_with=8.0)
    for remark in rows.remarks:
        pages.paragraph(remark, BODY)


def add_end(pages: Pages, provenance: Provenance) -> None:
    """Write cautions, what the figures rest on, and where people sign."""
    facts = ". ".join(f"{name}: {text}" for name, text in provenance.lines() if name not in _IN_THE_HEAD)
    basis = wrapped(f"{facts}.", pages.across, SMALL)
    if len(basis) > _MOST_BASIS_LINES:
        basis = [
            *basis[: _MOST_BASIS_LINES - 1],
            "… the rest stands in this file's own properties and in the workbook.",
        ]
    pages.heading("What the figures rest on", keep_with=len(basis) * line_mm(SMALL))
    pages.y = pages.page.lines(pages.left, pages.y, basis, SMALL)
    cautions = [line for text in provenance.cautions for line in wrapped(text, pages.across, BODY, bold=True)]
    down = len(cautions) * line_mm(BODY)
    pages.heading("Cautions and signatures", keep_with=down + 15.0)
    pages.y = pages.page.lines(pages.left, pages.y, cautions, BODY, bold=True) + 9.0
    across = pages.across / len(_SIGNATURES)
    for k, words in enumerate(_SIGNATURES):
        left = pages.left + k * across
        pages.page.rule(pages.y, left, left + across - 4.0, width=0.8, colour=INK)
        pages.page.text(left, pages.y + 2.3, f"{words}: name, signature, date", SMALL, colour=GREY)
    pages.y += 5.0


def _verdict(pages: Pages, rows: DryRun) -> None:
    """Write the verdict in a frame, white on black where something is not permitted."""
    page = pages.page
    lines = [rows.verdict]
    if not rows.permitted:
        lines += wrapped(f"What is not permitted: {DO_NOT_RUN[0].lower()}{DO_NOT_RUN[1:]}", pages.across - 5.0, 9.0)
    down = line_mm(12.0) + (len(lines) - 1) * line_mm(9.0) + 2.4
    page.box(pages.left, pages.y, pages.across, down, width=1.2, fill="white" if rows.permitted else INK)
    colour = INK if rows.permitted else "white"
    page.text(pages.left + 2.0, pages.y + 1.2 + line_mm(12.0) / 2.0, lines[0], 12.0, bold=True, colour=colour)
    for k, line in enumerate(lines[1:]):
        y = pages.y + 1.2 + line_mm(12.0) + (k + 0.5) * line_mm(9.0)
        page.text(pages.left + 2.0, y, line, 9.0, colour=colour)
    pages.y += down + 1.6


def _half(heights: list[float]) -> int:
    """Return how many entries go into the left column so that both are about as high."""
    total, so_far = math.fsum(heights), 0.0
    for k, height in enumerate(heights):
        if so_far + height / 2.0 >= total / 2.0:
            return max(k, 1)
        so_far += height
    return len(heights)
