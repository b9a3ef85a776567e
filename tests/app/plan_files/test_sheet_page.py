import pytest
from hypothesis import given
from hypothesis import strategies as st

from app.files.chart_style import drawing_style
from app.plan_files.sheet_page import (
    MARGIN_MM,
    PAPERS,
    Page,
    Pages,
    Paper,
    clean,
    line_mm,
    shortened,
    width_mm,
    wrapped,
)


@pytest.mark.parametrize("paper", ["A4", "Letter"])
def test_pages_have_the_papers_size(paper: Paper) -> None:
    # ISO 216 and ANSI/ASME Y14.1.
    size = {"A4": (210.0, 297.0), "Letter": (215.9, 279.4)}[paper]
    assert PAPERS[paper] == size
    width, height = Page(paper).figure.get_size_inches()
    assert (width * 25.4, height * 25.4) == pytest.approx(size)


def test_letters_of_ten_points_are_as_wide_as_the_font_says() -> None:
    # DejaVu Sans: an em of 2048 units, "H" advances by 1540 (its hmtx table).
    assert width_mm("HHHHHHHHHH", 10.0, bold=False) == pytest.approx(10 * 1540 / 2048 * 10.0 * 25.4 / 72.0, rel=0.02)
    assert width_mm("HH", 10.0, bold=True) > width_mm("HH", 10.0, bold=False)


@given(st.text(max_size=80), st.integers(20, 60))
def test_no_line_is_wider_than_it_may_be_and_nothing_is_lost(text: str, across_mm: int) -> None:
    with drawing_style():
        lines = wrapped(text, across_mm)
        assert all(width_mm(line, 8.5, bold=False) <= across_mm for line in lines)
    assert "".join("".join(lines).split()) == "".join(clean(text).split())


def test_a_length_is_never_apart_from_its_unit() -> None:
    for across_mm in range(20, 60):
        lines = wrapped("a gap of 203.3 mm and 0.14 m below 5 metres", across_mm)
        assert not any(line.startswith(("mm", "m ")) for line in lines)
        assert " ".join(lines) == "a gap of 203.3 mm and 0.14 m below 5 metres"


def test_what_does_not_fit_ends_in_an_ellipsis() -> None:
    long = "word " * 60
    lines = wrapped(long, 30.0, most=3)
    assert len(lines) == 3
    assert lines[-1].endswith("…")
    one = shortened("M" * 100, 30.0)
    assert one.endswith("M…")
    assert width_mm(one, 8.5, bold=False) <= 30.0
    assert shortened("short", 30.0) == "short"


def test_breaks_and_signs_that_nobody_can_print_become_blanks() -> None:
    assert clean("a\nb\x00c\u200bd") == "a b c d"


def test_a_block_that_does_not_fit_goes_to_the_next_page_with_its_head() -> None:
    pages = Pages("A4")
    heads: list[int] = []
    pages.y = pages.bottom - 10.0
    pages.need(9.0, lambda: heads.append(len(pages.all)))
    assert (len(pages.all), heads) == (1, [])
    pages.need(11.0, lambda: heads.append(len(pages.all)))
    assert (len(pages.all), heads) == (2, [2])
    assert pages.y == MARGIN_MM


def test_a_long_paragraph_goes_on_on_the_next_page() -> None:
    pages = Pages("Letter")
    pages.paragraph("word " * 5000)
    assert len(pages.all) > 1
    assert pages.y <= pages.bottom
    assert line_mm(8.5) > 8.5 * 25.4 / 72.0
