"""Scenes and pictures for the tests of the view of the room."""

import subprocess
import sys
from functools import cache
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from PySide6.QtGui import QImage, QPixmap

from app.files.setup_file import read_setup
from app.window.room.opengl_probe import Graphics
from geometry.scene import Scene, build_scene

_ROOMS = Path(__file__).parents[3] / "sample_rooms"


@cache
def scene_of(name: str) -> Scene:
    """Return the scene of a sample set-up, "room/set-up"."""
    return build_scene(read_setup(_ROOMS / f"{name}.setup.toml"))


@cache
def graphics_here() -> Graphics:
    """Return what draws for VTK on this machine."""
    run = subprocess.run(
        [sys.executable, "-m", "app.window.room.opengl_probe"], cwd=_ROOMS.parent, capture_output=True, check=False
    )
    return Graphics(run.returncode) if run.returncode in {0, 3} else Graphics.NONE


def pixels(image: QImage | QPixmap) -> NDArray[np.int64]:
    """Return red, green and blue, 0 to 255, shape (height, width, 3)."""
    if isinstance(image, QPixmap):
        image = image.toImage()
    image = image.convertToFormat(QImage.Format.Format_RGBX8888)
    rows = np.frombuffer(image.constBits(), np.uint8).reshape(image.height(), image.bytesPerLine() // 4, 4)
    return rows[:, : image.width(), :3].astype(np.int64)
