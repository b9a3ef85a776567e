"""Every pair of angles as rows."""

import csv
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from app.files.grid_csv import write_grid_csv
from geometry.assess import Assessment
from geometry.states import CODE_OF, STATES, State
from tests.app.files.assessments import one_couch_angle, plain, without_travel

HEADER = ["gantry_deg", "couch_deg", "clearance_mm", "slack_mm", "state", "machine_part", "couch_part"]


def rows_of(assessment: Assessment, tmp_path: Path) -> list[dict[str, str]]:
    path = tmp_path / "grid.csv"
    write_grid_csv(assessment, path)
    with path.open(encoding="utf-8", newline="") as stream:
        reader = csv.DictReader(stream)
        assert reader.fieldnames == HEADER
        return list(reader)


def row_at(rows: list[dict[str, str]], gantry: str, couch: str) -> dict[str, str]:
    (row,) = [row for row in rows if (row["gantry_deg"], row["couch_deg"]) == (gantry, couch)]
    return row


def test_every_pair_of_readings_has_one_row_with_what_the_map_says(tmp_path: Path) -> None:
    assessment = plain()
    rows = rows_of(assessment, tmp_path)
    exact = assessment.map
    gantry = {round(angle % 360.0, 9) for angle in exact.gantry_deg.tolist()}
    assert (
        len(rows) == len({(row["gantry_deg"], row["couch_deg"]) for row in rows}) == len(gantry) * len(exact.couch_deg)
    )
    for i, couch_deg in enumerate(exact.couch_deg):
        for j, gantry_deg in enumerate(exact.gantry_deg):
            row = row_at(rows, f"{gantry_deg % 360.0:g}", f"{couch_deg % 360.0:g}")
            assert float(row["clearance_mm"]) == pytest.approx(exact.clearance_mm[i, j], abs=2e-9)
            assert float(row["slack_mm"]) == pytest.approx(exact.slack_mm[i, j], abs=2e-9)
            assert row["state"] in list(STATES)


def test_contact_is_0_and_a_missing_distance_is_empty(tmp_path: Path) -> None:
    assessment = plain()
    exact = assessment.map
    clearance, slack = exact.clearance_mm.copy(), exact.slack_mm.copy()
    machine, other = exact.machine_part.copy(), exact.couch_part.copy()
    state = assessment.state.copy()
    clearance[4, 20] = slack[4, 20] = np.nan
    machine[4, 20] = other[4, 20] = -1
    state[4, 20] = CODE_OF[State.UNPROVED]
    clearance[4, 21], state[4, 21] = 0.0, CODE_OF[State.CONTACT]
    changed = replace(exact, clearance_mm=clearance, slack_mm=slack, machine_part=machine, couch_part=other)
    rows = rows_of(replace(assessment, map=changed, state=state), tmp_path)
    missing, touching = (
        row_at(rows, f"{exact.gantry_deg[j] % 360.0:g}", f"{exact.couch_deg[4] % 360.0:g}") for j in (20, 21)
    )
    assert (missing["clearance_mm"], missing["slack_mm"], missing["state"]) == ("", "", "unproved")
    assert (missing["machine_part"], missing["couch_part"]) == ("", "")
    assert (touching["clearance_mm"], touching["state"]) == ("0", "contact")


def test_a_reading_at_both_ends_of_the_travel_is_permitted_if_it_is_at_either(tmp_path: Path) -> None:
    assessment = plain()
    exact = assessment.map
    first, last = (int(np.flatnonzero(exact.gantry_deg == angle)[0]) for angle in (-180.0, 180.0))
    state = assessment.state.copy()
    state[4, first], state[4, last] = CODE_OF[State.UNPROVED], CODE_OF[State.PERMITTED]
    rows = rows_of(replace(assessment, state=state), tmp_path)
    assert row_at(rows, "180", "0")["state"] == "permitted"
    state[4, last] = CODE_OF[State.UNPROVED]
    rows = rows_of(replace(assessment, state=state), tmp_path)
    assert row_at(rows, "180", "0")["state"] == "unproved"


def test_without_travel_every_row_says_so(tmp_path: Path) -> None:
    assert {row["state"] for row in rows_of(without_travel(), tmp_path)} == {"no travel"}


def test_a_bore_has_one_couch_angle(tmp_path: Path) -> None:
    rows = rows_of(one_couch_angle(), tmp_path)
    assert {row["couch_deg"] for row in rows} == {"0"}
    assert len(rows) == 36
