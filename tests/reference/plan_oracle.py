"""An independent second opinion on a plan: `python -m tests.reference.plan_oracle SETUP PLAN` prints a line a beam.

It reads the plan with pydicom alone, writes an edited set-up for each beam (isocentre, tilt, collimator, table), lets
`wideberth pose` write the parts at gantry 0 and couch 0, turns them with SciPy's rotations, and asks coal for distances
at steps of 0.1 deg along the path, and at the corners of the tolerance rectangle about each step. Nothing of the
check, of the proof or of the program's kinematics of gantry and couch is used; what is a part's required clearance is
read from the set-up's and room's text.

The set-up must be text whose keys stand one a line: `dicom_mm`, `pitch_deg`, `roll_deg`, `collimator_deg`,
`from_head_end_mm`, `lateral_mm`, `height_mm`, in whatever table they belong to; its table top a box named "table top".
"""

import argparse
import math
import re
import sys
import tempfile
import tomllib
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

import numpy as np
import pydicom
import trimesh
from numpy.typing import NDArray
from pydicom import Dataset
from scipy.spatial.transform import Rotation

from app.cli import DONE, run
from tests.reference.distances import CONTACT_MM, Library, library

Array = NDArray[np.float64]

STEP_DEG = 0.1
# GLB is single precision.
PRECISION_MM = 1e-3


@dataclass(frozen=True)
class Beam:
    """A beam as the plan states it: `path` (n, 2), gantry and couch, unwrapped by the stated directions."""

    name: str
    path: Array
    collimator: tuple[float, ...]
    pitch: float
    roll: float
    isocentre: tuple[float, float, float]
    table: tuple[float | None, float | None, float | None]


@dataclass(frozen=True)
class Opinion:
    """What is found of a beam: "contact", "short" or "clear" on the path itself, and the least slacks, mm.

    `within_mm` counts the corners of the tolerance rectangles too; `clearance_mm` is the least on the path.
    """

    name: str
    state: str
    clearance_mm: float
    slack_mm: float
    within_mm: float


def beams_of(plan: Dataset) -> list[Beam]:
    """Return the beams of a photon, electron or ion plan."""
    found = []
    for keyword, inner in (("BeamSequence", "ControlPointSequence"), ("IonBeamSequence", "IonControlPointSequence")):
        found += [_beam(beam, list(beam.get(inner))) for beam in plan.get(keyword) or []]
    return found


def _beam(beam: Dataset, points: list[Dataset]) -> Beam:
    held: dict[str, object] = {}
    rows: list[dict[str, object]] = []
    for point in points:
        for element in point:
            if element.value not in (None, ""):
                held[element.keyword] = element.value
        rows.append(dict(held))

    def path(angle: str, direction: str, rising: str) -> list[float]:
        angles = [float(rows[0].get(angle, 0.0))]
        for before, after in pairwise(rows):
            change = (float(after.get(angle, 0.0)) - float(before.get(angle, 0.0))) % 360.0
            if abs(change - 360.0) < 1e-6:
                change = 0.0
            way = before.get(direction, "NONE")
            angles.append(angles[-1] + (change if way in (rising, "NONE") or change == 0.0 else change - 360.0))
        return angles

    first = rows[0]
    gantry = path("GantryAngle", "GantryRotationDirection", "CW")
    couch = path("PatientSupportAngle", "PatientSupportRotationDirection", "CC")
    stages = [first.get(f"TableTop{name}Position") for name in ("Lateral", "Longitudinal", "Vertical")]
    x, y, z = (float(value) for value in first["IsocenterPosition"])

    def tilt(keyword: str) -> float:
        angle = float(first.get(keyword, 0.0)) % 360.0
        return angle - 360.0 if angle > 180.0 else angle

    lateral, longitudinal, vertical = (None if value is None else float(value) for value in stages)
    return Beam(
        str(beam.BeamName),
        np.column_stack([gantry, couch]),
        tuple(float(row.get("BeamLimitingDeviceAngle", 0.0)) for row in rows),
        tilt("TableTopPitchAngle"),
        tilt("TableTopRollAngle"),
        (x, y, z),
        (lateral, longitudinal, vertical),
    )


def opinions(
    setup: Path, plan: Path, *, tolerance_deg: float = 1.0, step_deg: float = STEP_DEG, by_plan: bool = True
) -> list[Opinion]:
    """Return an opinion on each beam; `by_plan`: the table stands where the plan has it, as far as it says so."""
    found = []
    for beam in beams_of(pydicom.dcmread(plan)):
        with tempfile.TemporaryDirectory(dir=setup.parent) as folder:
            text = _edited(setup.read_text(encoding="utf-8"), beam, Path(folder), setup)
            parts = _posed(Path(folder), text)
            if by_plan and any(value is not None for value in beam.table):
                parts = _posed(Path(folder), _with_table(text, parts, beam.table))
        found.append(_opinion(beam, parts, tomllib.loads(text), setup, tolerance_deg, step_deg))
    return found


def _edited(text: str, beam: Beam, folder: Path, setup: Path) -> str:
    held = len(set(beam.collimator)) == 1
    text = _put(text, "dicom_mm", list(beam.isocentre))
    text = _put(text, "pitch_deg", beam.pitch)
    text = _put(text, "roll_deg", beam.roll)
    text = _put(text, "collimator_deg", beam.collimator[0] if held else '"any"')
    # Paths in the set-up are relative to it; the copy stands in a folder beside it.
    assert folder.parent == setup.parent
    return re.sub(r'^(room|file) = "(?!/)', r'\1 = "../', text, flags=re.MULTILINE)


def _put(text: str, key: str, value: object) -> str:
    text, count = re.subn(rf"^{key} = .*$", f"{key} = {value}", text, flags=re.MULTILINE)
    assert count == 1, key
    return text


def _with_table(text: str, parts: dict[str, list[Array]], table: Sequence[float | None]) -> str:
    """Put the patient elsewhere on the table, so that the table top stands where the plan has it, without a roll."""
    top = np.concatenate(parts["couch/table top"])
    low, high = top.min(axis=0), top.max(axis=0)
    stands = np.array([0.5 * (low[0] + high[0]), high[1], high[2]])
    off = [0.0 if value is None else value - held for value, held in zip(table, stands, strict=True)]
    values = {key: float(re.search(rf"^{key} = (.*)$", text, re.MULTILINE)[1]) for key in _ON_TABLE}
    text = _put(text, "lateral_mm", values["lateral_mm"] - off[0])
    # The table goes to the gantry under the patient: the patient's nearest point comes further from its head end.
    text = _put(text, "from_head_end_mm", values["from_head_end_mm"] + off[1])
    return _put(text, "height_mm", values["height_mm"] - off[2])


_ON_TABLE = ("lateral_mm", "from_head_end_mm", "height_mm")


def _posed(folder: Path, text: str) -> dict[str, list[Array]]:
    """Return the vertices of each part's pieces at gantry 0 and couch 0, fixed system, mm."""
    path, model = folder / "edited.setup.toml", folder / "pose.glb"
    path.write_text(text, encoding="utf-8")
    assert run(["pose", str(path), "--gantry", "0", "--couch", "0", "--out", str(model), "--json"]) == DONE
    scene = trimesh.load(model, process=False)
    found = {}
    for name in scene.graph.nodes_geometry:
        matrix, geometry = scene.graph[name]
        mesh = scene.geometry[geometry]
        points = trimesh.transform_points(mesh.vertices, matrix)
        labels = trimesh.graph.connected_component_labels(mesh.edges, node_count=len(points))
        # glTF: metres, Y up.
        fixed = np.column_stack([points[:, 0], -points[:, 2], points[:, 1]]) * 1000.0
        found[name] = [fixed[labels == label] for label in range(labels.max() + 1)]
    return found


def _opinion(
    beam: Beam, parts: dict[str, list[Array]], stated: dict[str, object], setup: Path, tolerance: float, step: float
) -> Opinion:
    room = tomllib.loads((setup.parent / str(stated["room"]).removeprefix("../")).read_text(encoding="utf-8"))
    pairs = _Pairs(parts, stated["required"], room, library())
    clearance = slack = within = math.inf
    for gantry, couch in _steps(beam.path, step):
        here, left = pairs.least(gantry, couch)
        clearance, slack = min(clearance, here), min(slack, left)
        corners = [(g, c) for g in (-tolerance, tolerance) for c in (-tolerance, tolerance)] if tolerance else []
        within = min([within, left, *(pairs.least(gantry + g, couch + c)[1] for g, c in corners)])
    state = "contact" if clearance <= CONTACT_MM else "short" if slack < -PRECISION_MM else "clear"
    return Opinion(beam.name, state, max(clearance, 0.0), float(slack), float(within))


def _steps(path: Array, step: float) -> list[tuple[float, float]]:
    found = [(float(path[0][0]), float(path[0][1]))]
    for one, other in pairwise(path):
        count = math.ceil(float(np.abs(other - one).max()) / step)
        found += [tuple((one + (other - one) * k / count).tolist()) for k in range(1, count + 1)]
    return found


class _Pairs:
    """All pairs of pieces of different sides that are not joined, asked at a pose, the nearest bounds first."""

    def __init__(
        self, parts: dict[str, list[Array]], required: dict[str, object], room: dict[str, object], by: Library
    ) -> None:
        self._by = by
        described = {part["name"]: part for part in room["part"]}
        joined = {
            frozenset((one, other))
            for entry in room.get("joined", [])
            for one in entry.get("parts", [entry.get("first")])
            for other in entry.get("with", [entry.get("second")])
        }
        pieces = [(label, piece) for label, found in parts.items() for piece in found]
        self._hulls = [by.hull(piece) for _, piece in pieces]
        self._centres = np.array([piece.mean(axis=0) for _, piece in pieces])
        self._radii = np.array([np.linalg.norm(piece - piece.mean(axis=0), axis=1).max() for _, piece in pieces])
        self._carriers = [_carrier(label, described) for label, _ in pieces]
        index = [
            (i, j)
            for i, (one, _) in enumerate(pieces)
            for j, (other, _) in enumerate(pieces)
            if i < j and _asked(one, other, described, joined)
        ]
        self._i, self._j = np.array(index).T
        self._required = np.array([_required_mm(required, pieces[i][0], pieces[j][0], described) for i, j in index])

    def least(self, gantry: float, couch: float) -> tuple[float, float]:
        """Return the least clearance and the least slack at a pair of angles, mm."""
        turns = {
            "gantry": Rotation.from_euler("Y", gantry, degrees=True),
            "couch": Rotation.from_euler("Z", couch, degrees=True),
            "room": Rotation.identity(),
        }
        placed = {name: self._by.turned(turn) for name, turn in turns.items()}
        carriers = np.array(self._carriers)
        centres = self._centres.copy()
        for name, turn in turns.items():
            centres[carriers == name] = turn.apply(centres[carriers == name]) if (carriers == name).any() else 0.0
        apart = np.linalg.norm(centres[self._i] - centres[self._j], axis=1)
        bound = apart - self._radii[self._i] - self._radii[self._j]
        clearance = slack = math.inf
        for k in np.argsort(bound - self._required.max()):
            if bound[k] - self._required.max() >= slack and bound[k] >= clearance:
                break
            i, j = int(self._i[k]), int(self._j[k])
            distance = self._by.distance_mm(
                self._hulls[i], self._hulls[j], placed[self._carriers[i]], placed[self._carriers[j]]
            )
            clearance = min(clearance, distance)
            slack = min(slack, max(distance, 0.0) - self._required[k])
        return clearance, slack


def _carrier(label: str, described: dict[str, dict[str, object]]) -> str:
    side, name = label.split("/", 1)
    follows = described.get(name, {}).get("follows")
    return "room" if side == "couch" and follows is not None and "turntable" not in follows else side


def _asked(one: str, other: str, described: dict[str, dict[str, object]], joined: set[frozenset[object]]) -> bool:
    (side, name), (other_side, other_name) = one.split("/", 1), other.split("/", 1)
    if side == other_side:
        return False
    if {side, other_side} == {"gantry", "couch"} or name not in described or other_name not in described:
        return True
    return frozenset((name, other_name)) not in joined


def _required_mm(required: dict[str, object], one: str, other: str, described: dict[str, dict[str, object]]) -> float:
    with_patient = any(label.split("/", 1)[1] not in described for label in (one, other))
    parts = [part for part in required.get("component", []) if with_patient or not part.get("patient_only", False)]
    return float(required["fixed_mm"]) + float(required.get("k", 2.0)) * math.sqrt(
        sum(float(part["sd_mm"]) ** 2 for part in parts)
    )


def main(arguments: Sequence[str] | None = None) -> int:
    """Print an opinion on each beam."""
    parser = argparse.ArgumentParser(prog="python -m tests.reference.plan_oracle", description=__doc__)
    parser.add_argument("setup", type=Path)
    parser.add_argument("plan", type=Path)
    parser.add_argument("--tolerance", type=float, default=1.0)
    chosen = parser.parse_args(arguments)
    for opinion in opinions(chosen.setup, chosen.plan, tolerance_deg=chosen.tolerance):
        print(opinion, flush=True)
    return 0


if __name__ == "__main__":
    sys.exit(main())
