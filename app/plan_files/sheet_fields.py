"""The table of fields and moves on the dry-run sheet, in the order in which they are run."""

from typing import Final

from app.files.readings import clearance_text
from app.plan.dry_run import DO_NOT_RUN, NOT_PERMITTED, DryRun, FieldRow, MoveRow
from app.plan.dry_run_places import Place
from app.plan.dry_run_words import Turn, point_text
from app.plan_files.sheet_page import BODY, GREY, INK, SMALL, Page, Pages, line_mm, wrapped

_PAD: Final = 1.3
# Shares of the width: number and name, angles, clearance, where to look, measured gap.
_SHARES: Final = (0.148, 0.233, 0.154, 0.342, 0.123)
_TITLES: Final = ("Field", "Angles", "Clearance", "Where to stop and look", "Measured")
_TITLE_SIZE: Final = 8.5
_ANGLE_SIZE: Final = 8.8
_NAME_LINES: Final = 5
_GAP_BOX: Final = 9.6
_KEY: Final = (
    "Clearance: proved over the whole field and the readouts' tolerances. Gap: exact at the stated angles. Both are "
    "rounded down. Left, right, above, below: of the isocentre, seen from the foot end, facing the gantry. CW: "
    "clockwise, CC: counter-clockwise, so seen."
)
_OWN_KEY: Final = " Angles are IEC 61217 and, after 'machine', as the machine shows them."
Cell = tuple[str, float, bool]


def add_fields(pages: Pages, rows: DryRun) -> None:
    """Draw the table; a row never breaks over two pages, and each page repeats the heads of the columns."""
    table = _Table(pages, rows)
    pages.heading("Fields and moves, in this order", keep_with=36.0)
    own = rows.scales.gantry is not None or rows.scales.couch is not None
    pages.paragraph(f"{_KEY}{_OWN_KEY if own else ''}", SMALL)
    pages.y += 0.8
    table.head()
    moves = {move.before: move for move in rows.moves}
    for row in rows.fields:
        table.field(row)
        if row.number in moves:
            table.move(moves[row.number])


class _Table:
    """Draws rows one below the other."""

    def __init__(self, pages: Pages, rows: DryRun) -> None:
        self._pages = pages
        self._rows = rows
        widths = [share * pages.across for share in _SHARES]
        self._lefts = [pages.left + sum(widths[:k]) for k in range(len(widths))]
        self._inner = [width - 2.0 * _PAD for width in widths]

    def head(self) -> None:
        """Draw the heads of the columns."""
        pages = self._pages
        down = line_mm(_TITLE_SIZE) + 1.4
        pages.page.box(pages.left, pages.y, pages.across, down, width=0.0, fill="#dedede")
        for left, title in zip(self._lefts, _TITLES, strict=True):
            pages.page.text(left + _PAD, pages.y + down / 2.0, title, _TITLE_SIZE, bold=True)
        pages.y += down

    def field(self, row: FieldRow) -> None:
        """Draw a field."""
        columns = [self._name(row), self._angles(row), self._clearance(row), self._look(row)]
        remarks = self._remarks(row)
        lines = max(_height(cells) for cells in columns)
        down = max(lines, _GAP_BOX * len(self._gap_places(row))) + 2.0 * _PAD
        down += len(remarks) * line_mm(SMALL) + (0.6 if remarks else 0.0)
        self._pages.need(down, self.head)
        page, top = self._pages.page, self._pages.y
        if not row.permitted:
            page.box(self._pages.left, top + 0.3, self._pages.across, down - 0.6, width=2.2)
        page.rule(top, self._pages.left, self._pages.right, width=0.9, colour=INK)
        for k, cells in enumerate(columns):
            _write(page, self._lefts[k] + _PAD, top + _PAD, cells)
        page.tick_box(self._lefts[0] + _PAD, top + _PAD + 2.1, struck=not row.permitted)
        self._gap_boxes(page, row, top + _PAD)
        if remarks:
            page.lines(self._lefts[1] + _PAD, top + down - _PAD - len(remarks) * line_mm(SMALL), remarks, SMALL)
        self._pages.y += down

    def move(self, row: MoveRow) -> None:
        """Draw a move, as a narrow grey band between its fields."""
        left = self._lefts[1] + _PAD
        across = self._pages.right - left - _PAD
        words = self._move_words(row)
        lines = [line for part in words for line in wrapped(part, across, SMALL)]
        down = max(len(lines), 1) * line_mm(SMALL) + 1.6
        self._pages.need(down, self.head)
        page, top = self._pages.page, self._pages.y
        page.box(self._pages.left, top, self._pages.across, down, width=0.0, fill="#f0f0f0")
        if not row.permitted:
            page.box(self._pages.left, top + 0.3, self._pages.across, down - 0.6, width=2.2)
        page.rule(top, self._pages.left, self._pages.right, width=0.4)
        middle = top + 0.8 + line_mm(SMALL) / 2.0
        page.tick_box(self._lefts[0] + _PAD, middle, 2.8, struck=not row.permitted)
        page.text(self._lefts[0] + _PAD + 4.4, middle, f"Move {row.before} → {row.after}", SMALL, bold=True)
        y = top + 0.8
        for k, line in enumerate(lines):
            page.lines(left, y, [line], SMALL, bold=not row.permitted and k == 0)
            y += line_mm(SMALL)
        self._pages.y += down

    def _move_words(self, row: MoveRow) -> list[str]:
        if not row.permitted:
            return [f"{row.state}. Do not drive this move, unless your local rules say how.", row.reason]
        return [*self._permitted_move(row), *([f"{row.reason[:1].upper()}{row.reason[1:]}"] if row.reason else [])]

    def _permitted_move(self, row: MoveRow) -> list[str]:
        if not row.steps:
            return ["Nothing moves."]
        steps = "; then ".join(row.steps)
        first = f"First {steps}" if len(row.steps) > 1 else f"{steps[:1].upper()}{steps[1:]}"
        required = f" (required {row.required})" if row.required else ""
        clearance = f"Clearance {row.least}{required}{_between(row.parts)}"
        if row.tightest is None:
            return [first, clearance]
        place = row.tightest
        at = f"at {point_text((place.gantry_deg, place.couch_deg), self._rows.scales)}"
        if row.end is not None:
            at = f"where field {row.end} {'ends' if row.end == row.before else 'starts'}"
            if self._rows.fields[row.end - 1].kind != "arc":
                return [first, f"{clearance}. Tightest {at}"]
        return [first, f"{clearance}. Tightest {at}: {place.side or 'nothing near'}"]

    def _name(self, row: FieldRow) -> list[Cell]:
        across = self._inner[0]
        cells: list[Cell] = [(f"      {row.number}", 12.0, True)]
        cells += [(line, BODY, True) for line in wrapped(row.name, across, BODY, bold=True, most=_NAME_LINES)]
        cells.append((row.kind, SMALL, False))
        if row.is_setup:
            cells.append(("SET-UP FIELD", SMALL, True))
        return cells

    def _angles(self, row: FieldRow) -> list[Cell]:
        cells: list[Cell] = []
        for name, turn in (("Gantry", row.gantry), ("Couch", row.couch)):
            cells += self._turn(name, turn)
        cells.append((f"Collimator {row.collimator}", SMALL, False))
        return cells

    def _turn(self, name: str, turn: Turn) -> list[Cell]:
        across = self._inner[1]
        sense = f" {turn.sense}" if name == "Gantry" and turn.sense else ""
        cells = [
            (line, _ANGLE_SIZE, True) for line in wrapped(f"{name} {turn.iec}{sense}", across, _ANGLE_SIZE, bold=True)
        ]
        if turn.own is not None:
            cells.append((f"machine {turn.own}", _ANGLE_SIZE, True))
        if name == "Couch" and turn.sense:
            cells.append((turn.sense, SMALL, False))
        return [cell for text, size, bold in cells for cell in _fitted(text, across, size, bold=bold)]

    def _clearance(self, row: FieldRow) -> list[Cell]:
        across = self._inner[2]
        if row.permitted:
            cells: list[Cell] = [("permitted", BODY, False), (row.least, _ANGLE_SIZE, True)]
        else:
            cells = [(NOT_PERMITTED, SMALL, True), (row.state.removeprefix(f"{NOT_PERMITTED}: "), _ANGLE_SIZE, True)]
            cells.append((f"clearance {row.least}", SMALL, False))
        if row.required:
            cells.append((f"required {row.required}", SMALL, False))
        return [cell for text, size, bold in cells for cell in _fitted(text, across, size, bold=bold)]

    def _look(self, row: FieldRow) -> list[Cell]:
        across = self._inner[3]
        tightest = row.tightest
        heads: list[tuple[str, bool]] = []
        if not row.permitted:
            heads.append((DO_NOT_RUN, True))
            if row.first is not None:
                heads.append((self._place("Short from", row.first, row), True))
                heads += [(words, False) for words in self._around(row.first)]
            if tightest is not None:
                heads.append((self._place(row.look, tightest, row), False))
        elif row.stop is not None:
            heads.append((self._place("Stop at", row.stop, row), True))
            if tightest is not None:
                heads.append((self._place(row.look, tightest, row), False))
        elif tightest is not None:
            where = "At the start, the tightest place" if row.kind == "arc" else "At the field"
            heads.append((f"{where}: gap {clearance_text(tightest.clearance_mm)}", True))
        cells = [cell for words, bold in heads for cell in _fitted(words, across, BODY, bold=bold)]
        if tightest is not None:
            for words in self._around(tightest):
                cells += _fitted(words, across, SMALL, bold=False)
        return cells

    def _around(self, place: Place) -> list[str]:
        """Return what is near at a place, and where to look for it."""
        return [words for words in (_between(place.parts).removeprefix(", "), place.side) if words]

    def _place(self, words: str, place: Place, row: FieldRow) -> str:
        """Return where a place is, the axes that turn on both scales, and its gap."""
        at = point_text((place.gantry_deg, place.couch_deg), self._rows.scales, row.turning) or "the field"
        return f"{words} {at}: gap {clearance_text(place.clearance_mm)}"

    def _remarks(self, row: FieldRow) -> list[str]:
        if not row.remarks:
            return []
        across = self._pages.right - self._lefts[1] - 2.0 * _PAD
        return wrapped("; ".join(row.remarks) + ".", across, SMALL)

    def _gap_boxes(self, page: Page, row: FieldRow, top: float) -> None:
        """Draw where measured gaps are written, one for each place to look at."""
        left, across = self._lefts[4] + _PAD, self._inner[4]
        if not row.permitted:
            page.text(left, top + line_mm(SMALL) / 2.0, "none: not run", SMALL, colour=GREY)
            return
        y = top
        for words in self._gap_places(row):
            page.text(left, y + line_mm(SMALL) / 2.0, words, SMALL, colour=GREY)
            page.rule(y + 8.2, left, left + across - 7.0, width=0.8, colour=INK)
            page.text(left + across, y + 7.2, "mm", BODY, align="right")
            y += _GAP_BOX

    def _gap_places(self, row: FieldRow) -> list[str]:
        if not row.permitted or row.tightest is None:
            return []
        here = "at its start" if row.kind == "arc" else "at the field"
        return [here] if row.stop is None else ["at the stop", "at the tightest"]


def _fitted(text: str, across: float, size: float, *, bold: bool) -> list[Cell]:
    return [(line, size, bold) for line in wrapped(text, across, size, bold=bold)]


def _height(cells: list[Cell]) -> float:
    return sum(line_mm(size) for _, size, _ in cells)


def _write(page: Page, x: float, y: float, cells: list[Cell]) -> None:
    for text, size, bold in cells:
        y = page.lines(x, y, [text], size, bold=bold)


def _between(parts: tuple[str, str] | None) -> str:
    """Return the parts without their sides, as people in the room call them."""
    if parts is None:
        return ""
    names = [label.partition("/")[2] for label in parts]
    if names[0] == names[1]:
        names = list(parts)
    return f", {names[0]} – {names[1]}"
