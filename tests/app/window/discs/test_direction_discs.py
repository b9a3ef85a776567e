"""The direction discs: what a click, a key and the pointer do, what is drawn where, and that nothing is cut off."""

from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray
from PySide6.QtCore import QEvent, QPoint, QPointF, QRectF, QSizeF, Qt
from PySide6.QtGui import QColor, QFontMetricsF, QImage
from PySide6.QtTest import QTest
from PySide6.QtWidgets import QApplication, QToolButton
from pytestqt.qtbot import QtBot

from app.clearance_scale import EDGES_MM
from app.window.chart.paint import font_of
from app.window.discs.direction_discs import DirectionDiscs
from app.window.discs.layout import SAMPLE, Disc, Layout
from app.window.discs.paint import View, layout_for
from app.window.discs.pixels import colour_at, disc_pixels
from app.window.discs.reading import pointed_words, pose_words, reading_of, share_words
from app.window.theme import DARK, LIGHT, Theme
from geometry.directions.axes import direction_words, directions_patient
from geometry.directions.discs import BACK, FRONT, Pairing
from geometry.directions.field import Best, DirectionField, field_of, unproved_field
from geometry.directions.regions import SPHERE_SR, Share, share_of
from geometry.states import CODE_OF, STATES, State
from tests.app.files.assessments import one_couch_angle, plain, with_readouts, without_travel

Array = NDArray[np.float64]

SIZES = [(700, 380), (360, 640), (320, 340), (1200, 500), (500, 500)]
NO_SWITCH = QSizeF()


@pytest.fixture
def discs(qtbot: QtBot) -> DirectionDiscs:
    widget = DirectionDiscs()
    qtbot.addWidget(widget)
    widget.resize(700, 380)
    widget.show_field(field_of(plain()))
    widget.set_share(share_of(plain()))
    widget.set_pose(0.0, 0.0)
    widget.show()
    qtbot.waitExposed(widget)
    return widget


def disc_of(widget: DirectionDiscs, direction: Array) -> Disc:
    return next(disc for disc in widget._laid_out().discs if disc.hemisphere.holds(direction))


def place_of(widget: DirectionDiscs, direction: Array) -> QPoint:
    point = disc_of(widget, direction).point(direction)
    assert point is not None
    return point.toPoint()


def direction_with(field: DirectionField, state: State) -> Array:
    """Return a direction well inside a disc whose best pair is in a state."""
    directions = FRONT.directions(np.random.default_rng(1).uniform(-0.6, 0.6, (2000, 2)))
    there = np.flatnonzero(field.over(directions).state == CODE_OF[state])
    return np.asarray(directions[there[0]])


def test_a_click_goes_to_a_pair_that_gives_the_direction(discs: DirectionDiscs, qtbot: QtBot) -> None:
    field = field_of(plain())
    wanted = direction_with(field, State.PERMITTED)
    with qtbot.waitSignal(discs.pose_wanted) as caught:
        qtbot.mouseClick(discs, Qt.MouseButton.LeftButton, pos=place_of(discs, wanted))
    gantry, couch = caught.args
    row = int(np.flatnonzero(field.exact.couch_deg == couch)[0])
    column = int(np.flatnonzero(field.exact.gantry_deg == gantry)[0])
    assert STATES[field.state[row, column]] is State.PERMITTED
    # The grid is 10 by 30 deg, a pixel less than one.
    assert directions_patient(gantry, couch, field.axes) @ wanted > np.cos(np.radians(18.0))


def test_of_several_permitted_pairs_the_nearest_to_the_pose() -> None:
    field = field_of(plain())
    everything = np.full_like(field.state, CODE_OF[State.PERMITTED])
    field = replace(field, state=everything)
    # 2 deg from straight below, where the gantry comes from both sides.
    below = directions_patient(178.0, 92.0, field.axes)
    chosen = [reading_of(field, below, pose).chosen for pose in ((180.0, 90.0), (-180.0, 90.0))]
    assert [pair.gantry_deg for pair in chosen if pair is not None] == [180.0, -180.0]
    level = directions_patient(90.0, 92.0, field.axes)
    chosen = [reading_of(field, level, pose).chosen for pose in ((80.0, 80.0), (-80.0, -80.0))]
    assert [pair.gantry_deg for pair in chosen if pair is not None] == [90.0, -90.0]


def test_a_permitted_pair_comes_before_one_with_more_clearance() -> None:
    field = field_of(plain())
    rows, columns = len(field.exact.couch_deg), len(field.exact.gantry_deg)
    clearance, state = np.full((rows, columns), 100.0), np.full((rows, columns), CODE_OF[State.SHORT], np.int8)
    right = field.exact.gantry_deg > 0.0
    clearance[:, right] = 30.0
    state[:, right] = CODE_OF[State.PERMITTED]
    field = replace(field, exact=replace(field.exact, clearance_mm=clearance), state=state)
    reading = reading_of(field, directions_patient(90.0, 92.0, field.axes), (-90.0, -90.0))
    assert reading.chosen is not None
    assert (reading.chosen.gantry_deg, reading.chosen.state) == (90.0, State.PERMITTED)
    assert pointed_words(reading)[1][0].endswith("30.0 mm, permitted; also gantry 270°, couch 270° (100.0 mm, short)")


def test_dragging_goes_on_and_pointing_does_not(discs: DirectionDiscs, qtbot: QtBot) -> None:
    wanted: list[tuple[float, float]] = []
    discs.pose_wanted.connect(lambda gantry, couch: wanted.append((gantry, couch)))
    here = place_of(discs, directions_patient(30.0, -20.0, field_of(plain()).axes))
    qtbot.mouseMove(discs, here)
    assert wanted == []
    qtbot.mousePress(discs, Qt.MouseButton.LeftButton, pos=here)
    there = place_of(discs, directions_patient(60.0, 0.0, field_of(plain()).axes))
    QApplication.sendEvent(discs, _move(discs, there, Qt.MouseButton.LeftButton))
    qtbot.mouseRelease(discs, Qt.MouseButton.LeftButton, pos=there)
    assert len(wanted) == 2
    assert wanted[-1] == (60.0, 0.0)


def _move(widget: DirectionDiscs, point: QPoint, buttons: Qt.MouseButton) -> QEvent:
    from PySide6.QtGui import QMouseEvent

    where = QPointF(point)
    return QMouseEvent(
        QEvent.Type.MouseMove,
        where,
        QPointF(widget.mapToGlobal(point)),
        Qt.MouseButton.NoButton,
        buttons,
        Qt.KeyboardModifier.NoModifier,
    )


def test_pointing_says_what_lies_there_and_leaving_forgets_it(discs: DirectionDiscs) -> None:
    field = field_of(plain())
    direction = direction_with(field, State.CONTACT)
    readings: list[object] = []
    discs.pointed.connect(readings.append)
    before = discs.grab().toImage()
    QApplication.sendEvent(discs, _move(discs, place_of(discs, direction), Qt.MouseButton.NoButton))
    (reading,) = readings
    assert reading.direction @ direction > np.cos(np.radians(1.5))
    assert reading.chosen.state is State.CONTACT
    assert reading.words == direction_words(reading.direction)
    assert pointed_words(reading)[1][-1].endswith("contact")
    assert discs.grab().toImage() != before
    QApplication.sendEvent(discs, QEvent(QEvent.Type.Leave))
    assert readings[1:] == [None]
    assert discs.grab().toImage() == before


def test_beside_the_discs_there_is_no_direction(discs: DirectionDiscs, qtbot: QtBot) -> None:
    with qtbot.assertNotEmitted(discs.pose_wanted):
        qtbot.mouseClick(discs, Qt.MouseButton.LeftButton, pos=QPoint(350, 60))


@pytest.mark.parametrize(
    ("key", "axis", "sense"),
    [
        (Qt.Key.Key_Right, FRONT.right, 1),
        (Qt.Key.Key_Left, FRONT.right, -1),
        (Qt.Key.Key_Up, FRONT.up, 1),
        (Qt.Key.Key_Down, FRONT.up, -1),
    ],
)
def test_arrow_keys_move_the_chosen_direction(
    discs: DirectionDiscs, qtbot: QtBot, key: Qt.Key, axis: tuple[float, float, float], sense: int
) -> None:
    readings: list[object] = []
    discs.pointed.connect(readings.append)
    # Steps add up although every pose lies on the map's coarse grid.
    for _ in range(6):
        with qtbot.waitSignal(discs.pose_wanted) as caught:
            qtbot.keyClick(discs, key)
        discs.set_pose(*caught.args)
    moved = np.degrees(np.arcsin(readings[-1].direction @ np.array(axis)))
    assert moved == pytest.approx(12.0 * sense, abs=0.5)
    with qtbot.waitSignal(discs.pose_wanted):
        qtbot.keyClick(discs, key, Qt.KeyboardModifier.ShiftModifier)
    assert np.degrees(np.arcsin(readings[-1].direction @ np.array(axis))) == pytest.approx(22.0 * sense, abs=1.0)


def test_after_another_pose_the_keys_start_from_there(discs: DirectionDiscs, qtbot: QtBot) -> None:
    qtbot.keyClick(discs, Qt.Key.Key_Right)
    discs.set_pose(60.0, 0.0)
    readings: list[object] = []
    discs.pointed.connect(readings.append)
    qtbot.keyClick(discs, Qt.Key.Key_Right)
    here = directions_patient(60.0, 0.0, field_of(plain()).axes)
    assert readings[-1].direction @ here > np.cos(np.radians(3.0))


def test_other_keys_are_left_to_others(discs: DirectionDiscs, qtbot: QtBot) -> None:
    with qtbot.assertNotEmitted(discs.pose_wanted):
        qtbot.keyClick(discs, Qt.Key.Key_A)
    discs.show_field(None)
    with qtbot.assertNotEmitted(discs.pose_wanted):
        qtbot.keyClick(discs, Qt.Key.Key_Left)


def test_the_switch_cuts_the_sphere_another_way(discs: DirectionDiscs, qtbot: QtBot) -> None:
    before = discs.grab().toImage()
    button = next(b for b in discs.findChildren(QToolButton) if b.text() == "Head and feet")
    with qtbot.waitSignal(discs.pairing_changed) as caught:
        qtbot.mouseClick(button, Qt.MouseButton.LeftButton)
    assert caught.args == [Pairing.HEAD_AND_FEET]
    assert discs.pairing is Pairing.HEAD_AND_FEET
    assert discs.grab().toImage() != before
    with qtbot.assertNotEmitted(discs.pairing_changed):
        discs.set_pairing(Pairing.FRONT_AND_BACK)
    assert not button.isChecked()


def test_in_a_bore_a_click_near_the_circle_counts(discs: DirectionDiscs, qtbot: QtBot) -> None:
    field = field_of(one_couch_angle())
    discs.show_field(field)
    near = place_of(discs, directions_patient(40.0, 0.0, field.axes)) + QPoint(0, 6)
    with qtbot.waitSignal(discs.pose_wanted) as caught:
        qtbot.mouseClick(discs, Qt.MouseButton.LeftButton, pos=near)
    assert caught.args == [40.0, 0.0]
    discs.set_pose(40.0, 0.0)
    with qtbot.waitSignal(discs.pose_wanted) as caught:
        qtbot.keyClick(discs, Qt.Key.Key_Right, Qt.KeyboardModifier.ShiftModifier)
    assert caught.args == [50.0, 0.0]
    far = place_of(discs, directions_patient(40.0, 0.0, field.axes)) + QPoint(0, 40)
    with qtbot.assertNotEmitted(discs.pose_wanted):
        qtbot.mouseClick(discs, Qt.MouseButton.LeftButton, pos=far)


def test_a_pose_leaves_the_layers_as_they_are(discs: DirectionDiscs) -> None:
    before = discs.grab().toImage()
    layers = discs._known, discs._frame
    discs.set_pose(40.0, 30.0)
    discs.repaint()
    assert (discs._known, discs._frame) == layers
    assert discs._known is layers[0]
    assert discs.grab().toImage() != before


def test_a_new_map_leaves_the_frame_as_it_is(discs: DirectionDiscs) -> None:
    discs.repaint()
    frame, known = discs._frame, discs._known
    assert frame is not None
    discs.show_field(unproved_field(plain().map))
    discs.repaint()
    assert discs._frame is frame
    assert discs._known is not known


@pytest.mark.parametrize("theme", [LIGHT, DARK])
@pytest.mark.parametrize("pairing", list(Pairing))
def test_colours_and_textures_lie_where_the_field_says(discs: DirectionDiscs, theme: Theme, pairing: Pairing) -> None:
    field = field_of(plain())
    # A clearance of its own at every pair of angles, so that nothing that is turned or mirrored can pass.
    clearance = np.random.default_rng(8).uniform(1.0, 300.0, field.state.shape)
    permitted = np.full_like(field.state, CODE_OF[State.PERMITTED])
    field = replace(field, exact=replace(field.exact, clearance_mm=clearance), state=permitted, outlines=())
    discs.show_field(field)
    discs.set_theme(theme)
    discs.set_pairing(pairing)
    image = discs.grab().toImage()
    assert image.pixelColor(350, 120) == theme.colour("canvas")
    hits = seen = 0
    for half in pairing.hemispheres:
        directions = half.directions(np.random.default_rng(3).uniform(-0.65, 0.65, (200, 2)))
        for direction, clearance in zip(directions, field.over(directions).clearance_mm, strict=True):
            share = float(np.interp(clearance, EDGES_MM, np.linspace(0.0, 1.0, len(EDGES_MM))))
            seen += 1
            hits += _alike(image.pixelColor(place_of(discs, direction)), colour_at(share))
    # Lines, letters and the outline cover some, and some lie on a border between two colours.
    assert seen == 400
    assert hits > 0.75 * seen


def _alike(one: QColor, other: QColor) -> bool:
    return max(abs(one.red() - other.red()), abs(one.green() - other.green()), abs(one.blue() - other.blue())) <= 12


def test_states_differ_in_texture_and_not_in_colour_alone() -> None:
    def strip(state: State, clearance: float, *, proved: bool = True) -> NDArray[np.uint32]:
        best = Best(np.full((32, 32), clearance), np.full((32, 32), CODE_OF[state], np.int8), np.zeros(1), np.zeros(1))
        return disc_pixels(best, 32, LIGHT, 1.0, proved=proved)[8:24, 8:24]

    pixels = {state: strip(state, 0.0 if state is State.CONTACT else 60.0) for state in State}
    assert len(np.unique(pixels[State.PERMITTED])) == 1
    for state in (State.CONTACT, State.NO_TRAVEL, State.SHORT, State.UNPROVED):
        assert len(np.unique(pixels[state])) > 1
    # Before the proof there is nothing to be told apart.
    assert np.array_equal(strip(State.UNPROVED, 60.0, proved=False), pixels[State.PERMITTED])
    patterns = {tuple((found != np.unique(found)[0]).ravel()) for found in pixels.values()}
    assert len(patterns) == len(State)


def test_beyond_the_rim_pixels_are_clear() -> None:
    pixels = disc_pixels(field_of(plain()).on_disc(BACK, 20), 60, LIGHT, 1.0, proved=True)
    assert pixels[0, 0] == 0
    assert pixels[30, 1] != 0


@pytest.mark.parametrize("size", SIZES)
@pytest.mark.parametrize("pairing", list(Pairing))
@pytest.mark.parametrize("assessed", [plain, one_couch_angle])
def test_nothing_overlaps_and_nothing_is_cut_off(
    discs: DirectionDiscs, size: tuple[int, int], pairing: Pairing, assessed: object
) -> None:
    view = View(LIGHT, pairing, field_of(assessed()), (), share_of(assessed()))  # type: ignore[operator]
    switch = QSizeF(discs._switch.sizeHint())
    layout = layout_for(view, QSizeF(*size), discs.font(), switch, 1.0)
    whole = QRectF(0.0, 0.0, *size)
    metrics = QFontMetricsF(layout.small)
    samples = [
        QRectF(at - QPointF(0.0, SAMPLE.height() / 2.0), SAMPLE).adjusted(
            0.0, 0.0, 5.0 + metrics.horizontalAdvance(item.brief), 0.0
        )
        for at, item in layout.legend
    ]
    around = [_with_letters(disc, layout) for disc in layout.discs]
    boxes = [layout.share, layout.switch, *around, *samples, layout.readout]
    assert all(whole.contains(box) for box in boxes)
    for place, box in enumerate(boxes):
        assert not any(box.intersects(other) for other in boxes[place + 1 :])
    assert not any(layout.ramp.intersects(box) for box in (*around, *samples, layout.readout))
    assert min(disc.radius for disc in layout.discs) >= 36.0
    words = share_words(view.share)
    for forms, font in ((words[0], font_of(layout.font, bold=True)), (words[1], layout.small)):
        assert min(QFontMetricsF(font).horizontalAdvance(form) for form in forms) <= layout.share.width()


def _with_letters(disc: Disc, layout: Layout) -> QRectF:
    half = disc.letters + QFontMetricsF(layout.font).height() / 2.0
    return QRectF(disc.centre.x() - half, disc.centre.y() - half, 2.0 * half, 2.0 * half)


@pytest.mark.parametrize("size", SIZES)
def test_some_form_of_every_readout_fits(discs: DirectionDiscs, size: tuple[int, int]) -> None:
    field = field_of(with_readouts())
    layout = layout_for(View(LIGHT, field=field), QSizeF(*size), discs.font(), NO_SWITCH, 1.0)
    for direction in BACK.directions(np.random.default_rng(0).uniform(-0.6, 0.6, (60, 2))):
        first, forms = pointed_words(reading_of(field, direction, (0.0, 0.0)))
        heights = [
            QFontMetricsF(font)
            .boundingRect(layout.readout, Qt.AlignmentFlag.AlignLeft | Qt.TextFlag.TextWordWrap, text)
            .height()
            for font, text in ((layout.font, first), (layout.font, forms[-1]))
        ]
        assert sum(heights) <= layout.readout.height() + 1.0


def test_discs_stand_side_by_side_or_one_above_the_other(discs: DirectionDiscs) -> None:
    for size, beside in (((700, 380), True), ((360, 640), False)):
        first, second = layout_for(View(LIGHT), QSizeF(*size), discs.font(), NO_SWITCH, 1.0).discs
        assert (first.centre.y() == second.centre.y()) is beside
        assert (first.centre.x() == second.centre.x()) is not beside


def test_a_line_is_cut_at_the_rim() -> None:
    disc = Disc(FRONT, QPointF(100.0, 100.0), 80.0, 90.0)
    circle = directions_patient(np.arange(0.0, 361.0, 7.0), 0.0, field_of(plain()).axes)
    box = disc.path(circle).boundingRect()
    assert (box.left(), box.right()) == pytest.approx((20.0, 180.0), abs=1e-6)
    assert disc.path(np.tile(np.array(BACK.centre), (3, 1))).isEmpty()
    assert disc.direction(QPointF(190.0, 100.0)) is None
    direction = disc.direction(QPointF(130.0, 70.0))
    assert direction is not None
    back = disc.point(direction)
    assert back is not None
    assert (back.x(), back.y()) == pytest.approx((130.0, 70.0))


def test_fields_of_a_plan_are_drawn(discs: DirectionDiscs) -> None:
    before = discs.grab().toImage()
    axes = field_of(plain()).axes
    arc = directions_patient(np.arange(-60.0, 61.0), 20.0, axes)
    discs.show_fields([("Arc", arc), ("Static", directions_patient(50.0, -40.0, axes))])
    image = discs.grab().toImage()
    for direction in (arc[20], directions_patient(50.0, -40.0, axes)):
        place = place_of(discs, direction)
        assert _alike(image.pixelColor(place), LIGHT.colour("beam"))
        assert not _alike(before.pixelColor(place), LIGHT.colour("beam"))


def test_a_picture_has_the_size_that_is_asked_for(discs: DirectionDiscs) -> None:
    picture = discs.picture(900, 500)
    assert (picture.width(), picture.height()) == (900, 500)
    assert len(_colours(picture)) > 100


def _colours(image: QImage) -> set[int]:
    return {image.pixel(x, y) for x in range(0, image.width(), 3) for y in range(0, image.height(), 3)}


@pytest.mark.parametrize("assessed", [one_couch_angle, without_travel, with_readouts])
def test_every_kind_of_room_is_drawn(discs: DirectionDiscs, assessed: object) -> None:
    found = assessed()  # type: ignore[operator]
    discs.show_field(unproved_field(found.map))
    discs.set_share(None)
    early = discs.grab().toImage()
    discs.show_field(field_of(found))
    discs.set_share(share_of(found))
    assert discs.grab().toImage() != early


def test_words_of_the_share() -> None:
    assert share_words(None) == (("Permitted directions: not proved yet",), ("",))
    some = Share(7.899, SPHERE_SR, 247.9, 360.0)
    assert share_words(some)[0] == ("Permitted directions: 7.8 sr, 62 % of 4π", "Permitted: 7.8 sr, 62 % of 4π")
    assert share_words(some)[1][0] == "All directions are within the travel; coplanar circle 247° of 360°"
    half = Share(3.0, 6.0, 100.0, 200.0)
    assert share_words(half)[1][0].startswith("50 % of those within the travel")
    # Nothing is rounded up.
    assert share_words(Share(SPHERE_SR - 0.01, SPHERE_SR, 359.9, 360.0))[0][0].endswith("99 % of 4π")
    assert share_words(Share(SPHERE_SR, SPHERE_SR, 360.0, 360.0))[0][0].endswith("12.5 sr, 100 % of 4π")
    assert share_words(Share(0.0, 0.0, 312.5, 360.0))[0][0] == "Permitted of the coplanar circle: 312° of 360°"
    assert share_words(Share(0.0, 0.0, 0.0, 0.0))[1][-1] == "none within the travel"


def test_words_of_a_pose() -> None:
    field = field_of(plain())
    first, forms = pose_words(field, (90.0, 0.0))
    assert first == "Now from the left"
    assert forms[0].startswith("Gantry 90°, couch 0°: ")
    # Between the angles of the map nothing is said of the clearance.
    first, forms = pose_words(field, (33.3, 0.0))
    assert forms[-1] == "Gantry 33.3°, couch 0°"
    straight = pose_words(field, (0.0, 30.0))
    assert straight[1][0].endswith("any couch angle gives this direction")


def test_words_before_the_proof() -> None:
    field = unproved_field(plain().map)
    direction = direction_with(field_of(plain()), State.PERMITTED)
    assert pointed_words(reading_of(field, direction, (0.0, 0.0)))[1][0].count("not proved yet") >= 1


def test_words_on_the_machine_s_own_scales() -> None:
    field = field_of(with_readouts())
    words = pointed_words(reading_of(field, directions_patient(90.0, 30.0, field.axes), (0.0, 0.0)))[1][0]
    assert words.startswith("Gantry 90° (shown 90°), couch 30° (shown 210°): ")


def test_words_out_of_reach(discs: DirectionDiscs, qtbot: QtBot) -> None:
    field = field_of(without_travel())
    discs.show_field(field)
    with qtbot.assertNotEmitted(discs.pose_wanted):
        QTest.mouseClick(discs, Qt.MouseButton.LeftButton, pos=place_of(discs, np.array([0.0, -1.0, 0.0])))
    reading = reading_of(field, np.array([0.0, -1.0, 0.0]), (0.0, 0.0))
    assert pointed_words(reading) == ("From the front", ("No pair of angles within the travel gives this direction",))


def test_it_can_be_found_and_reached_by_keyboard(discs: DirectionDiscs) -> None:
    assert discs.accessibleName() == "Direction discs"
    assert discs.focusPolicy() is Qt.FocusPolicy.StrongFocus
    assert all(button.toolTip() for button in discs.findChildren(QToolButton))
