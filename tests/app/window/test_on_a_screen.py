"""The window under a real X server: what the screen shows, the room in 3D included."""

import os
import shutil
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray
from PySide6.QtCore import QRect
from PySide6.QtGui import QImage

from app.clearance_scale import EDGE_COLOURS
from app.colours import rgb
from app.window.theme import LIGHT
from tests.window_driver import ROOMS

pytestmark = pytest.mark.skipif(shutil.which("Xvfb") is None, reason="no X server to be had (Xvfb)")

Colours = NDArray[np.float64]


@pytest.fixture
def display() -> Iterator[str]:
    """Start an X server of its own and return its name."""
    read, write = os.pipe()
    command = ["Xvfb", "-displayfd", str(write), "-screen", "0", "1400x900x24", "-nolisten", "tcp"]
    server = subprocess.Popen(command, pass_fds=[write], stderr=subprocess.DEVNULL)
    os.close(write)
    try:
        with os.fdopen(read) as answer:
            yield f":{answer.readline().strip()}"
    finally:
        server.terminate()
        server.wait(10)


def pixels(image: QImage, area: QRect) -> Colours:
    """Return the colours in an area, (height, width, 3), 0 to 1."""
    part = image.copy(area).convertToFormat(QImage.Format.Format_RGB888)
    raw = np.frombuffer(part.constBits(), np.uint8).reshape(part.height(), part.bytesPerLine())
    return raw[:, : 3 * part.width()].reshape(part.height(), part.width(), 3) / 255.0


def share_near(colours: Colours, wanted: tuple[float, float, float], within: float) -> float:
    """Return which share of an area has about a colour."""
    return float((np.abs(colours - np.array(wanted)).max(axis=-1) < within).mean())


@pytest.mark.parametrize("way", ["vtk", "painted"])
def test_the_screen_shows_room_and_chart(display: str, tmp_path: Path, way: str) -> None:
    target = tmp_path / "screen.png"
    environment = {
        **os.environ,
        "DISPLAY": display,
        "QT_QPA_PLATFORM": "xcb",
        "WIDEBERTH_3D": way,
        "HOME": str(tmp_path),
        "XDG_CONFIG_HOME": str(tmp_path),
        "XDG_DATA_HOME": str(tmp_path),
    }
    environment.pop("VTK_DEFAULT_OPENGL_WINDOW", None)
    setup = ROOMS / "c_arm_wide" / "head.setup.toml"
    command = [sys.executable, "-m", "tests.screen_child", str(setup), str(target)]
    root = ROOMS.parent
    run = subprocess.run(command, cwd=root, env=environment, capture_output=True, text=True, timeout=240, check=False)
    assert run.returncode == 0, run.stderr
    said = dict(line.split(maxsplit=1) for line in run.stdout.splitlines())
    assert said["platform"] == "xcb"
    assert said["painted"] == str(way == "painted")

    image = QImage(str(target))
    view = pixels(image, QRect(*map(int, said["view"].split())))
    chart = pixels(image, QRect(*map(int, said["chart"].split())))
    # The chart has its colours: plenty of room in straw, some of the dark end, and the hatches' grey in between.
    assert share_near(chart, rgb(EDGE_COLOURS[9]), 0.06) > 0.1
    assert share_near(chart, rgb(EDGE_COLOURS[0]), 0.15) > 0.002
    # The room has a patient of warm colour, a machine of cool greys in light and shade, and a backdrop behind.
    red, green, blue = np.moveaxis(view, -1, 0)
    warm = (red - blue > 0.12) & (red > green) & (green > blue)
    assert 0.004 < float(warm.mean()) < 0.4
    grey = np.abs(red - blue) < 0.06
    levels = np.unique(np.round(view[grey].mean(axis=-1) * 40.0))
    assert len(levels) > 12
    assert share_near(view, rgb(LIGHT.window), 0.02) < 0.5
