import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from PySide6.QtCore import QLineF, QPointF, QRectF

from app.window.room.labels import LabelPlacer
from app.window.room.overlay import outline_of

BOUNDS = QRectF(0.0, 0.0, 500.0, 400.0)


@given(st.floats(-100.0, 600.0), st.floats(-100.0, 500.0), st.floats(10.0, 300.0))
def test_a_label_is_always_whole(x: float, y: float, width: float) -> None:
    rect = LabelPlacer(BOUNDS).place(width, 40.0, QLineF(QPointF(x, y), QPointF(x + 30.0, y + 10.0)))
    assert BOUNDS.contains(rect)
    assert rect.width() == pytest.approx(width)


def test_labels_about_the_same_place_do_not_cover_each_other_or_the_line() -> None:
    placer = LabelPlacer(BOUNDS)
    line = QLineF(QPointF(240.0, 190.0), QPointF(260.0, 210.0))
    rects = [placer.place(90.0, 30.0, line) for _ in range(6)]
    for number, rect in enumerate(rects):
        assert not rect.intersects(QRectF(line.p1(), line.p2()))
        assert not any(rect.intersects(other) for other in rects[:number])


def test_a_reserved_place_stays_clear() -> None:
    line = QLineF(QPointF(250.0, 200.0), QPointF(251.0, 200.0))
    free = LabelPlacer(BOUNDS).place(90.0, 30.0, line)
    placer = LabelPlacer(BOUNDS)
    placer.reserve(free)
    assert not placer.place(90.0, 30.0, line).intersects(free)


@given(st.lists(st.tuples(st.integers(-20, 20), st.integers(-20, 20)), min_size=3, max_size=40))
def test_the_outline_is_convex_and_holds_all_points(points: list[tuple[int, int]]) -> None:
    outline = np.array(outline_of([list(map(float, point)) for point in points]))
    if len(outline) < 3:
        return
    steps = np.roll(outline, -1, axis=0) - outline
    for corner, step in zip(outline, steps, strict=True):
        offsets = np.array(points) - corner
        assert (step[0] * offsets[:, 1] - step[1] * offsets[:, 0] >= -1e-9).all()
