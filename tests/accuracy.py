"""How exact the sweep is: `python -m tests.accuracy --pairs 2000` prints one line of JSON for each patient.

Every sample set-up, the structure set of an open data set and a closed mesh of a body, each at random pairs of angles
against coal (python-fcl on Windows) over convex hulls of the same pieces, placed by SciPy's turns. The exit status is 1
if a distance is off by more than a millionth of a mm, or contact is told otherwise.
"""

import argparse
import json
import sys
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from app.kernel_cache import choose_kernel_cache

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from geometry.imported import ContourStack
    from geometry.setup import Setup

SAMPLES = Path(__file__).resolve().parents[1] / "sample_rooms"


def compared(name: str, setup: "Setup", pairs: int) -> dict[str, object]:
    """Hold the sweep of one set-up against the library at random pairs of angles."""
    from geometry.scene import build_scene
    from geometry.sweep import sweep
    from tests.reference.distances import LeastDistances

    rng = np.random.default_rng(len(name))
    scene, reference = build_scene(setup), LeastDistances(setup)
    gantry, couch = setup.room.gantry, setup.room.couch.turntable
    gantry_deg = np.unique(rng.uniform(gantry.low, gantry.high, pairs // 20))
    couch_deg = np.unique(rng.uniform(couch.low, couch.high, 20))
    found = sweep(scene, gantry_deg, couch_deg)
    rows = rng.integers(len(couch_deg), size=pairs)
    columns = rng.integers(len(gantry_deg), size=pairs)
    true = np.array(
        [
            reference.at(float(g), float(c)).clearance_mm
            for g, c in zip(gantry_deg[columns], couch_deg[rows], strict=True)
        ]
    )
    ours = found.clearance_mm[rows, columns]
    apart = true > 0.0
    return {
        "setup": name,
        "pieces": sum(len(part.pieces) for part in scene.parts),
        "pairs": pairs,
        "apart": int(apart.sum()),
        "greatest_difference_mm": float(np.abs(ours - true)[apart].max(initial=0.0)),
        "contact_disagreements": int((apart != (ours > 0.0)).sum()),
    }


def patients() -> "Iterator[tuple[str, Setup]]":
    """Yield every sample set-up, and one with an imported envelope of each kind."""
    import trimesh

    from app.files.dicom import read_external_contour
    from app.files.setup_file import read_setup
    from geometry.imported import ClosedMesh
    from geometry.setup import Isocentre, Surface
    from tests.open_data import open_data_folder

    paths = sorted(SAMPLES.glob("*/*.setup.toml"))
    for path in paths:
        yield f"{path.parent.name}/{path.name}", read_setup(path)
    usual = read_setup(SAMPLES / "c_arm_wide" / "tall_heavy.setup.toml")
    # A trunk without limbs: a sphere, stretched.
    trunk = trimesh.creation.icosphere(subdivisions=4)
    trunk.apply_scale([190.0, 120.0, 420.0])
    mesh = ClosedMesh(np.asarray(trunk.vertices), np.asarray(trunk.faces))
    contours = read_external_contour(open_data_folder() / "rtss.dcm", None)
    for name, solid, middle in (
        ("a mesh", mesh, (0.0, 0.0, 0.0)),
        ("the open structure set", contours, tuple(float(x) for x in _middle_of(contours))),
    ):
        surface = Surface(solid, name, (), None)
        yield name, replace(usual, patient=surface, devices=(), isocentre=Isocentre(None, dicom_mm=middle))


def _middle_of(contours: "ContourStack") -> "NDArray[np.float64]":
    pieces = contours.faceted(0.5).pieces
    points = np.concatenate(pieces)
    return 0.5 * (points.min(axis=0) + points.max(axis=0))


def main() -> int:
    """Compare every patient and print what was found."""
    parser = argparse.ArgumentParser(prog="python -m tests.accuracy", description=__doc__)
    parser.add_argument("--pairs", type=int, default=2000)
    chosen = parser.parse_args()
    choose_kernel_cache()
    wrong = False
    for name, setup in patients():
        found = compared(name, setup, chosen.pairs)
        print(json.dumps(found), flush=True)
        wrong |= float(str(found["greatest_difference_mm"])) > 1e-6 or found["contact_disagreements"] != 0
    return 1 if wrong else 0


if __name__ == "__main__":
    sys.exit(main())
