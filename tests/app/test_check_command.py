"""`check` from end to end: exit status, table, and the JSON's schema for every verdict and for bad input."""

import json
import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import openpyxl
import pypdf
import pytest
from pydicom import Dataset

from app.check_command import NOT_PERMITTED, PERMITTED
from app.cli import BAD_INPUT, STOPPED, run
from geometry.errors import Cancelled, GeometryError
from geometry.states import State
from tests.app.made_plans import OWN_STRUCTURES, arc, static, write_plan, write_setup

Capture = pytest.CaptureFixture[str]
HEADER = "field,gantry_from_deg,gantry_to_deg,direction,couch_from_deg,couch_to_deg,collimator_deg,fitted\n"
CLEAR = HEADER + "ap,0,,,0,,0,\narc,300,60,CW,0,,30,\n"
# One field of each verdict but "unproved", whose reading itself is clear.
VERDICTS = {
    State.PERMITTED: "a,0,,,0,,0,",
    State.SHORT: "a,100,,,30,,0,",
    State.CONTACT: "a,100,150,CW,90,,0,",
    State.NO_TRAVEL: "a,0,,,120,,0,",
}

PLACE = {
    "control_point": int,
    "gantry_deg": float,
    "couch_deg": float,
    "gantry_travel_deg": float,
    "couch_travel_deg": float,
    "clearance_mm": (float, type(None)),
    "slack_mm": (float, type(None)),
    "machine_part": (str, type(None)),
    "couch_part": (str, type(None)),
}
FIELD = {
    "number": int,
    "name": str,
    "place": str,
    "kind": str,
    "set_up": bool,
    "state": str,
    "reason": str,
    "gantry_from_deg": float,
    "gantry_to_deg": float,
    "gantry_turn_deg": float,
    "couch_from_deg": float,
    "couch_to_deg": float,
    "couch_turn_deg": float,
    "path_deg": list,
    "collimator_deg": (float, type(None)),
    "pitch_deg": float,
    "roll_deg": float,
    "eccentric_deg": float,
    "fitted": list,
    "arms": dict,
    "table_mm": list,
    "least_clearance_mm": (float, type(None)),
    "least": (dict, type(None)),
    "tightest": (dict, type(None)),
    "nearest": (dict, type(None)),
    "first_short": (dict, type(None)),
    "within": (dict, type(None)),
    "look_at": (dict, type(None)),
    "shortfall_mm": (float, type(None)),
    "seconds": float,
    "notes": list,
    "table_as": str,
    "table_settled": bool,
}
MOVE = {
    "before": int,
    "after": int,
    "state": str,
    "reason": str,
    "in_the_way": (list, type(None)),
    "seconds": (float, type(None)),
    "table_as": str,
    "steps": list,
}
STEP = {
    "kind": str,
    "text": str,
    "state": str,
    "path_deg": list,
    "least_clearance_mm": (float, type(None)),
    "first_short": (dict, type(None)),
    "seconds": (float, type(None)),
}
REPORT = {
    "format": int,
    "kind": str,
    "permitted": bool,
    "provenance": dict,
    "inputs": list,
    "options": dict,
    "readouts": dict,
    "notes": list,
    "seconds": (float, type(None)),
    "speeds": dict,
    "fields": list,
    "moves": list,
    "better_order": (dict, type(None)),
}


def assert_shape(value: dict[str, Any], shape: dict[str, Any]) -> None:
    assert list(value) == list(shape)
    for key, kind in shape.items():
        assert isinstance(value[key], kind), f"{key}: {value[key]!r}"


def assert_schema(report: dict[str, Any]) -> None:
    assert_shape(report, REPORT)
    assert (report["format"], report["kind"]) == (1, "wideberth check")
    for field in report["fields"]:
        assert_shape(field, FIELD)
        for key in ("least", "tightest", "nearest", "first_short", "within", "look_at"):
            if field[key] is not None:
                assert_shape(field[key], PLACE)
    for move in (*report["moves"], *((report["better_order"] or {}).get("moves", []))):
        assert_shape(move, MOVE)
        for step in move["steps"]:
            assert_shape(step, STEP)
    states = [one["state"] for one in (*report["fields"], *report["moves"])]
    assert set(states) <= set(State)
    assert report["permitted"] == (set(states) == {State.PERMITTED})


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    write_setup(tmp_path)
    return tmp_path


def checked(folder: Path, fields: str | Path, *arguments: str) -> int:
    if isinstance(fields, str):
        path = folder / "fields.csv"
        path.write_text(fields, encoding="utf-8")
        fields = path
    return run(["check", str(folder / "test.setup.toml"), str(fields), *arguments])


def report_of(folder: Path, fields: str | Path, capsys: Capture, *arguments: str) -> tuple[int, dict[str, Any]]:
    status = checked(folder, fields, "--json", *arguments)
    report: dict[str, Any] = json.loads(capsys.readouterr().out)
    assert_schema(report)
    return status, report


@pytest.mark.parametrize("state", VERDICTS)
def test_every_verdict_has_its_status_and_its_json(state: State, folder: Path, capsys: Capture) -> None:
    status, report = report_of(folder, HEADER + VERDICTS[state], capsys)
    (field,) = report["fields"]
    assert field["state"] == state
    assert status == (PERMITTED if state is State.PERMITTED else NOT_PERMITTED)
    known = (field["least_clearance_mm"] is not None, field["first_short"] is not None, field["nearest"] is not None)
    assert (
        known
        == {
            State.PERMITTED: (True, False, True),
            State.SHORT: (False, True, True),
            State.CONTACT: (False, True, True),
            State.NO_TRAVEL: (False, False, False),
        }[state]
    )
    assert (field["shortfall_mm"] is not None) == (state in (State.SHORT, State.CONTACT))
    assert bool(field["reason"]) == (state is State.NO_TRAVEL)
    if state is State.CONTACT:
        assert field["look_at"]["clearance_mm"] == 0.0
        assert field["look_at"]["machine_part"].startswith("gantry/")
        assert field["look_at"]["couch_part"].startswith("couch/")


def test_unproved_is_told_with_what_is_missing_within_the_tolerances(folder: Path, capsys: Capture) -> None:
    fields = HEADER + "a,93.4,,,30,,0,"
    status, report = report_of(folder, fields, capsys)
    (field,) = report["fields"]
    assert (status, field["state"]) == (NOT_PERMITTED, State.UNPROVED)
    assert field["look_at"]["slack_mm"] > 0.0
    assert field["within"]["slack_mm"] == -field["shortfall_mm"] < 0.0
    sharp = ("--gantry-tolerance", "0", "--couch-tolerance", "0")
    status, report = report_of(folder, fields, capsys, *sharp)
    assert (status, report["fields"][0]["state"]) == (PERMITTED, State.PERMITTED)
    assert report["options"]["gantry_tolerance_deg"] == 0.0


def test_a_move_that_is_not_permitted_is_enough_for_1(folder: Path, capsys: Capture) -> None:
    status, report = report_of(folder, HEADER + "a,0,,,0,,0,\nb,0,,,0,,0,kV source=extended\n", capsys)
    assert [field["state"] for field in report["fields"]] == [State.PERMITTED] * 2
    assert report["fields"][1]["arms"] == {"kV source": "extended"}
    assert report["moves"][0]["state"] == State.UNPROVED
    assert status == NOT_PERMITTED


def test_a_table_for_people_and_files_for_programs(folder: Path, capsys: Capture) -> None:
    out = folder / "out.json"
    assert checked(folder, CLEAR, "--out", str(out)) == PERMITTED
    printed = capsys.readouterr().out
    for words in ("Test set-up, Test room", "DEMONSTRATION", "300 to 60 (+120)", "permitted", f"Wrote {out}"):
        assert words in printed
    assert "2 of 2 fields and 1 of 1 moves permitted." in printed
    written = json.loads(out.read_text(encoding="utf-8"))
    assert_schema(written)
    assert written["permitted"]
    assert written["moves"][0]["steps"][0]["kind"] == "turn"
    assert checked(folder, CLEAR, "--quiet") == PERMITTED
    assert capsys.readouterr().out == ""


def test_a_sheet_for_the_dry_run_and_a_workbook_say_what_the_json_says(folder: Path, capsys: Capture) -> None:
    outs = [folder / name for name in ("all.json", "sheet.pdf", "sheet.xlsx")]
    gaps = "field,gantry_deg,couch_deg,measured_mm,by,on\nap,0,0,41.5,A. Physicist,2026-01-02\n"
    (folder / "test.gaps.csv").write_text(gaps, encoding="utf-8")
    arguments = [argument for out in outs for argument in ("--out", str(out))]
    assert checked(folder, CLEAR, *arguments, "--paper", "letter", "--quiet") == PERMITTED
    capsys.readouterr()
    report = json.loads(outs[0].read_text(encoding="utf-8"))
    pdf = pypdf.PdfReader(outs[1])
    assert [round(float(side)) for side in pdf.pages[0].mediabox[2:]] == [612, 792]
    text = " ".join(page.extract_text() for page in pdf.pages)
    cells = [str(cell) for sheet in openpyxl.load_workbook(outs[2]) for row in sheet.values for cell in row]
    assert report["provenance"]["fingerprint"][:16] in text
    assert any(report["provenance"]["fingerprint"] in cell for cell in cells)
    for field in report["fields"]:
        least = math.floor(10.0 * field["least_clearance_mm"]) / 10.0
        assert f"{least:.1f}" in text
        assert field["name"] in text
        assert any(cell == field["name"] for cell in cells)
    assert "41.5" in text
    assert "41.5" in cells


def test_names_that_a_stream_cannot_write_or_that_look_like_markup_do_no_harm(folder: Path, capsys: Capture) -> None:
    assert checked(folder, HEADER + "[red]a[/red] \u2264 b,0,,,0,,0,\n") == PERMITTED
    assert "[red]a[/red]" in capsys.readouterr().out


def test_required_fit_and_table_of_the_command_line_count(folder: Path, capsys: Capture) -> None:
    plan = write_plan(folder / "plan.dcm", [static("a", 0.0), static("b", 30.0)])
    status, report = report_of(folder, plan, capsys, "--required", "300")
    assert status == NOT_PERMITTED
    assert report["provenance"]["required"]["fixed_mm"] == 300.0
    status, report = report_of(folder, plan, capsys, "--fit", "b=cone", "--fit", "1 = none")
    assert [field["fitted"] for field in report["fields"]] == [[], ["cone"]]
    assert report["moves"][0]["steps"][0]["kind"] == "fit"
    stated = {"TableTopLateralPosition": 9.0, "TableTopLongitudinalPosition": 0.0, "TableTopVerticalPosition": -170.0}
    plan = write_plan(folder / "table.dcm", [static("a", 0.0, **stated)])
    _, report = report_of(folder, plan, capsys, "--table", "plan")
    assert report["fields"][0]["table_mm"] == pytest.approx([9.0, 0.0, -170.0], abs=0.01)


def test_a_better_order_is_in_the_table_and_in_the_json(folder: Path, capsys: Capture) -> None:
    fields = HEADER + "a,0,,,0,,0,\nb,80,,,0,,0,\nc,40,,,0,,0,\n"
    status, report = report_of(folder, fields, capsys)
    assert status == PERMITTED
    assert report["better_order"]["fields"] in ([1, 3, 2], [2, 3, 1])
    assert report["better_order"]["exact"]
    assert checked(folder, fields) == PERMITTED
    assert "A better order" in capsys.readouterr().out


def test_no_patient_identifier_reaches_an_export(folder: Path, capsys: Capture) -> None:
    plan = write_plan(folder / "Doe.dcm", [static("a", 0.0)])
    out = folder / "out.json"
    assert checked(folder, plan, "--out", str(out)) == PERMITTED
    told = out.read_text(encoding="utf-8") + capsys.readouterr().out.replace(str(out), "")
    # Names and numbers of pydicom's own plan, its label, and the name of its file.
    assert not [word for word in ("Last^First", "id00001", "Plan1", "1.2.777", "unit001", "Doe") if word in told]


@pytest.mark.parametrize(
    ("fields", "arguments", "words"),
    [
        ("field\n", (), ("fields.csv", "gantry_from_deg")),
        (HEADER + "a,0,90,,,,,\n", (), ("row 2, direction",)),
        (HEADER + "a,0,,,,,,conee\n", (), ("fields.csv", "row 2, fitted", "did you mean 'cone'")),
        (CLEAR, ("--fit", "arc"), ("--fit", "FIELD=WHAT")),
        (CLEAR, ("--fit", "acr=cone"), ("no field 'acr'", "did you mean 'arc'")),
        (CLEAR, ("--out", "x.doc"), ("x.doc", ".json")),
        (CLEAR, ("--out", "gone/x.json"), ("no folder",)),
    ],
)
def test_bad_input_ends_with_2(
    fields: str, arguments: tuple[str, ...], words: tuple[str, ...], folder: Path, capsys: Capture
) -> None:
    assert checked(folder, fields, *arguments) == BAD_INPUT
    told = capsys.readouterr()
    assert told.out == ""
    assert all(word in told.err for word in (*words, "allowed"))


def test_files_that_are_no_plan_end_with_2(folder: Path, capsys: Capture) -> None:
    (folder / "text.dcm").write_text("hello", encoding="utf-8")
    for path in (OWN_STRUCTURES, folder / "text.dcm", folder / "gone.dcm", folder / "test.setup.toml"):
        assert checked(folder, path) == BAD_INPUT
        assert path.name in capsys.readouterr().err
    assert run(["check", str(folder / "gone.toml"), str(OWN_STRUCTURES)]) == BAD_INPUT


def test_numbers_out_of_range_end_with_2(folder: Path) -> None:
    for argument in ("--required=0", "--edge=nan", "--table=none", "--gantry-tolerance=-1"):
        with pytest.raises(SystemExit) as ended:
            checked(folder, CLEAR, argument)
        assert ended.value.code == BAD_INPUT


def test_a_set_up_that_cannot_be_built_is_a_fault_of_its_file(
    folder: Path, monkeypatch: pytest.MonkeyPatch, capsys: Capture
) -> None:
    def unbuildable(*_arguments: object) -> None:
        raise GeometryError("size_mm = 0; allowed: above 0")

    monkeypatch.setattr("app.plan.check.check_plan", unbuildable)
    assert checked(folder, CLEAR) == BAD_INPUT
    told = capsys.readouterr().err
    assert "test.setup.toml" in told
    assert "size_mm = 0" in told


def test_stopped_work_writes_nothing(folder: Path, monkeypatch: pytest.MonkeyPatch, capsys: Capture) -> None:
    def stopped(*_arguments: object) -> None:
        raise Cancelled("stopped on request")

    monkeypatch.setattr("app.plan.check.check_plan", stopped)
    out = folder / "out.json"
    assert checked(folder, CLEAR, "--out", str(out)) == STOPPED
    assert not out.exists()
    assert "nothing was written" in capsys.readouterr().err


@pytest.mark.parametrize("make", [lambda: static("a", 0.0), lambda: arc("a", 300.0, 60.0)])
def test_plans_of_ions_are_checked_too(make: Callable[[], Dataset], folder: Path, capsys: Capture) -> None:
    plan = write_plan(folder / "ions.dcm", [make()], ions=True)
    status, report = report_of(folder, plan, capsys)
    assert status == PERMITTED
    assert report["fields"][0]["place"].startswith("Ion Beam Sequence item 1")


def test_one_field_said_twice_is_refused(tmp_path: Path, capsys: Capture) -> None:
    setup, fields = write_setup(tmp_path), tmp_path / "fields.csv"
    fields.write_text(CLEAR, encoding="utf-8")
    said = ["--fit", "1=cone", "--fit", "1=none"]
    assert run(["check", str(setup), str(fields), "--quiet", *said]) == BAD_INPUT
    assert "found '1' twice" in capsys.readouterr().err
