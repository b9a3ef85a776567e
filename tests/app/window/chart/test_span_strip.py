"""The strip of permitted spans, driven as a hand does."""

import pytest
from hypothesis import given
from hypothesis import strategies as st
from PySide6.QtCore import QEvent, QPointF, QSizeF, Qt
from PySide6.QtGui import QFont, QFontMetricsF, QMouseEvent
from pytestqt.qtbot import QtBot

from app.clearance_scale import EDGE_COLOURS
from app.window.chart.paint import font_of
from app.window.chart.paint_spans import Strip, StripLayout, height_of, least_words
from app.window.chart.span_strip import SpanStrip
from app.window.theme import DARK, LIGHT
from geometry.machine import Readout
from geometry.spans import Span

LEFT = Qt.MouseButton.LeftButton


def span(low: float, high: float, least_mm: float = 31.28) -> Span:
    return Span(-10.0, low, high, least_mm, 0, 1, 25.0)


FIRST, SECOND = span(-185.0, -120.0), span(-30.5, 110.0)


@pytest.fixture
def strip(qtbot: QtBot) -> SpanStrip:
    widget = SpanStrip()
    qtbot.addWidget(widget)
    widget.resize(640, widget.sizeHint().height())
    widget.set_travel((-185.0, 185.0))
    widget.set_part_names(["gantry/head", "couch/table top"])
    widget.show_spans(-10.0, (FIRST, SECOND), stale=False)
    widget.show()
    return widget


def place_of(strip: SpanStrip, gantry_deg: float, below: float = 0.0) -> QPointF:
    layout = strip._layout()
    y = layout.track.bottom() + below if below else layout.track.center().y()
    return QPointF(layout.place.pixel(gantry_deg), y)


def event_of(strip: SpanStrip, at: QPointF, button: Qt.MouseButton = LEFT) -> QMouseEvent:
    kind = QEvent.Type.MouseButtonPress
    return QMouseEvent(kind, at, strip.mapToGlobal(at), button, button, Qt.KeyboardModifier.NoModifier)


def told_by(strip: SpanStrip) -> list[object]:
    told: list[object] = []
    strip.span_clicked.connect(told.append)
    strip.pose_wanted.connect(lambda gantry, couch: told.append((gantry, couch)))
    return told


def test_a_click_on_a_bar_tells_its_span(strip: SpanStrip) -> None:
    told = told_by(strip)
    strip.mousePressEvent(event_of(strip, place_of(strip, 40.0)))
    strip.mousePressEvent(event_of(strip, place_of(strip, -150.0)))
    assert told == [SECOND, FIRST]


def test_a_click_between_bars_or_with_another_button_tells_nothing(strip: SpanStrip) -> None:
    told = told_by(strip)
    strip.mousePressEvent(event_of(strip, place_of(strip, -70.0)))
    strip.mousePressEvent(event_of(strip, place_of(strip, 40.0), Qt.MouseButton.RightButton))
    strip.mousePressEvent(event_of(strip, QPointF(place_of(strip, 40.0).x(), 2.0)))
    assert told == []


@pytest.mark.parametrize(
    ("angle", "below", "expected"),
    [(-30.0, 0.0, -30.5), (109.5, 0.0, 110.0), (-20.0, 8.0, -30.5), (100.0, 8.0, 110.0), (-184.0, 0.0, -185.0)],
)
def test_a_click_on_an_end_or_its_label_goes_there(
    strip: SpanStrip, angle: float, below: float, expected: float
) -> None:
    told = told_by(strip)
    strip.mousePressEvent(event_of(strip, place_of(strip, angle, below)))
    assert told == [(expected, -10.0)]


def test_keys_choose_click_and_go_to_the_ends(strip: SpanStrip, qtbot: QtBot) -> None:
    told = told_by(strip)
    qtbot.keyClick(strip, Qt.Key.Key_Return)
    assert told == []
    for key in (Qt.Key.Key_Right, Qt.Key.Key_Right, Qt.Key.Key_Right, Qt.Key.Key_Return, Qt.Key.Key_End):
        qtbot.keyClick(strip, key)
    for key in (Qt.Key.Key_Left, Qt.Key.Key_Home):
        qtbot.keyClick(strip, key)
    assert told == [SECOND, (110.0, -10.0), (-185.0, -10.0)]
    assert "Chosen: Gantry 175° to 240°" in strip.accessibleDescription()


def test_fewer_spans_leave_no_choice_behind(strip: SpanStrip, qtbot: QtBot) -> None:
    told = told_by(strip)
    qtbot.keyClick(strip, Qt.Key.Key_Left)
    strip.show_spans(-10.0, (FIRST,), stale=False)
    qtbot.keyClick(strip, Qt.Key.Key_Return)
    strip.show_spans(-10.0, (), stale=False)
    qtbot.keyClick(strip, Qt.Key.Key_Right)
    assert told == []


def test_the_title_counts(strip: SpanStrip) -> None:
    assert strip.title() == "Permitted at couch 350°: 2 spans, 205.5° of 370°"
    strip.show_spans(0.0, (FIRST,), stale=True)
    assert strip.title() == "Permitted at couch 0°: 1 span, 65° of 370°, before this change"
    strip.show_spans(90.0, (), stale=False)
    assert strip.title() == "Nothing permitted at couch 90°"
    assert strip.accessibleDescription() == strip.title()
    strip.show_spans(90.0, None, stale=False)
    assert strip.title() == "Permitted at couch 90°: not proved yet"


def test_all_of_a_span_in_words(strip: SpanStrip) -> None:
    assert strip.span_words(SECOND).splitlines() == [
        "Gantry 329.5° to 110°, clockwise, 140.5°",
        "At least 31.2 mm, 25.0 mm required",
        "gantry/head – couch/table top",
    ]
    strip.set_readout(Readout(180.0, -1, 0.1))
    assert "machine shows 210.5° to 70°" in strip.span_words(SECOND)


def test_a_bound_is_rounded_down() -> None:
    assert least_words(span(0.0, 1.0, 24.99)) == "24.9"
    assert least_words(span(0.0, 1.0, float("inf"))) == "–"


def test_bars_are_painted_where_the_spans_are(strip: SpanStrip) -> None:
    image = strip.grab().toImage()
    y = strip._layout().track.top() + 4.0
    seen = {
        angle: image.pixelColor(QPointF(place_of(strip, angle).x(), y).toPoint()).name()
        for angle in (-150.0, -70.0, 20.0, 150.0)
    }
    assert (seen[-150.0], seen[20.0]) == (EDGE_COLOURS[7], EDGE_COLOURS[7])
    assert EDGE_COLOURS[7] not in {seen[-70.0], seen[150.0]}
    strip.show_spans(-10.0, (FIRST, SECOND), stale=True)
    strip.set_theme(DARK)
    stale = strip.grab().toImage()
    assert stale.pixelColor(QPointF(place_of(strip, 20.0).x(), y).toPoint()).name() != EDGE_COLOURS[7]


def test_nothing_permitted_is_told_by_texture_as_well(strip: SpanStrip) -> None:
    def colours() -> set[str]:
        image, at = strip.grab().toImage(), place_of(strip, 40.0).toPoint()
        return {image.pixelColor(at.x() + x, at.y() + y).name() for x in range(9) for y in range(-4, 5)}

    strip.show_spans(0.0, (), stale=False)
    assert len(colours()) > 1
    strip.show_spans(0.0, None, stale=False)
    assert colours() == {LIGHT.window}


def test_the_pose_is_marked_above_the_bars(strip: SpanStrip) -> None:
    strip.set_pose(60.0, -10.0)
    at = place_of(strip, 60.0)
    y = int(strip._layout().track.top()) - 4
    assert strip.grab().toImage().pixelColor(int(at.x()), y).name() == LIGHT.accent


def test_it_lies_below_a_chart_that_is_zoomed(strip: SpanStrip) -> None:
    strip.set_axis(50.0, 550.0, -100.0, 100.0)
    assert (place_of(strip, -100.0).x(), place_of(strip, 100.0).x()) == (50.0, 550.0)
    told = told_by(strip)
    strip.mousePressEvent(event_of(strip, QPointF(300.0, strip._layout().track.center().y())))
    strip.mousePressEvent(event_of(strip, QPointF(40.0, strip._layout().track.center().y())))
    assert told == [SECOND]


def test_a_span_of_one_angle_can_be_seen_and_clicked(strip: SpanStrip) -> None:
    single = span(40.0, 40.0)
    strip.show_spans(-10.0, (single,), stale=False)
    assert strip._layout().bar(single).width() >= 3.0
    told = told_by(strip)
    strip.mousePressEvent(event_of(strip, place_of(strip, 40.0)))
    assert told == [single]


@pytest.mark.usefixtures("qapp")
@given(
    ends=st.lists(st.floats(-185.0, 185.0), min_size=2, max_size=12, unique=True),
    width=st.integers(260, 1200),
)
def test_end_angles_stay_within_the_strip(ends: list[float], width: int) -> None:
    rising = sorted(round(end, 1) for end in ends)
    spans = tuple(span(low, high) for low, high in zip(rising[::2], rising[1::2], strict=False))
    font = QFont()
    strip = Strip(spans=spans, travel_deg=(-185.0, 185.0))
    layout = StripLayout(strip, QSizeF(width, height_of(font)), font)
    metrics = QFontMetricsF(font_of(font, 0.88))
    for each in spans:
        for _, box in layout._ends(each, metrics):
            assert box.left() >= 0.0
            assert box.right() <= width
            assert box.bottom() <= layout.size.height()
    widest = QFontMetricsF(font_of(font, 1.0, bold=True)).horizontalAdvance(strip.titles[-1])
    assert widest <= width - 20.0
