"""Pictures of the window: `python -m tests.pictures` makes those of the README, `--all FOLDER` every one to look at.

They show what the program shows on a sample room; nothing is painted over.
"""

import argparse
import os
import sys
import tempfile
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from app.kernel_cache import choose_kernel_cache

PICTURES = Path(__file__).parent / "pictures"


@dataclass(frozen=True)
class Shot:
    """A picture: its name, the sample set-up (none: the start screen), and what to do before it is taken."""

    name: str
    setup: str = ""
    prepare: Callable[..., None] = lambda _window: None
    theme: str = "light"
    size: tuple[int, int] = (1500, 940)
    of_readme: bool = False


def _blocked(window: object) -> None:
    window.desk.go_to(100.0, 40.0)  # type: ignore[attr-defined]


def _vertex(window: object) -> None:
    window.desk.go_to(40.0, -60.0)  # type: ignore[attr-defined]


def _near(window: object) -> None:
    from app.window.shading_desk import Shading

    window.desk.go_to(60.0, 20.0)  # type: ignore[attr-defined]
    window.shading.choose(Shading.TURN)  # type: ignore[attr-defined]


def _discs(window: object) -> None:
    window.desk.go_to(50.0, -40.0)  # type: ignore[attr-defined]
    window.workspace.right_tabs.setCurrentIndex(1)  # type: ignore[attr-defined]


_PLAN = """\
field,gantry_from_deg,gantry_to_deg,direction,couch_from_deg,couch_to_deg,collimator_deg,fitted
Coplanar arc,181,179,CW,0,0,10,
Oblique arc,30,179,CW,330,330,350,
Vertex arc,0,120,CW,270,270,90,
Left beam,90,90,,30,30,0,
"""


def _plan(window: object) -> None:
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "invented_plan.csv"
        path.write_text(_PLAN, encoding="utf-8")
        window.open_plan(path)  # type: ignore[attr-defined]
        from tests.window_driver import settle

        settle(window)  # type: ignore[arg-type]
    window.workspace.fields.choose_field(1)  # type: ignore[attr-defined]


SHOTS = (
    Shot("start"),
    Shot("window", "c_arm_wide/head", _vertex, of_readme=True),
    Shot("blocked", "c_arm_wide/tall_heavy", _blocked, of_readme=True),
    Shot("nearest_approach", "c_arm_wide/tall_heavy", _near),
    Shot("directions", "c_arm_wide/head", _discs),
    Shot("dark", "c_arm_close/breast", _vertex, theme="dark"),
    Shot("small", "particle_snout/head", _vertex, size=(1366, 768)),
    Shot("plan", "c_arm_wide/head", _plan),
    Shot("bore", "closed_bore/prostate", size=(1366, 768)),
    Shot("cobalt", "cobalt/neck", _blocked, size=(1366, 768)),
    Shot("start_dark", theme="dark", size=(1366, 768)),
)


def take(shot: Shot, path: Path) -> None:
    """Open the window, do what the shot asks for, and write the picture."""
    from tests.window_driver import ROOMS, new_window, pause, picture_of, settle

    with tempfile.TemporaryDirectory() as folder:
        window = new_window(Path(folder), shot.theme, shot.size)
        try:
            if shot.setup:
                window.files.open_sample(ROOMS / f"{shot.setup}.setup.toml")
                settle(window)
                shot.prepare(window)
                settle(window)
                pause(2.5)
                settle(window)
            else:
                pause(0.3)
            if not picture_of(window).save(str(path)):
                raise SystemExit(f"{path} cannot be written")
            print(path)
        finally:
            window.close()


def main() -> None:
    """Make the pictures."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--all", metavar="FOLDER", type=Path, help="every picture, into a folder")
    parser.add_argument("--only", metavar="NAME", action="append", default=[], help="these alone")
    chosen = parser.parse_args()
    os.environ.setdefault("QT_QPA_PLATFORM", "offscreen")
    if sys.platform == "linux":
        os.environ.setdefault("VTK_DEFAULT_OPENGL_WINDOW", "vtkEGLRenderWindow")
    choose_kernel_cache()
    folder = chosen.all or PICTURES
    folder.mkdir(parents=True, exist_ok=True)
    for shot in SHOTS:
        if (chosen.all is not None or shot.of_readme) and (not chosen.only or shot.name in chosen.only):
            take(shot, folder / f"{shot.name}.png")


if __name__ == "__main__":
    main()
