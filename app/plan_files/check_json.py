"""A report on a plan as one JSON object (UTF-8, no NaN or infinity: null stands for "no value").

- `format`: 1; `kind`: "wideberth check"; `permitted`: whether every field and every move is.
- `provenance`, `inputs`, `options`, `readouts`: as in `app.files.result_json`.
- `notes`: what concerns all fields, in words. `seconds`: the machine's time for all, null where part is not known.
- `speeds`: `gantry_deg_s`, `couch_deg_s`, and `assumed`, the axes whose speed the room does not state.
- `fields`, in plan order, each: `number` from 1, `name`, `place` in its file, `kind` "static" or "arc", `set_up` for a
  set-up field; `state`, `reason` (empty where the state says it all); `gantry_from_deg`, `gantry_to_deg`,
  `couch_from_deg`, `couch_to_deg` in [0, 360), `gantry_turn_deg`, `couch_turn_deg` (signed, IEC 61217); `path_deg`:
  [gantry, couch] at each control point, unwrapped; `collimator_deg` (null: all that it can sweep), `pitch_deg`,
  `roll_deg`, `eccentric_deg`, `fitted`, `arms` (name to position or slide in mm), `table_mm` (lateral, longitudinal,
  vertical); `least_clearance_mm`, proved over the path and the tolerances, null unless permitted; `least`, `tightest`,
  `nearest`, `first_short`: places, or null, as `geometry.paths.Verdict` tells them (`least` and `tightest` are proved
  bounds, the others exact); `within`: of an unproved field, the least slack seen within the tolerances about
  `first_short` and `nearest`; `look_at`: the place to look at; `shortfall_mm` there or `within`, null for none;
  `seconds`; `notes`; `table_as`: which place of table and devices these figures are for, empty where it was checked
  with one alone, and `table_settled`: whether the table's place is the same in all of them.
- A place: `control_point` from 1 (the one before it), `gantry_deg`, `couch_deg` in [0, 360), `gantry_travel_deg`,
  `couch_travel_deg` unwrapped, `clearance_mm`, `slack_mm`, `machine_part`, `couch_part` as `SIDE/PART`.
- `moves`, in plan order, each: `before` and `after`, numbers of fields, `state`, `reason`, `in_the_way` (two parts, or
  null), `seconds`, `table_as`, `steps`: `kind` ("turn", "collimator", "table", "fit"), `text`, `state`, `path_deg`
  unwrapped, `least_clearance_mm` (proved), `first_short` (a place), `seconds`.
- `better_order`: null, or `fields` (numbers), `moves`, `seconds_saved` (turns alone; null where a move of the plan's
  order is not permitted), `changes_saved`, `exact` (whether no order is quicker).
"""

import json
import math
from collections.abc import Sequence
from dataclasses import asdict
from pathlib import Path
from typing import BinaryIO, Final

from app.files.atomic import write_atomically
from app.files.provenance import Provenance
from app.files.readings import finite, reading_deg, rounded_down
from app.files.result_json import Json, provenance_values, readout_values
from app.files.setup_lines import setup_lines
from geometry.legs import Point
from geometry.paths import Approach
from geometry.scene import Scene
from geometry.treatment.data import BetterOrder, CheckReport, FieldCheck, MoveCheck, MoveStep, part_labels
from geometry.treatment.stages import arms_of

CHECK_FORMAT: Final = 1
# Of a proved bound, mm.
_DIGITS: Final = 3


def write_check_json(report: CheckReport, provenance: Provenance, path: Path) -> None:
    """Write everything. Raises BadInput where the file cannot be written."""
    content = check_json(report, provenance)

    def write(stream: BinaryIO) -> None:
        stream.write(content.encode())

    write_atomically(path, write)


def check_json(report: CheckReport, provenance: Provenance) -> str:
    """Return everything as JSON text on one line."""
    return json.dumps(check_values(report, provenance), ensure_ascii=False, allow_nan=False)


def check_values(report: CheckReport, provenance: Provenance) -> Json:
    """Return everything as plain values for JSON."""
    room = report.setup.room
    return {
        "format": CHECK_FORMAT,
        "kind": "wideberth check",
        "permitted": report.permitted,
        "provenance": provenance_values(provenance),
        "inputs": [list(line) for line in setup_lines(report.scene)],
        "options": asdict(report.options),
        "readouts": {"gantry": readout_values(room.gantry), "couch": readout_values(room.couch.turntable)},
        "notes": list(report.notes),
        "seconds": finite(report.seconds),
        "speeds": {
            "gantry_deg_s": report.speeds.gantry,
            "couch_deg_s": report.speeds.couch,
            "assumed": list(report.speeds.assumed),
        },
        "fields": [_field(number, field) for number, field in enumerate(report.fields, start=1)],
        "moves": [_move(move) for move in report.moves],
        "better_order": None if report.better is None else _better(report.better),
    }


def _field(number: int, check: FieldCheck) -> Json:
    field, setup, verdict = check.field, check.scene.setup, check.verdict
    first, last = check.points_deg[0], check.points_deg[-1]
    return {
        "number": number,
        "name": field.name,
        "place": field.place,
        "kind": "arc" if field.is_arc else "static",
        "set_up": field.is_setup,
        "state": check.state.value,
        "reason": verdict.reason,
        "gantry_from_deg": reading_deg(first[0]),
        "gantry_to_deg": reading_deg(last[0]),
        "gantry_turn_deg": round(last[0] - first[0], 9),
        "couch_from_deg": reading_deg(first[1]),
        "couch_to_deg": reading_deg(last[1]),
        "couch_turn_deg": round(last[1] - first[1], 9),
        "path_deg": _path(check.points_deg),
        "collimator_deg": setup.collimator_deg,
        "pitch_deg": setup.pitch_deg,
        "roll_deg": setup.roll_deg,
        "eccentric_deg": setup.eccentric_deg,
        "fitted": list(setup.fitted),
        "arms": arms_of(setup),
        "table_mm": [round(float(value), 3) for value in check.scene.couch.T_mm],
        "least_clearance_mm": rounded_down(verdict.least_clearance_mm, _DIGITS),
        "least": _place(check.scene, verdict.least),
        "tightest": _place(check.scene, verdict.tightest),
        "nearest": _place(check.scene, verdict.nearest),
        "first_short": _place(check.scene, verdict.first_short),
        "within": _place(check.scene, check.within),
        "look_at": _place(check.scene, check.place),
        "shortfall_mm": finite(check.shortfall_mm),
        "seconds": check.seconds,
        "notes": list(check.notes),
        "table_as": check.table_as,
        "table_settled": check.table_settled,
    }


def _move(move: MoveCheck) -> Json:
    return {
        "before": move.before + 1,
        "after": move.after + 1,
        "state": move.state.value,
        "reason": move.reason,
        "in_the_way": None if move.in_the_way is None else list(move.in_the_way),
        "seconds": finite(move.seconds),
        "table_as": move.table_as,
        "steps": [_step(step) for step in move.steps],
    }


def _step(step: MoveStep) -> Json:
    least_mm, first = math.nan, None
    for found in (step.verdict, step.table):
        if found is not None:
            least_mm, first = found.least_clearance_mm, found.first_short
    return {
        "kind": step.kind,
        "text": step.text,
        "state": step.state.value,
        "path_deg": _path(step.points_deg),
        "least_clearance_mm": rounded_down(least_mm, _DIGITS),
        "first_short": _place(step.scene, first),
        "seconds": finite(step.seconds),
    }


def _better(better: BetterOrder) -> Json:
    return {
        "fields": [k + 1 for k in better.fields],
        "moves": [_move(move) for move in better.moves],
        "seconds_saved": finite(better.seconds_saved),
        "changes_saved": better.changes_saved,
        "exact": better.exact,
    }


def _place(scene: Scene, place: Approach | None) -> Json | None:
    if place is None:
        return None
    machine, other = part_labels(scene, place) or (None, None)
    return {
        "control_point": place.segment + 1,
        "gantry_deg": reading_deg(place.gantry_deg),
        "couch_deg": reading_deg(place.couch_deg),
        "gantry_travel_deg": round(place.gantry_deg, 9),
        "couch_travel_deg": round(place.couch_deg, 9),
        "clearance_mm": finite(place.clearance_mm),
        "slack_mm": finite(place.slack_mm),
        "machine_part": machine,
        "couch_part": other,
    }


def _path(points_deg: Sequence[Point]) -> list[list[float]]:
    return [[round(gantry, 9), round(couch, 9)] for gantry, couch in points_deg]
