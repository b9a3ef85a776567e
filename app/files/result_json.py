"""All that is known of a set-up, as one JSON object (UTF-8, no NaN or infinity: null stands for "no value").

- `format`: 1; `kind`: "wideberth result".
- `provenance`: `room`, `setup`, `fingerprint` (set-up with its room), `room_fingerprint`, `version`, `date`, `survey`,
  `marks` (demonstration, unsurveyed, no travel), `required` (`fixed_mm`, `k`, `components` of `name`, `sd_mm`,
  `patient_only`, `reason`, and what follows: `machine_pairs_mm`, `patient_pairs_mm`), `joined` (`first`, `second`,
  `reason`), `no_travel`, `cautions`.
- `inputs`: what the set-up states, and the couch position that follows, a list of [label, text].
- `options`: `gantry_step_deg`, `couch_step_deg`, `edge_deg`, `gantry_tolerance_deg`, `couch_tolerance_deg`.
- `readouts`: for `gantry` and `couch`, null where the machine shows IEC 61217, else `zero_deg`, `sense`,
  `resolution_deg`: shown = zero + sense × IEC.
- `spans`: one object a row of the permitted-angle table, as `app.files.permitted_rows.PermittedRow` tells, and
  `gantry_travel_from_deg`, `gantry_travel_to_deg`: the same ends on the gantry's unwrapped travel.
- `grid`: `gantry_deg` (n) and `couch_deg` (m) in [0, 360); `gantry_travel_deg`, `couch_travel_deg`: the same, unwrapped
  and rising; `clearance_mm`, `slack_mm`, `state`, `machine_part`, `couch_part`: m rows of n values, `state` an index
  into `states`, the parts indices into `parts` (null: none). `clearance_mm` is 0 in contact, null without a distance.
- `states`: the names of the states. `parts`: `name` as `SIDE/PART`, `side`, `kind`, `excess_mm`.
- `permitted_region`: polygons of permitted readings, each `outline` and `holes`, closed rings of [gantry, couch] in
  degrees on the unwrapped travel. Empty where one of the two axes cannot turn: the spans tell all there.
"""

import json
from collections.abc import Iterator
from dataclasses import asdict
from pathlib import Path
from typing import BinaryIO, Final

import numpy as np
import shapely
from numpy.typing import NDArray

from app.files.atomic import write_atomically
from app.files.permitted_rows import permitted_rows
from app.files.provenance import Provenance
from app.files.readings import reading_deg
from app.files.setup_lines import setup_lines
from geometry.assess import Assessment
from geometry.machine import Axis
from geometry.states import STATES

RESULT_FORMAT: Final = 1

Json = dict[str, object]


def write_result_json(assessment: Assessment, provenance: Provenance, path: Path) -> None:
    """Write everything. Raises BadInput where the file cannot be written."""
    content = json.dumps(result(assessment, provenance), ensure_ascii=False, allow_nan=False, separators=(",", ":"))

    def write(stream: BinaryIO) -> None:
        stream.write(content.encode())

    write_atomically(path, write)


def result(assessment: Assessment, provenance: Provenance) -> Json:
    """Return everything as plain values for JSON."""
    scene = assessment.scene
    room = scene.setup.room
    return {
        "format": RESULT_FORMAT,
        "kind": "wideberth result",
        "provenance": provenance_values(provenance),
        "inputs": [list(line) for line in setup_lines(scene)],
        "options": asdict(assessment.options),
        "readouts": {"gantry": readout_values(room.gantry), "couch": readout_values(room.couch.turntable)},
        "spans": _spans(assessment),
        "grid": _grid(assessment),
        "states": list(STATES),
        "parts": [
            {"name": part.label, "side": part.side, "kind": part.kind, "excess_mm": part.excess_mm}
            for part in scene.parts
        ],
        "permitted_region": [_polygon(polygon) for polygon in _polygons(assessment.permitted_region)],
    }


def provenance_values(provenance: Provenance) -> Json:
    """Return the provenance as plain values for JSON; the options stand elsewhere."""
    required = provenance.required
    return {
        "room": provenance.room,
        "setup": provenance.setup,
        "fingerprint": provenance.fingerprint,
        "room_fingerprint": provenance.room_fingerprint,
        "version": provenance.version,
        "date": provenance.date.isoformat(),
        "survey": provenance.survey,
        "marks": list(provenance.marks),
        "required": {
            **asdict(required),
            "machine_pairs_mm": required.of_pair_mm(with_patient=False),
            "patient_pairs_mm": required.of_pair_mm(with_patient=True),
        },
        "joined": [asdict(pair) for pair in provenance.joined],
        "no_travel": list(provenance.no_travel),
        "cautions": list(provenance.cautions),
    }


def readout_values(axis: Axis) -> Json | None:
    """Return an axis's own scale as plain values for JSON, None where it shows IEC 61217."""
    readout = axis.readout
    if readout.is_iec():
        return None
    return {"zero_deg": readout.zero, "sense": readout.sense, "resolution_deg": readout.resolution}


def _spans(assessment: Assessment) -> list[Json]:
    """Return the rows of the table; those with angles are the assessment's spans in their order."""
    spans = iter(assessment.spans)
    rows = []
    for row in permitted_rows(assessment):
        travel: Json = {"gantry_travel_from_deg": None, "gantry_travel_to_deg": None}
        if row.gantry_from_deg is not None:
            span = next(spans)
            travel = {"gantry_travel_from_deg": span.gantry_from_deg, "gantry_travel_to_deg": span.gantry_to_deg}
        rows.append(asdict(row) | travel)
    return rows


def _grid(assessment: Assessment) -> Json:
    exact = assessment.map
    return {
        "gantry_deg": [reading_deg(angle) for angle in exact.gantry_deg.tolist()],
        "couch_deg": [reading_deg(angle) for angle in exact.couch_deg.tolist()],
        "gantry_travel_deg": exact.gantry_deg.tolist(),
        "couch_travel_deg": exact.couch_deg.tolist(),
        "clearance_mm": _with_null(exact.clearance_mm, np.isfinite(exact.clearance_mm)),
        "slack_mm": _with_null(exact.slack_mm, np.isfinite(exact.slack_mm)),
        "state": assessment.state.tolist(),
        "machine_part": _with_null(exact.machine_part, exact.machine_part >= 0),
        "couch_part": _with_null(exact.couch_part, exact.couch_part >= 0),
    }


def _with_null(values: NDArray[np.float64] | NDArray[np.int32], valid: NDArray[np.bool_]) -> list[list[float | None]]:
    """Return rows of plain values, None for what is not valid."""
    return [
        [value if there else None for value, there in zip(*pair, strict=True)]
        for pair in zip(values.tolist(), valid.tolist(), strict=True)
    ]


def _polygons(region: shapely.Geometry) -> Iterator[shapely.Polygon]:
    for part in shapely.get_parts(region):
        if isinstance(part, shapely.Polygon) and not part.is_empty:
            yield part


def _polygon(polygon: shapely.Polygon) -> Json:
    return {"outline": _ring(polygon.exterior), "holes": [_ring(hole) for hole in polygon.interiors]}


def _ring(ring: shapely.LinearRing) -> list[list[float]]:
    points: list[list[float]] = shapely.get_coordinates(ring).tolist()
    return points
