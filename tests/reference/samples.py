"""The set-ups that come with the program; each scene is built once for all tests of a process."""

from functools import cache
from pathlib import Path

from app.files.setup_file import read_setup
from geometry.scene import Scene, build_scene

FOLDER = Path(__file__).resolve().parents[2] / "sample_rooms"
SETUPS = sorted(path.relative_to(FOLDER).as_posix() for path in FOLDER.glob("*/*.setup.toml"))
ONE_OF_EACH_ROOM = list({name.split("/")[0]: name for name in SETUPS}.values())


@cache
def sample_scene(name: str) -> Scene:
    """Return the scene of a set-up, named as in `SETUPS`."""
    return build_scene(read_setup(FOLDER / name))
