"""Angles as people type and read them, and the pose in words."""

import math

import pytest
from PySide6.QtCore import Qt
from PySide6.QtTest import QTest
from pytestqt.qtbot import QtBot

from app.files.setup_file import read_setup
from app.window.angle_box import AngleBox
from app.window.pose_bar import PoseBar, Proof
from app.window.theme import DARK
from geometry.assess import exact_pose
from geometry.scene import build_scene
from tests.window_driver import ROOMS


def typed(box: AngleBox, text: str) -> float:
    box.selectAll()
    QTest.keyClicks(box, text)
    QTest.keyClick(box, Qt.Key.Key_Return)
    return box.value()


@pytest.mark.parametrize(
    ("travel", "start", "text", "expected"),
    [
        ((-185.0, 185.0), 0.0, "270", -90.0),
        ((-185.0, 185.0), 0.0, "-90", -90.0),
        ((-185.0, 185.0), 170.0, "182", 182.0),
        ((-185.0, 185.0), -170.0, "182", -178.0),
        ((-185.0, 185.0), 0.0, "12,5", 12.5),
        ((-45.0, 190.0), 0.0, "300", -45.0),
        ((-45.0, 190.0), 0.0, "200", 190.0),
    ],
)
def test_a_typed_angle_is_the_nearest_one_that_the_travel_holds(
    qtbot: QtBot, travel: tuple[float, float], start: float, text: str, expected: float
) -> None:
    box = AngleBox("Gantry")
    qtbot.addWidget(box)
    box.set_travel(*travel)
    box.show_angle(start)
    box.show()
    assert typed(box, text) == pytest.approx(expected)


def test_angles_read_as_iec_61217_has_them(qtbot: QtBot) -> None:
    box = AngleBox("Gantry")
    qtbot.addWidget(box)
    box.set_travel(-185.0, 185.0)
    for angle, text in (
        (-90.0, "270.0 °"),
        (-0.001, "0.0 °"),
        (180.0, "180.0 °"),
        (12.34, "12.34 °"),
        (-5.0, "355.0 °"),
    ):
        box.show_angle(angle)
        assert box.text() == text


def test_only_a_persons_angle_is_wanted(qtbot: QtBot) -> None:
    bar = PoseBar()
    qtbot.addWidget(bar)
    room = read_setup(ROOMS / "c_arm_close" / "breast.setup.toml").room
    bar.show_room(room)
    wanted: list[tuple[float, float]] = []
    bar.pose_wanted.connect(lambda gantry, couch: wanted.append((gantry, couch)))
    bar.show_angles(40.0, -60.0)
    assert not wanted
    QTest.keyClick(bar.gantry, Qt.Key.Key_Up)
    assert wanted == [(41.0, -60.0)]


def test_the_pose_is_told_in_words(qtbot: QtBot) -> None:
    bar = PoseBar()
    qtbot.addWidget(bar)
    bar.set_theme(DARK)
    scene = build_scene(read_setup(ROOMS / "c_arm_close" / "breast.setup.toml"))
    bar.show_room(scene.setup.room)
    pose = exact_pose(scene, 0.0, 0.0)
    bar.show_pose(pose, Proof.UNDER_WAY)
    assert bar.state.text() == "Proof under way"
    bar.show_pose(pose, Proof.DONE)
    assert bar.state.text() == "Permitted"
    assert f"{math.floor(10.0 * pose.clearance_mm) / 10.0:.1f} mm between" in bar.detail.text()
    bar.show_pose(exact_pose(scene, 120.0, 60.0), Proof.UNDER_WAY)
    assert bar.state.text() == "Contact"
