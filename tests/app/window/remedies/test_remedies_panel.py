"""What the panel of remedies says, how it is driven by mouse and keyboard, and that its words are never cut off."""

from collections.abc import Iterator
from dataclasses import replace

import pytest
from PySide6.QtCore import QEvent, QPoint, QRectF, Qt
from PySide6.QtGui import QColor, QImage, QPainter
from PySide6.QtWidgets import QWidget
from pytestqt.qtbot import QtBot

from app.window.remedies.glyphs import draw_glyph
from app.window.remedies.list import ORDER, REMEDY
from app.window.remedies.remedies_panel import RemediesPanel, obstacle_words, state_words
from app.window.theme import DARK, LIGHT, Theme
from geometry.assess import Pose, assess_pose
from geometry.machine import Mount, Part
from geometry.remedies.find import Obstacle, Remedy, RemedyKind, obstacles_at
from geometry.scene import build_scene
from geometry.setup import Setup
from geometry.solids import Box
from geometry.states import State
from tests.geometry.small_rooms import setup_with

LONG = "Patient 112 mm to the patient's right (table-top −X), devices stay"


def blocked(*x_mm: float) -> tuple[Setup, Pose, tuple[Obstacle, ...]]:
    """Return a set-up with cubes on the table whose faces stand at `x_mm`, and what is known at gantry 90, couch 0."""
    parts = [
        Part(f"block {k}", Mount.COUCH, Box((20.0, 20.0, 20.0), (x - 10.0, 0.0, 0.0)), kind="device")
        for k, x in enumerate(x_mm)
    ]
    setup = setup_with(devices=parts)
    return setup, assess_pose(setup, 90.0, 0.0), obstacles_at(build_scene(setup), 90.0, 0.0)


def remedy(kind: RemedyKind, text: str, size: float = 0.0, slack_mm: float = 12.34) -> Remedy:
    return Remedy(kind, text, setup_with(), 90.0, 0.0, 22.34, slack_mm, size)


@pytest.fixture
def panel(qtbot: QtBot) -> Iterator[RemediesPanel]:
    # In a window, as in the program: a window of its own would have to tell the screen its least size.
    window = QWidget()
    qtbot.addWidget(window)
    window.resize(800, 600)
    panel = RemediesPanel(window)
    panel.resize(300, 320)
    window.show()
    yield panel
    window.hide()


def filled(panel: RemediesPanel) -> list[Remedy]:
    _, pose, obstacles = blocked(445.0)
    panel.show_pose(pose, obstacles)
    for one in (
        remedy(RemedyKind.SHIFT, LONG, 112.0),
        remedy(RemedyKind.ANGLES, "Gantry by −12°, to 78°", 12.0),
        remedy(RemedyKind.ARM, "Imager parked"),
        remedy(RemedyKind.ANGLES, "Couch by +3°, to 3°", 3.0),
    ):
        panel.add_remedy(one)
    return list(panel.remedies())


def texts(panel: RemediesPanel) -> str:
    """Return all that the panel's labels show, line by line."""
    labels = (panel._title, panel._state, panel._parts, panel._hint)
    return "\n".join(label.text() for label in labels if not label.isHidden())


def test_a_permitted_pose_is_told_with_what_is_to_spare(panel: RemediesPanel) -> None:
    pose = assess_pose(setup_with(), 0.0, 0.0)
    assert pose.state is State.PERMITTED
    panel.show_pose(pose, ())
    # Head at 450 mm, patient to 50 mm, 10 mm required.
    assert "Nothing: this pose is permitted, 390.0 mm more than required." in texts(panel)
    assert panel.list.isHidden()
    assert panel.button.isHidden()


def test_what_comes_nearest_to_standing_in_the_way_is_told_with_what_it_needs() -> None:
    _, pose, _ = blocked(100.0)
    (nearest, *_) = obstacles_at(pose.scene, 0.0, 0.0, 10_000.0)
    spare = replace(nearest, clearance_mm=43.27, required_mm=20.01)
    assert obstacle_words(spare).endswith(": 43.2 mm, 20.1 mm required")


def test_the_parts_are_named_with_what_is_missing(panel: RemediesPanel) -> None:
    _, pose, obstacles = blocked(445.0, 460.0)
    panel.show_pose(pose, obstacles)
    panel.set_busy(True)
    assert "head – block 1: contact, at least 10.0 mm missing\nhead – block 0: 5.0 mm missing, 5.0 of 10.0 mm" in texts(
        panel
    )
    assert "Trying single changes …" in texts(panel)
    panel.set_busy(False)
    assert "None of the single changes" in texts(panel)


def test_many_pairs_are_counted_and_all_in_the_tooltip(panel: RemediesPanel) -> None:
    _, pose, obstacles = blocked(445.0, 446.0, 447.0, 448.0)
    panel.show_pose(pose, obstacles)
    assert panel._parts.text().splitlines()[2:] == ["and 2 more pairs"]
    assert len(panel._parts.toolTip().splitlines()) == 4


def test_states_without_a_short_pair_are_told_in_words() -> None:
    _, pose, _ = blocked(440.0)
    assert pose.state is State.UNPROVED
    assert state_words(pose, ()).startswith("Unproved: clear at these very angles")
    assert state_words(replace(pose, state=State.NO_TRAVEL), ()).startswith("No travel: the angles are beyond")


def test_a_missing_distance_is_not_told_as_a_number() -> None:
    _, _, (obstacle,) = blocked(445.0)
    assert obstacle_words(replace(obstacle, clearance_mm=float("nan"))) == "head – block 0: distance unknown"


def test_remedies_stand_by_kind_and_size_whatever_the_order_they_come_in(panel: RemediesPanel) -> None:
    found = filled(panel)
    assert [r.kind for r in found] == [RemedyKind.ANGLES, RemedyKind.ANGLES, RemedyKind.ARM, RemedyKind.SHIFT]
    assert [r.size for r in found[:2]] == [3.0, 12.0]
    assert set(ORDER) == set(RemedyKind)


def test_the_keyboard_previews_and_applies(panel: RemediesPanel, qtbot: QtBot) -> None:
    found = filled(panel)
    previews: list[Remedy | None] = []
    panel.preview_wanted.connect(previews.append)
    panel.list.setFocus()
    qtbot.keyClick(panel.list, Qt.Key.Key_Home)
    assert previews == [found[0]]
    qtbot.keyClick(panel.list, Qt.Key.Key_Down)
    assert previews[-1] is found[1]
    with qtbot.waitSignal(panel.apply_wanted) as applied:
        qtbot.keyClick(panel.list, Qt.Key.Key_Return)
    assert applied.args == [found[1]]
    assert panel.button.isEnabled()
    with qtbot.waitSignal(panel.apply_wanted) as applied:
        panel.button.click()
    assert applied.args == [found[1]]


def test_the_pointer_previews_and_a_double_click_applies(panel: RemediesPanel, qtbot: QtBot) -> None:
    found = filled(panel)
    previews: list[Remedy | None] = []
    panel.preview_wanted.connect(previews.append)
    view = panel.list
    index = view.model().index(2, 0)
    view.entered.emit(index)
    assert previews == [found[2]]
    view.leaveEvent(QEvent(QEvent.Type.Leave))
    assert previews == [found[2], None]
    at = view.visualRect(index).center()
    with qtbot.waitSignal(panel.apply_wanted) as applied:
        qtbot.mouseClick(view.viewport(), Qt.MouseButton.LeftButton, pos=at)
        qtbot.mouseDClick(view.viewport(), Qt.MouseButton.LeftButton, pos=at)
    assert applied.args == [found[2]]
    assert previews[-1] is found[2]


def test_another_pose_ends_the_preview_and_empties_the_list(panel: RemediesPanel) -> None:
    filled(panel)
    previews: list[Remedy | None] = []
    panel.list.setCurrentIndex(panel.list.model().index(0, 0))
    panel.preview_wanted.connect(previews.append)
    panel.show_pose(assess_pose(setup_with(), 0.0, 0.0), ())
    assert previews == [None]
    assert panel.remedies() == ()
    panel.clear()
    assert texts(panel) == "What stands in the way?"


@pytest.mark.parametrize("width", [300, 420, 700])
def test_no_words_are_cut_off(panel: RemediesPanel, width: int, qtbot: QtBot) -> None:
    found = filled(panel)
    panel.resize(width, 500)
    qtbot.wait(1)
    view = panel.list
    metrics = view.fontMetrics()
    bottom = -1
    for row, one in enumerate(found):
        rect = view.visualRect(view.model().index(row, 0))
        assert rect.top() > bottom
        bottom = rect.bottom()
        lines = metrics.boundingRect(0, 0, rect.width() - 42, 1000, int(Qt.TextFlag.TextWordWrap), one.text)
        assert rect.height() >= lines.height()
    assert view.visualRect(view.model().index(0, 0)).right() <= view.viewport().width()
    for label in (panel._state, panel._parts, panel._hint):
        if not label.isHidden():
            assert label.height() >= label.heightForWidth(label.width())


@pytest.mark.parametrize("theme", [LIGHT, DARK])
def test_a_chosen_row_is_drawn_in_the_accent_and_the_words_in_ink(panel: RemediesPanel, theme: Theme) -> None:
    filled(panel)
    panel.set_theme(theme)
    view = panel.list
    view.setCurrentIndex(view.model().index(1, 0))
    image = view.viewport().grab().toImage()
    rect = view.visualRect(view.model().index(1, 0))
    ratio = image.devicePixelRatio()
    at = QPoint(int((rect.right() - 3) * ratio), int((rect.top() + 3) * ratio))
    assert image.pixelColor(at) == theme.colour("accent")


def test_every_row_says_what_it_does_to_a_screen_reader(panel: RemediesPanel) -> None:
    found = filled(panel)
    model = panel.list.model()
    for row, one in enumerate(found):
        said = model.index(row, 0).data(Qt.ItemDataRole.AccessibleTextRole)
        assert one.text in said
        assert "12.3 mm to spare" in said
        assert model.index(row, 0).data(REMEDY) is one
    assert panel.list.accessibleName()


def test_each_kind_has_a_sign_of_its_own() -> None:
    pictures = set()
    for kind in RemedyKind:
        image = QImage(40, 40, QImage.Format.Format_ARGB32)
        image.fill(QColor("#ffffff"))
        painter = QPainter(image)
        draw_glyph(painter, kind, QRectF(11.0, 11.0, 18.0, 18.0), QColor("#000000"))
        painter.end()
        border = [image.pixelColor(x, y) for x in range(40) for y in (0, 5, 34, 39)]
        assert all(colour == QColor("#ffffff") for colour in border)
        pictures.add(bytes(image.constBits()))
    assert len(pictures) == len(RemedyKind)
