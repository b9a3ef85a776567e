"""Pages of a sheet of paper: millimetres from the top left corner, text that fits, blocks that flow on."""

import re
import unicodedata
from collections.abc import Callable
from functools import lru_cache
from typing import Final, Literal

from matplotlib import rcParams
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.font_manager import FontProperties
from matplotlib.lines import Line2D
from matplotlib.patches import Rectangle
from matplotlib.textpath import text_to_path

Paper = Literal["A4", "Letter"]
# Width and height of the paper upright, mm.
PAPERS: Final[dict[Paper, tuple[float, float]]] = {"A4": (210.0, 297.0), "Letter": (215.9, 279.4)}
MARGIN_MM: Final = 12.0
FOOT_MM: Final = 15.0
INK: Final = "#000000"
GREY: Final = "#4a4a4a"
RULE: Final = "#8a8a8a"
# Points; nothing on the sheet is smaller.
SMALL: Final = 8.0
BODY: Final = 8.5
# Between a number and its unit stands something narrow that is no blank, until the lines are made.
_LENGTH: Final = re.compile(r"(\d) (mm|m)\b")
_BOUND: Final = "\u2024"
_MM_PER_POINT: Final = 25.4 / 72.0
_MM_PER_INCH: Final = 25.4
# Lines of text stand this many letter heights apart.
LEADING: Final = 1.22


def line_mm(size: float) -> float:
    """Return the height of a line of letters of so many points, mm."""
    return size * _MM_PER_POINT * LEADING


def width_mm(text: str, size: float, bold: bool) -> float:
    """Return how wide a text is in the fonts of now (`app.files.chart_style.drawing_style`), mm."""
    return _width_mm(text, size, bold, tuple(rcParams["font.family"]))


@lru_cache(maxsize=20_000)
def _width_mm(text: str, size: float, bold: bool, _family: tuple[str, ...]) -> float:
    letters = FontProperties(size=size, weight="bold" if bold else "normal")
    width, _, _ = text_to_path.get_text_width_height_descent(text, letters, ismath=False)
    return float(width) * _MM_PER_POINT


def clean(text: str) -> str:
    """Return a text without line breaks and signs that nobody can print."""
    return "".join(c if c.isprintable() else " " for c in unicodedata.normalize("NFC", text))


def wrapped(text: str, across_mm: float, size: float = BODY, *, bold: bool = False, most: int = 99) -> list[str]:
    """Return the lines of a text, none wider than `across_mm`, a length never apart from its unit.

    A word that is too long is broken. Lines beyond `most` are cut off, the last then ends in "…".
    """
    lines: list[str] = []
    line = ""
    for word in _LENGTH.sub(f"\\1{_BOUND}\\2", clean(text)).split():
        joined = f"{line} {word}" if line else word
        if width_mm(joined, size, bold) <= across_mm:
            line = joined
            continue
        if line:
            lines.append(line)
        while width_mm(word, size, bold) > across_mm:
            length = _fitting(word, across_mm, size, bold)
            lines.append(word[:length])
            word = word[length:]  # noqa: PLW2901 - what is left of it
        line = word
    lines = [one.replace(_BOUND, " ") for one in (*lines, line)]
    if len(lines) > most:
        return [*lines[: most - 1], shortened(" ".join(lines[most - 1 :]), across_mm, size, bold=bold)]
    return lines


def shortened(text: str, across_mm: float, size: float = BODY, *, bold: bool = False) -> str:
    """Return a text on one line, its end cut off and marked with "…" where it is too wide."""
    text = clean(text)
    if width_mm(text, size, bold) <= across_mm:
        return text
    length = _fitting(text, across_mm - width_mm("…", size, bold), size, bold)
    return f"{text[:length].rstrip()}…"


class Page:
    """One page: a figure with axes in mm, x to the right, y down."""

    def __init__(self, paper: Paper) -> None:
        self.width_mm, self.height_mm = PAPERS[paper]
        self.figure = Figure(figsize=(self.width_mm / _MM_PER_INCH, self.height_mm / _MM_PER_INCH), facecolor="white")
        self._axes = self.figure.add_axes((0.0, 0.0, 1.0, 1.0))
        self._axes.set_xlim(0.0, self.width_mm)
        self._axes.set_ylim(self.height_mm, 0.0)
        self._axes.axis("off")

    def text(
        self,
        x: float,
        y: float,
        words: str,
        size: float = BODY,
        *,
        bold: bool = False,
        colour: str = INK,
        align: Literal["left", "center", "right"] = "left",
    ) -> None:
        """Write a line; `y` is the middle of its letters."""
        weight = "bold" if bold else "normal"
        self._axes.text(
            x,
            y,
            words,
            fontsize=size,
            fontweight=weight,
            color=colour,
            ha=align,
            va="center_baseline",
            parse_math=False,
        )

    def lines(self, x: float, y: float, lines: list[str], size: float = BODY, *, bold: bool = False) -> float:
        """Write lines from `y`, their upper edge, down; return where they end."""
        step = line_mm(size)
        for k, line in enumerate(lines):
            self.text(x, y + (k + 0.5) * step, line, size, bold=bold)
        return y + len(lines) * step

    def rule(self, y: float, left: float, right: float, *, width: float = 0.5, colour: str = RULE) -> None:
        """Draw a line across."""
        self._axes.add_line(Line2D([left, right], [y, y], linewidth=width, color=colour, solid_capstyle="butt"))

    def box(
        self,
        left: float,
        top: float,
        across: float,
        down: float,
        *,
        width: float = 0.8,
        fill: str = "none",
        edge: str = INK,
        hatch: str | None = None,
    ) -> None:
        """Draw a rectangle."""
        self._axes.add_patch(
            Rectangle((left, top), across, down, linewidth=width, facecolor=fill, edgecolor=edge, hatch=hatch)
        )

    def tick_box(self, x: float, y: float, size_mm: float = 3.4, *, struck: bool = False) -> None:
        """Draw a box to tick, its left edge at `x`, its middle at `y`; a struck one is not to be ticked."""
        low, high = y - size_mm / 2.0, y + size_mm / 2.0
        self.box(x, low, size_mm, size_mm, width=0.8)
        for ends in ([low, high], [high, low]) if struck else ():
            self._axes.add_line(Line2D([x, x + size_mm], ends, linewidth=1.4, color=INK))

    def axes(self, left: float, top: float, across: float, down: float) -> Axes:
        """Return axes of their own at a place, mm."""
        return self.figure.add_axes(
            (
                left / self.width_mm,
                1.0 - (top + down) / self.height_mm,
                across / self.width_mm,
                down / self.height_mm,
            )
        )


class Pages:
    """The pages of a sheet, and from where down the last of them is empty (`y`)."""

    def __init__(self, paper: Paper) -> None:
        self._paper: Paper = paper
        self.all: list[Page] = [Page(paper)]
        self.y = MARGIN_MM
        self.left = MARGIN_MM
        self.right = self.page.width_mm - MARGIN_MM
        self.bottom = self.page.height_mm - FOOT_MM

    @property
    def page(self) -> Page:
        """The last page."""
        return self.all[-1]

    @property
    def across(self) -> float:
        """The width between the margins, mm."""
        return self.right - self.left

    @property
    def free(self) -> float:
        """How much of the page is left, mm."""
        return self.bottom - self.y

    def need(self, down: float, head: Callable[[], None] | None = None) -> None:
        """Go on to a new page unless so many mm are left on this one; `head` is drawn there first."""
        if down <= self.free:
            return
        self.all.append(Page(self._paper))
        self.y = MARGIN_MM
        if head is not None:
            head()

    def heading(self, words: str, keep_with: float = 20.0) -> None:
        """Write a heading, on a page with so many mm left under it."""
        down = line_mm(11.0) + 1.6
        self.need(down + 2.0 + keep_with)
        if self.y > MARGIN_MM:
            self.y += 2.5
        self.page.text(self.left, self.y + line_mm(11.0) / 2.0, words, 11.0, bold=True)
        self.page.rule(self.y + line_mm(11.0) + 0.6, self.left, self.right, width=1.2, colour=INK)
        self.y += down + 0.8

    def paragraph(self, words: str, size: float = BODY, *, bold: bool = False, most: int = 99) -> None:
        """Write a text over the whole width; it goes on on the next page where it must."""
        for line in wrapped(words, self.across, size, bold=bold, most=most):
            self.need(line_mm(size))
            self.y = self.page.lines(self.left, self.y, [line], size, bold=bold)


def _fitting(text: str, across_mm: float, size: float, bold: bool) -> int:
    """Return how many letters of a text fit, one at least."""
    low, high = 1, len(text)
    while low < high:
        middle = (low + high + 1) // 2
        if width_mm(text[:middle], size, bold) <= across_mm:
            low = middle
        else:
            high = middle - 1
    return low
