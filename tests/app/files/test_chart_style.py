import warnings

import pytest
from matplotlib import rcParams
from matplotlib.figure import Figure

from app.files.chart_style import drawing_style, pdf_metadata
from tests.app.files.reports import provenance_for, small_report


def test_the_style_holds_inside_and_not_after() -> None:
    before = rcParams["pdf.fonttype"], list(rcParams["font.family"])
    with drawing_style():
        assert rcParams["pdf.fonttype"] == 42
        assert rcParams["font.family"][0] == "DejaVu Sans"
    assert (rcParams["pdf.fonttype"], list(rcParams["font.family"])) == before


def test_a_letter_without_a_font_is_no_reason_to_fail() -> None:
    with drawing_style():
        figure = Figure()
        figure.text(0.1, 0.1, "\U0001f9ff")
        figure.canvas.draw()
    with pytest.raises(UserWarning, match="other"):
        warnings.warn("other", stacklevel=1)


def test_a_pdf_is_dated_by_the_day() -> None:
    told = pdf_metadata(provenance_for(small_report()), "A title")
    assert told["Title"] == "A title"
    assert told["CreationDate"] == told["ModDate"]
    assert f"{told['CreationDate']:%Y-%m-%d %H:%M}" == "2026-03-04 12:00"
