"""All of a result in one file."""

import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import shapely

from app.files.result_json import write_result_json
from geometry.assess import Assessment
from geometry.states import STATES
from tests.app.files.assessments import one_couch_angle, plain, provenance, with_readouts, without_travel


def refuse(constant: str) -> float:
    raise AssertionError(f"{constant} is no JSON")


def written(assessment: Assessment, tmp_path: Path) -> dict[str, Any]:
    path = tmp_path / "result.json"
    write_result_json(assessment, provenance(assessment), path)
    content = json.loads(path.read_text(encoding="utf-8"), parse_constant=refuse)
    assert isinstance(content, dict)
    return content


def test_the_grid_comes_back_in_full(tmp_path: Path) -> None:
    assessment = plain()
    grid = written(assessment, tmp_path)["grid"]
    assert grid["gantry_travel_deg"] == assessment.map.gantry_deg.tolist()
    assert grid["couch_travel_deg"] == assessment.map.couch_deg.tolist()
    assert grid["gantry_deg"][:3] == [175.0, 180.0, 190.0]
    assert grid["clearance_mm"] == assessment.map.clearance_mm.tolist()
    assert grid["slack_mm"] == assessment.map.slack_mm.tolist()
    assert grid["state"] == assessment.state.tolist()
    assert grid["machine_part"] == assessment.map.machine_part.tolist()


def test_what_is_missing_is_null(tmp_path: Path) -> None:
    exact = plain().map
    clearance, machine = exact.clearance_mm.copy(), exact.machine_part.copy()
    clearance[0, 0], clearance[0, 1], machine[0, 0] = np.nan, np.inf, -1
    grid = written(replace(plain(), map=replace(exact, clearance_mm=clearance, machine_part=machine)), tmp_path)["grid"]
    assert grid["clearance_mm"][0][:2] == [None, None]
    assert grid["machine_part"][0][0] is None
    assert grid["clearance_mm"][0][2] == exact.clearance_mm[0, 2]


def test_states_and_parts_are_named(tmp_path: Path) -> None:
    content = written(plain(), tmp_path)
    assert content["states"] == [state.value for state in STATES]
    assert [part["name"] for part in content["parts"]] == [part.label for part in plain().scene.parts]
    assert {part["kind"] for part in content["parts"]} == {"machine", "patient"}


def test_spans_hold_readings_and_the_unwrapped_travel(tmp_path: Path) -> None:
    spans = written(plain(), tmp_path)["spans"]
    assert len(spans) == len(plain().spans)
    for span, known in zip(spans, plain().spans, strict=True):
        assert span["gantry_travel_from_deg"] == known.gantry_from_deg
        assert span["gantry_travel_to_deg"] == known.gantry_to_deg
        assert span["gantry_from_deg"] == pytest.approx(known.gantry_from_deg % 360.0)


def test_the_permitted_region_comes_back_as_polygons(tmp_path: Path) -> None:
    region = plain().permitted_region
    polygons = [
        shapely.Polygon(polygon["outline"], polygon["holes"])
        for polygon in written(plain(), tmp_path)["permitted_region"]
    ]
    assert polygons
    assert shapely.union_all(polygons).symmetric_difference(region).area == pytest.approx(0.0, abs=1e-9)


def test_provenance_and_options_are_there(tmp_path: Path) -> None:
    content = written(plain(), tmp_path)
    assert content["provenance"]["fingerprint"] == provenance(plain()).fingerprint
    assert content["provenance"]["date"] == "2026-03-04"
    assert content["provenance"]["joined"][0] == {
        "first": "drum",
        "second": "stand",
        "reason": "the drum turns in the stand",
    }
    assert content["provenance"]["required"]["machine_pairs_mm"] == 24.0
    assert len(content["provenance"]["cautions"]) == 5
    assert content["options"] == {
        "gantry_step_deg": 10.0,
        "couch_step_deg": 30.0,
        "edge_deg": 1.0,
        "gantry_tolerance_deg": 1.0,
        "couch_tolerance_deg": 1.0,
    }
    assert content["readouts"] == {"gantry": None, "couch": None}


def test_the_rooms_own_scales_are_there(tmp_path: Path) -> None:
    content = written(with_readouts(), tmp_path)
    assert content["readouts"]["gantry"] == {"zero_deg": 180.0, "sense": -1, "resolution_deg": 0.1}


def test_a_bore_has_spans_and_no_region(tmp_path: Path) -> None:
    content = written(one_couch_angle(), tmp_path)
    assert content["permitted_region"] == []
    assert content["spans"][0]["gantry_extent_deg"] == 360.0


def test_without_travel_the_stage_is_named(tmp_path: Path) -> None:
    content = written(without_travel(), tmp_path)
    assert content["provenance"]["no_travel"][0].startswith("couch lateral")
    assert {span["gantry_extent_deg"] for span in content["spans"]} == {0.0}
    assert content["permitted_region"] == []
