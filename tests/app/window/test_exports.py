"""What the window writes says what every export says."""

import datetime
from pathlib import Path

import pytest
from PySide6.QtGui import QColor, QImage
from PySide6.QtWidgets import QFileDialog, QMessageBox
from pytestqt.qtbot import QtBot

from app.cautions import CAUTIONS
from app.files.provenance import provenance_of
from app.files.setup_file import read_setup
from app.window.captions import captioned, picture_lines
from app.window.main_window import MainWindow
from geometry.assess import Options, exact_pose
from geometry.scene import build_scene
from tests.window_driver import ROOMS, settle, wait_for

HEAD = ROOMS / "particle_snout" / "head.setup.toml"


def test_a_picture_says_where_it_comes_from() -> None:
    scene = build_scene(read_setup(HEAD))
    provenance = provenance_of(scene, Options(), datetime.date(2026, 1, 2))
    text = "\n".join(picture_lines(exact_pose(scene, 310.0, 20.0), provenance))
    for what in (
        *CAUTIONS,
        provenance.fingerprint,
        provenance.version,
        "2026-01-02",
        "DEMONSTRATION",
        "310.0°",
        "20.0°",
    ):
        assert what in text


def test_a_caption_is_below_the_picture_and_leaves_it_as_it_is(qtbot: QtBot) -> None:  # noqa: ARG001 - fonts
    image = QImage(640, 400, QImage.Format.Format_RGB32)
    image.fill(QColor("#336699"))
    page = captioned(image, ["One line.", "another " * 60])
    assert page.width() == 640
    assert page.height() > 500
    assert page.copy(0, 0, 640, 400) == image
    below = page.copy(0, 400, 640, page.height() - 400)
    dark = sum(below.pixelColor(x, y).lightness() < 100 for x in range(0, 640, 2) for y in range(0, below.height(), 2))
    assert dark > 200, "no letters"


@pytest.mark.parametrize(
    ("name", "export"),
    [
        ("angles.csv", "export_map"),
        ("every.csv", "export_grid"),
        ("pose.glb", "export_pose"),
    ],
)
def test_each_export_of_the_menu_writes_a_file(
    window: MainWindow, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, name: str, export: str
) -> None:
    window.files.open_sample(HEAD)
    settle(window)
    target = tmp_path / name
    monkeypatch.setattr(QFileDialog, "getSaveFileName", lambda *_: (str(target), ""))
    getattr(window.exports, export)()
    wait_for(target.exists, name)
    wait_for(lambda: not window.jobs.is_busy(), "the export")
    assert target.stat().st_size > 500


def test_a_picture_of_the_room_is_written(window: MainWindow, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    window.files.open_sample(HEAD)
    settle(window)
    target = tmp_path / "room.png"
    monkeypatch.setattr(QFileDialog, "getSaveFileName", lambda *_: (str(target), ""))
    window.exports.export_picture(window.workspace.scene_view.picture)
    wait_for(target.exists, "the picture")
    picture = QImage(str(target))
    assert picture.width() == 1600
    assert picture.height() > 1150


def test_a_folder_that_is_not_there_is_told(
    window: MainWindow, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    shown: list[str] = []
    monkeypatch.setattr(QMessageBox, "exec", lambda box: shown.append(box.text()) or 0)
    window.files.open_sample(HEAD)
    settle(window)
    told: list[str] = []
    window.exports.failed.connect(told.append)
    window.exports.write_map_to(tmp_path / "nowhere" / "angles.csv")
    assert "no folder" in told[0]
    assert shown == told
