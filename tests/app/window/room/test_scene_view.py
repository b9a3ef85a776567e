import threading
from collections.abc import Iterator
from dataclasses import replace

import numpy as np
import pytest
from PySide6.QtCore import QEvent, QPoint, QPointF, Qt, QTimer
from PySide6.QtGui import QColor, QWheelEvent
from PySide6.QtTest import QTest
from pytestqt.qtbot import QtBot

from app.clearance_scale import EDGE_COLOURS
from app.window.room import canvas, meshes
from app.window.room.opengl_probe import Graphics, OpenGLProbe
from app.window.room.scene_view import VIEWS, SceneView
from app.window.theme import DARK, LIGHT, Theme
from geometry.frames import R_fixed_turntable
from geometry.scene import Side, build_scene
from geometry.states import State
from tests.app.window.scenes import graphics_here, pixels, scene_of

HEAD = "c_arm_wide/head"
WIDTH, HEIGHT = 480, 360


@pytest.fixture(autouse=True)
def _soon_idle(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(canvas, "_IDLE_MS", 15)


@pytest.fixture
def view(qtbot: QtBot, monkeypatch: pytest.MonkeyPatch) -> Iterator[SceneView]:
    monkeypatch.setenv("WIDEBERTH_3D", "painted")
    made = opened(qtbot)
    yield made
    made.shutdown()


def opened(qtbot: QtBot, theme: Theme = LIGHT) -> SceneView:
    made = SceneView(theme)
    qtbot.addWidget(made)
    made.resize(WIDTH, HEIGHT)
    made.set_scene(scene_of(HEAD))
    made.set_pose(30.0, 0.0)
    made.show()
    made.start()
    settle(qtbot, made)
    return made


def settle(qtbot: QtBot, view: SceneView) -> None:
    qtbot.waitUntil(view.is_settled, timeout=30_000)


def seen(qtbot: QtBot, view: SceneView) -> np.ndarray:
    settle(qtbot, view)
    return pixels(view.grab())


def place(view: SceneView, point: object) -> tuple[float, float]:
    x, y, _ = view.camera().projected(np.array(point, dtype=float), WIDTH, HEIGHT)
    return float(x), float(y)


def near(picture: np.ndarray, colour: str, within: int = 24) -> np.ndarray:
    wanted = QColor(colour)
    return np.abs(picture - [wanted.red(), wanted.green(), wanted.blue()]).max(axis=2) <= within


def warm(picture: np.ndarray) -> np.ndarray:
    """Tell which pixels have the hue of the patient, in whatever light."""
    red, green, blue = picture.transpose(2, 0, 1)
    return (red - blue > 35) & (green - blue > 12) & (red - green > 12)


# ---- beginning and end


@pytest.mark.parametrize("choice", ["painted", "vtk"])
def test_it_prepares_shows_the_room_and_leaves_nothing(
    qtbot: QtBot, monkeypatch: pytest.MonkeyPatch, choice: str
) -> None:
    if choice == "vtk" and graphics_here() is Graphics.NONE:
        pytest.skip("no OpenGL here")
    monkeypatch.setenv("WIDEBERTH_3D", choice)
    threads = set(threading.enumerate())
    view = SceneView(LIGHT)
    qtbot.addWidget(view)
    view.resize(WIDTH, HEIGHT)
    view.show()
    waiting = pixels(view.grab())
    # Letters in the middle of a quiet backdrop.
    assert waiting[170:190, 150:330].min() < 140
    assert waiting[40:140].min() > 200
    view.set_scene(scene_of(HEAD))
    view.start()
    view.start()
    picture = seen(qtbot, view)
    assert view.is_ready()
    assert view.draws_without_opengl() is (choice == "painted")
    assert warm(picture).sum() > 800
    assert not warm(picture)[:60].any()
    view.shutdown()
    view.shutdown()
    view.start()
    view.set_pose(10.0, 10.0)
    assert set(threading.enumerate()) <= threads
    assert not any(timer.isActive() for timer in view.findChildren(QTimer))


def test_the_probe_decides(qtbot: QtBot, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.delenv("WIDEBERTH_3D", raising=False)
    started = []

    def begin(probe: OpenGLProbe) -> None:
        started.append(probe)

    monkeypatch.setattr(OpenGLProbe, "start", begin)
    made = []
    painted = canvas._painted_renderer
    monkeypatch.setattr(canvas, "_vtk_renderer", lambda: made.append("vtk") or painted())
    for graphics, without in ((Graphics.CARD, False), (Graphics.PROCESSOR, True), (Graphics.NONE, True)):
        view = SceneView(LIGHT)
        qtbot.addWidget(view)
        view.start()
        started[-1].found.emit(graphics)
        qtbot.waitUntil(view.is_ready, timeout=30_000)
        assert view.draws_without_opengl() is without
        view.shutdown()
    assert made == ["vtk"]


def test_a_renderer_that_fails_gives_way_to_the_other(qtbot: QtBot, monkeypatch: pytest.MonkeyPatch) -> None:
    def broken() -> object:
        raise RuntimeError("the driver gave up")

    monkeypatch.setenv("WIDEBERTH_3D", "vtk")
    monkeypatch.setattr(canvas, "_vtk_renderer", broken)
    view = opened(qtbot)
    assert view.draws_without_opengl()
    assert warm(seen(qtbot, view)).any()
    view.shutdown()


def test_where_nothing_can_draw_it_says_so(qtbot: QtBot, monkeypatch: pytest.MonkeyPatch) -> None:
    def broken() -> object:
        raise RuntimeError("no room to compile")

    monkeypatch.setenv("WIDEBERTH_3D", "painted")
    monkeypatch.setattr(canvas, "_painted_renderer", broken)
    view = SceneView(LIGHT)
    qtbot.addWidget(view)
    view.resize(WIDTH, HEIGHT)
    waiting = pixels(view.grab())
    view.start()
    qtbot.waitUntil(lambda: "no room to compile" in view.message(), timeout=10_000)
    assert not view.is_ready()
    assert not np.array_equal(pixels(view.grab()), waiting)
    view.shutdown()


def test_closing_while_the_probe_runs_ends_it(qtbot: QtBot, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.delenv("WIDEBERTH_3D", raising=False)
    view = SceneView(LIGHT)
    qtbot.addWidget(view)
    view.start()
    view.shutdown()
    assert view._probe is not None
    assert view._probe._process.processId() == 0


# ---- what is in the picture


def test_the_gantry_moves_and_what_stands_still_stays(qtbot: QtBot, view: SceneView) -> None:
    before = seen(qtbot, view)
    view.set_pose(60.0, 0.0)
    after = seen(qtbot, view)
    changed = np.abs(after - before).max(axis=2) > 30
    x, y = place(view, np.array([np.sin(np.pi / 3), 0.0, 0.5]) * 900.0)
    assert changed[int(y) - 3 : int(y) + 3, int(x) - 3 : int(x) + 3].any()
    x, y = place(view, [0.0, -1100.0, -1000.0])
    assert not changed[int(y) - 12 : int(y) + 12, int(x) - 12 : int(x) + 12].any()


def test_the_couch_takes_the_patient_along(qtbot: QtBot, view: SceneView) -> None:
    knee = np.array([80.0, -1100.0, 20.0])
    for couch_deg in (0.0, 40.0):
        view.set_pose(0.0, couch_deg)
        picture = seen(qtbot, view)
        x, y = place(view, R_fixed_turntable(couch_deg) @ knee)
        assert warm(picture)[int(y) - 2 : int(y) + 3, int(x) - 2 : int(x) + 3].all()


def test_dark_is_dark_and_the_patient_is_still_warm(qtbot: QtBot, view: SceneView) -> None:
    light = seen(qtbot, view)
    view.set_theme(DARK)
    dark = seen(qtbot, view)
    assert light[:40].mean() > 200
    assert dark[:40].mean() < 80
    assert warm(dark).sum() > 800


def test_the_witness_is_told_with_line_and_words_and_contact_by_a_sign(qtbot: QtBot, view: SceneView) -> None:
    without = seen(qtbot, view)
    one, other = np.array([0.0, -500.0, 700.0]), np.array([0.0, -500.0, 150.0])
    view.set_witness(one, other, "550 mm\nGantry arm – trunk", State.PERMITTED)
    distance = seen(qtbot, view)
    changed = np.abs(distance - without).max(axis=2) > 40
    for share in (0.2, 0.5, 0.8):
        x, y = place(view, one + share * (other - one))
        assert changed[int(y), int(x) - 3 : int(x) + 4].any()
    # More than the line: a label with dark letters on light paper.
    assert changed.sum() > 1000
    view.set_witness(one, other, "550 mm\nGantry arm – trunk", State.SHORT)
    assert not near(distance, LIGHT.marked).any()
    assert near(seen(qtbot, view), LIGHT.marked).sum() > 50
    view.set_witness(other, other, "Head cover – trunk", State.CONTACT)
    x, y = (round(value) for value in place(view, other))
    ring = near(seen(qtbot, view), LIGHT.marked, 60)[y - 12 : y + 13, x - 12 : x + 13]
    # Hatched: across the strokes it is on and off again and again.
    assert np.abs(np.diff(ring[12].astype(int))).sum() >= 4
    view.set_witness(None, None)
    assert np.array_equal(seen(qtbot, view), without)


def test_marked_parts_are_outlined_and_hatched(qtbot: QtBot, view: SceneView) -> None:
    without = seen(qtbot, view)
    view.mark_parts(["couch/pedestal"])
    marked = seen(qtbot, view)
    assert near(marked, LIGHT.marked, 40).sum() > 100
    changed = np.abs(marked - without).max(axis=2) > 10
    corners = np.concatenate(view._stage.hull_points(["couch/pedestal"]))
    flat = view.camera().projected(corners, WIDTH, HEIGHT)[:, :2]
    rows, columns = np.nonzero(changed)
    assert columns.min() == pytest.approx(flat[:, 0].min(), abs=5)
    assert columns.max() == pytest.approx(flat[:, 0].max(), abs=5)
    assert rows.min() == pytest.approx(flat[:, 1].min(), abs=5)
    view.mark_parts([])
    assert np.array_equal(seen(qtbot, view), without)


def test_the_beam_is_shown_on_wish(qtbot: QtBot, view: SceneView) -> None:
    view.set_pose(90.0, 0.0)
    view.set_view("From the foot end")
    without = seen(qtbot, view)
    view.set_beam(True, (100.0, 100.0), 0.0)
    square = seen(qtbot, view)
    changed = np.abs(square - without).max(axis=2) > 12
    # Seen from the foot end at gantry 90 the beam runs from the right, through the isocentre, beyond it.
    x, y = place(view, [-250.0, 0.0, 0.0])
    assert changed[int(y) - 3 : int(y) + 4, int(x)].any()
    x, y = place(view, [-250.0, 0.0, 220.0])
    assert not changed[int(y), int(x)]
    view.set_beam(True, (100.0, 100.0), None)
    assert not np.array_equal(seen(qtbot, view), square)
    view.set_beam(False)
    assert np.array_equal(seen(qtbot, view), without)


def test_hidden_and_see_through_parts(qtbot: QtBot, view: SceneView) -> None:
    view.set_view("From above")
    view.set_pose(0.0, 0.0)
    shown = seen(qtbot, view)
    x, y = place(view, [0.0, 0.0, 1100.0])
    assert view.hit_at(QPointF(x, y)).label.startswith("gantry/")
    view.set_visibility({"gantry/head cover": "see-through"})
    through = seen(qtbot, view)
    assert view.hit_at(QPointF(x, y)).label != "gantry/head cover"
    view.set_side_visibility({Side.GANTRY: "hidden"})
    view.set_visibility({})
    hidden = seen(qtbot, view)
    assert view.hit_at(QPointF(x, y)).label.startswith("couch/")
    at = (int(y), int(x))
    assert warm(hidden)[at]
    assert not warm(shown)[at]
    assert not np.array_equal(through[at], shown[at])
    assert not np.array_equal(through[at], hidden[at])
    view.set_side_visibility({Side.GANTRY: "hidden"})
    view.set_visibility({"gantry/head cover": "shown"})
    assert view.hit_at(QPointF(x, y)).label == "gantry/head cover"


def test_shading_takes_the_place_of_a_part_and_numbers_stand_at_it(qtbot: QtBot, view: SceneView) -> None:
    view.set_view("From above")
    view.set_side_visibility({Side.GANTRY: "hidden"})
    corners = np.array(
        [[-150.0, -700.0, 160.0], [150.0, -700.0, 160.0], [150.0, -300.0, 160.0], [-150.0, -300.0, 160.0]]
    )
    triangles = np.array([[0, 1, 2], [0, 2, 3]])
    found = {}
    for name, distance in (("near", 0.0), ("middle", 100.0), ("far", 400.0), ("none", np.nan)):
        view.set_shading({"couch/trunk": (corners, triangles, np.full(4, distance))})
        x, y = place(view, [0.0, -500.0, 160.0])
        found[name] = seen(qtbot, view)[int(y), int(x)].tolist()
    assert np.abs(np.array(found["near"]) - _rgb(EDGE_COLOURS[0])).max() < 25
    assert np.abs(np.array(found["middle"]) - _rgb(EDGE_COLOURS[7])).max() < 25
    assert np.ptp(found["none"]) < 20
    assert found["far"] == found["none"], "what is far has no colour"
    assert view.hit_at(QPointF(x, y)).label == "couch/trunk"
    before = seen(qtbot, view)
    view.set_tight_marks([("couch/trunk", (0.0, -500.0, 160.0), "12 mm"), ("no/such part", (0, 0, 0), "1 mm")])
    marked = seen(qtbot, view)
    changed = np.abs(marked - before).max(axis=2) > 40
    assert 150 < changed.sum() < 4000
    view.set_shading(None)
    view.set_tight_marks([])
    assert warm(seen(qtbot, view))[int(y), int(x)]


def _rgb(colour: str) -> np.ndarray:
    value = QColor(colour)
    return np.array([value.red(), value.green(), value.blue()])


def test_a_scene_that_only_moved_uses_its_surfaces_again(qtbot: QtBot, view: SceneView) -> None:
    before = {placed.part.label: placed for placed in view._stage.parts}
    camera = view.camera()
    setup = scene_of(HEAD).setup
    view.set_scene(build_scene(replace(setup, on_table=replace(setup.on_table, lateral_mm=40.0))))
    assert view.camera() is camera
    for placed in view._stage.parts:
        assert placed.mesh is before[placed.part.label].mesh
    # The isocentre stays in the patient: the table goes the other way.
    shift = {placed.part.label: placed.T_motion_mesh[:3, 3] for placed in view._stage.parts}
    assert shift["couch/table top"] == pytest.approx([-40.0, 0.0, 0.0], abs=1e-6)
    assert shift["couch/trunk"] == pytest.approx([0.0, 0.0, 0.0], abs=1e-6)
    view.set_scene(scene_of("cobalt/neck"))
    picture = seen(qtbot, view)
    assert warm(picture).any()
    view.set_scene(None)
    assert not warm(seen(qtbot, view)).any()


def test_another_thread_can_prepare_a_scene(qtbot: QtBot, view: SceneView, monkeypatch: pytest.MonkeyPatch) -> None:
    scene = scene_of("cobalt/neck")
    worker = threading.Thread(target=view.prepare, args=(scene,))
    worker.start()
    worker.join()

    def not_here(*_: object, **__: object) -> None:
        raise AssertionError("made on the window's thread")

    monkeypatch.setattr(meshes, "display_mesh", not_here)
    view.set_scene(scene)
    assert warm(seen(qtbot, view)).any()


# ---- pointing and moving


def test_pointing_tells_part_and_place_and_leaving_tells_nothing(qtbot: QtBot, view: SceneView) -> None:
    view.set_view("From above")
    view.set_side_visibility({Side.GANTRY: "hidden"})
    settle(qtbot, view)
    x, y = place(view, [0.0, -500.0, 140.0])
    with qtbot.waitSignal(view.place_pointed, timeout=2000) as signal:
        QTest.mouseMove(view, QPoint(round(x), round(y)))
    label, point = signal.args
    assert label == "couch/trunk"
    assert point[:2] == pytest.approx((0.0, -500.0), abs=15.0)
    assert 90.0 < point[2] < 160.0
    with qtbot.waitSignal(view.place_pointed, timeout=2000) as signal:
        view.leaveEvent(QEvent(QEvent.Type.Leave))
    assert signal.args == ["", ()]


def test_a_click_tells_the_place_in_the_system_that_turns_with_the_part(qtbot: QtBot, view: SceneView) -> None:
    view.set_view("From above")
    view.set_side_visibility({Side.GANTRY: "hidden"})
    view.set_pose(30.0, 70.0)
    settle(qtbot, view)
    knee = np.array([80.0, -1100.0, 60.0])
    x, y = place(view, R_fixed_turntable(70.0) @ knee)
    camera = view.camera()
    with qtbot.waitSignal(view.place_clicked, timeout=2000) as signal:
        QTest.mouseClick(view, Qt.MouseButton.LeftButton, pos=QPoint(round(x), round(y)))
    label, point = signal.args
    assert label == "couch/left leg"
    assert point[:2] == pytest.approx(knee[:2], abs=20.0)
    assert view.camera() is camera


def test_dragging_turns_or_moves_and_never_clicks(view: SceneView) -> None:
    clicked = []
    view.place_clicked.connect(lambda *told: clicked.append(told))
    before = view.camera()
    drag(view, Qt.MouseButton.LeftButton)
    turned = view.camera()
    assert turned.azimuth_deg == pytest.approx((before.azimuth_deg - 0.35 * 60.0) % 360.0)
    assert turned.elevation_deg > before.elevation_deg
    assert np.array_equal(turned.focus, before.focus)
    for button, keys in (
        (Qt.MouseButton.MiddleButton, Qt.KeyboardModifier.NoModifier),
        (Qt.MouseButton.LeftButton, Qt.KeyboardModifier.ShiftModifier),
    ):
        held = view.camera()
        start = held.projected(held.focus, WIDTH, HEIGHT)
        drag(view, button, keys)
        moved = view.camera()
        assert moved.azimuth_deg == turned.azimuth_deg
        # What was in the middle went along with the pointer.
        end = moved.projected(held.focus, WIDTH, HEIGHT)
        assert end[:2] - start[:2] == pytest.approx([60.0, 20.0], abs=0.01)
    assert clicked == []
    QTest.mouseDClick(view, Qt.MouseButton.LeftButton, pos=QPoint(100, 100))
    assert_all_in_view(view)


def drag(view: SceneView, button: Qt.MouseButton, keys: Qt.KeyboardModifier = Qt.KeyboardModifier.NoModifier) -> None:
    from PySide6.QtGui import QMouseEvent

    def send(kind: QEvent.Type, x: float, y: float, held: Qt.MouseButton) -> None:
        position = QPointF(x, y)
        event = QMouseEvent(kind, position, view.mapToGlobal(position), button, held, keys)
        {
            QEvent.Type.MouseButtonPress: view.mousePressEvent,
            QEvent.Type.MouseMove: view.mouseMoveEvent,
            QEvent.Type.MouseButtonRelease: view.mouseReleaseEvent,
        }[kind](event)

    send(QEvent.Type.MouseButtonPress, 100, 100, button)
    send(QEvent.Type.MouseMove, 130, 110, button)
    send(QEvent.Type.MouseMove, 160, 120, button)
    send(QEvent.Type.MouseButtonRelease, 160, 120, Qt.MouseButton.NoButton)


def test_the_wheel_comes_nearer_to_what_is_under_the_pointer(view: SceneView) -> None:
    pointer = QPointF(330.0, 140.0)
    before = view.camera()
    # The point at the pointer in the plane of the focus.
    direction = before.ray(pointer.x(), pointer.y(), WIDTH, HEIGHT)
    point = before.eye() + direction * before.distance_mm / -(direction @ before.axes()[2])
    wheel = QWheelEvent(
        pointer,
        view.mapToGlobal(pointer),
        QPoint(),
        QPoint(0, 240),
        Qt.MouseButton.NoButton,
        Qt.KeyboardModifier.NoModifier,
        Qt.ScrollPhase.NoScrollPhase,
        False,
    )
    view.wheelEvent(wheel)
    after = view.camera()
    assert after.distance_mm == pytest.approx(before.distance_mm / 1.15**2)
    assert after.projected(point, WIDTH, HEIGHT)[:2] == pytest.approx([330.0, 140.0], abs=1e-6)


def test_everything_can_be_done_by_keys(view: SceneView) -> None:
    start = view.camera()
    QTest.keyClick(view, Qt.Key.Key_Right)
    assert view.camera().azimuth_deg == pytest.approx(start.azimuth_deg + 5.0)
    QTest.keyClick(view, Qt.Key.Key_Up)
    assert view.camera().elevation_deg == pytest.approx(start.elevation_deg + 5.0)
    held = view.camera()
    QTest.keyClick(view, Qt.Key.Key_Left, Qt.KeyboardModifier.ShiftModifier)
    assert view.camera().azimuth_deg == held.azimuth_deg
    assert not np.array_equal(view.camera().focus, held.focus)
    QTest.keyClick(view, Qt.Key.Key_Plus)
    assert view.camera().distance_mm < held.distance_mm
    QTest.keyClick(view, Qt.Key.Key_Minus)
    assert view.camera().distance_mm == pytest.approx(held.distance_mm)
    QTest.keyClick(view, Qt.Key.Key_2)
    assert view.camera().azimuth_deg == 0.0
    view.zoom(3.0)
    QTest.keyClick(view, Qt.Key.Key_Home)
    assert_all_in_view(view)


@pytest.mark.parametrize("name", VIEWS[:-1])
def test_standard_views_hold_everything(view: SceneView, name: str) -> None:
    view.set_view(name)
    assert_all_in_view(view)


def assert_all_in_view(view: SceneView) -> None:
    flat = view.camera().projected(view.fit_points(), WIDTH, HEIGHT)[:, :2]
    assert flat.min() >= 0.0
    assert flat[:, 0].max() <= WIDTH
    assert flat[:, 1].max() <= HEIGHT
    # ... and no smaller than need be.
    assert max(np.ptp(flat[:, 0]) / WIDTH, np.ptp(flat[:, 1]) / HEIGHT) > 0.85


def test_the_beams_eye_follows_the_gantry_and_sees_past_the_head(view: SceneView) -> None:
    view.set_view("Beam's eye")
    for gantry_deg in (0.0, 90.0, 200.0, -60.0):
        view.set_pose(gantry_deg, 0.0)
        x, y = place(view, [0.0, 0.0, 0.0])
        assert (x, y) == pytest.approx((WIDTH / 2, HEIGHT / 2))
        # The gantry's Y is up in the picture.
        assert place(view, [0.0, 100.0, 0.0])[1] < y - 10
        assert view.hit_at(QPointF(x, y)).label.startswith("couch/")
    view.orbit(10.0, 0.0)
    fixed = view.camera()
    view.set_pose(0.0, 0.0)
    assert view.camera() is fixed


def test_a_view_that_nobody_chose_stays_whole_when_the_widget_changes(view: SceneView) -> None:
    view.resize(300, 420)
    flat = view.camera().projected(view.fit_points(), 300, 420)[:, :2]
    assert flat.min() >= 0.0
    assert flat[:, 0].max() <= 300
    view.zoom(2.0)
    chosen = view.camera()
    view.resize(WIDTH, HEIGHT)
    assert view.camera() is chosen


def test_a_picture_of_any_size_with_all_that_is_written(view: SceneView) -> None:
    plain = pixels(view.picture(960, 720))
    assert plain.shape == (720, 960, 3)
    assert warm(plain).sum() > 3000
    view.set_witness(np.array([0, 0, 800.0]), np.array([0, 0, 100.0]), "700 mm\nHead cover – head", State.PERMITTED)
    assert (np.abs(pixels(view.picture(960, 720)) - plain).max(axis=2) > 40).sum() > 4000
    # Narrow: the same width of the room is in it.
    narrow = view.frame(300, 720, fine=True).camera
    wide = view.camera()
    edge = wide.eye() + wide.ray(2.0, HEIGHT / 2, WIDTH, HEIGHT) * wide.distance_mm
    assert narrow.projected(edge, 300, 720)[0] > -5.0


def test_before_it_has_begun_a_picture_says_so(qtbot: QtBot) -> None:
    view = SceneView(LIGHT)
    qtbot.addWidget(view)
    picture = pixels(view.picture(300, 200))
    assert picture[90:110].min() < 140
    assert picture[:60].min() > 200
    view.shutdown()


def test_frames_are_told_and_a_still_view_draws_no_more(qtbot: QtBot, view: SceneView) -> None:
    with qtbot.waitSignal(view.frame_painted, timeout=5000):
        view.set_pose(31.0, 0.0)
    settle(qtbot, view)
    told = []
    view.frame_painted.connect(lambda: told.append(1))
    view.set_pose(31.0, 0.0)
    qtbot.wait(250)
    assert told == []


def test_it_has_a_name_for_those_who_cannot_see_it(view: SceneView) -> None:
    assert view.accessibleName() == "Room in 3D"
    assert "Arrow keys" in view.accessibleDescription()
    assert view.focusPolicy() == Qt.FocusPolicy.StrongFocus
