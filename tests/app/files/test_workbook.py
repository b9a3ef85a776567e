"""The workbook, read back."""

import math
import zipfile
from dataclasses import replace
from pathlib import Path

import numpy as np
import openpyxl
import pytest
from openpyxl.worksheet.worksheet import Worksheet

from app.cautions import CAUTIONS
from app.clearance_scale import BANDS, band_of
from app.files import workbook_matrix
from app.files.workbook import write_workbook
from geometry.assess import Assessment
from geometry.states import CODE_OF, STATES, State
from tests.app.files.assessments import (
    named,
    one_couch_angle,
    plain,
    provenance,
    unsurveyed,
    with_readouts,
    without_travel,
)

SHEETS = ["Permitted angles", "Every pair", "Inputs and cautions"]


def written(assessment: Assessment, tmp_path: Path) -> openpyxl.Workbook:
    path = tmp_path / "angles.xlsx"
    write_workbook(assessment, provenance(assessment), path)
    return openpyxl.load_workbook(path)


def header_row(sheet: Worksheet) -> int:
    """Return the last frozen row, which is the header."""
    return int("".join(filter(str.isdigit, sheet.freeze_panes))) - 1


def table_of(sheet: Worksheet) -> list[dict[str, object]]:
    """Return the rows below the header; of columns with one name the first keeps it, the second gets an apostrophe."""
    rows = sheet.iter_rows(min_row=header_row(sheet), values_only=True)
    names: list[str] = []
    for name in next(rows):
        names.append(f"{name}'" if name in names else str(name))
    return [dict(zip(names, row, strict=True)) for row in rows]


def texts_of(sheet: Worksheet) -> str:
    return "\n".join(str(value) for row in sheet.iter_rows(values_only=True) for value in row if value is not None)


def test_the_sheets_are_there_in_order(tmp_path: Path) -> None:
    assert written(plain(), tmp_path).sheetnames == SHEETS


def test_spans_stand_as_arcs_to_copy(tmp_path: Path) -> None:
    rows = table_of(written(plain(), tmp_path)["Permitted angles"])
    assert len(rows) == len(plain().spans)
    for row, span in zip(rows, plain().spans, strict=True):
        assert row["Couch °"] == span.couch_deg % 360.0
        assert row["Start °"] == pytest.approx(span.gantry_from_deg % 360.0, abs=1e-9)
        assert row["Stop °"] == pytest.approx(span.gantry_to_deg % 360.0, abs=1e-9)
        assert row["Direction"] == "CW"
        assert row["Extent °"] == pytest.approx(span.extent_deg, abs=1e-9)
        least, required = row["Least clearance, mm"], row["Required, mm"]
        assert isinstance(least, float)
        assert isinstance(required, int | float)
        assert required <= least <= span.least_clearance_mm + 1e-8
        assert row["Machine part"] == plain().scene.parts[span.machine_part].label
        assert row["Couch part"] == plain().scene.parts[span.couch_part].label


def test_arcs_stand_on_the_machines_own_scales_as_well(tmp_path: Path) -> None:
    rows = table_of(written(with_readouts(), tmp_path)["Permitted angles"])
    for row, span in zip(rows, with_readouts().spans, strict=True):
        assert row["Couch °'"] == (180.0 + span.couch_deg) % 360.0
        assert row["Start °'"] == pytest.approx((180.0 - span.gantry_from_deg) % 360.0, abs=1e-9)
        assert row["Stop °'"] == pytest.approx((180.0 - span.gantry_to_deg) % 360.0, abs=1e-9)
        assert row["Scale"] == "falling"


def test_a_couch_angle_with_nothing_permitted_says_none(tmp_path: Path) -> None:
    spans = tuple(span for span in plain().spans if span.couch_deg != 90.0)
    rows = table_of(written(replace(plain(), spans=spans), tmp_path)["Permitted angles"])
    (row,) = [row for row in rows if row["Couch °"] == 90]
    assert (row["Direction"], row["Extent °"], row["Start °"], row["Machine part"]) == ("none", 0, None, None)


def test_every_pair_is_there_highest_couch_angle_first(tmp_path: Path) -> None:
    sheet = written(plain(), tmp_path)["Every pair"]
    assert sheet.freeze_panes.startswith("B")
    top = header_row(sheet)
    gantry = [cell.value for cell in sheet[top][1:]]
    exact = plain().map
    assert gantry[: len(exact.gantry_deg)] == pytest.approx([angle % 360.0 for angle in exact.gantry_deg])
    for place, i in enumerate(reversed(range(len(exact.couch_deg))), start=1):
        cells = sheet[top + place]
        assert cells[0].value == exact.couch_deg[i] % 360.0
        for j, cell in enumerate(cells[1 : len(exact.gantry_deg) + 1]):
            state, clearance = STATES[plain().state[i, j]], float(exact.clearance_mm[i, j])
            if state is State.CONTACT:
                assert cell.value == "C"
                continue
            assert cell.value == math.floor(clearance)
            letter = {State.SHORT: '0"s"', State.UNPROVED: '0"u"', State.PERMITTED: "0"}[state]
            assert cell.number_format == letter
            colour = cell.fill.fgColor if cell.fill.patternType == "solid" else cell.fill.bgColor
            assert colour.rgb[2:].lower() == BANDS[band_of(clearance)].colour[1:]
            assert (cell.fill.patternType == "solid") == (state is State.PERMITTED)


def test_the_permitted_area_is_outlined(tmp_path: Path) -> None:
    sheet = written(plain(), tmp_path)["Every pair"]
    top, rows = header_row(sheet), len(plain().map.couch_deg)
    permitted = np.pad(plain().state == CODE_OF[State.PERMITTED], 1)
    for i in range(rows):
        for j in range(len(plain().map.gantry_deg)):
            border = sheet.cell(top + rows - i, j + 2).border
            sides = (border.left, border.right, border.top, border.bottom)
            heavy = [side is not None and side.style == "thick" for side in sides]
            here = permitted[i + 1, j + 1]
            beside = (permitted[i + 1, j], permitted[i + 1, j + 2], permitted[i + 2, j + 1], permitted[i, j + 1])
            assert heavy == [bool(here and not other) for other in beside]


def test_missing_distances_and_missing_travel_are_told_by_signs(tmp_path: Path) -> None:
    clearance, state = plain().map.clearance_mm.copy(), plain().state.copy()
    clearance[8, 0], state[8, 0] = np.nan, CODE_OF[State.UNPROVED]
    clearance[8, 1] = np.inf
    state[8, 1] = CODE_OF[State.PERMITTED]
    missing = replace(plain(), map=replace(plain().map, clearance_mm=clearance), state=state)
    sheet = written(missing, tmp_path)["Every pair"]
    assert [sheet.cell(header_row(sheet) + 1, column).value for column in (2, 3)] == ["?", "∞"]
    sheet = written(without_travel(), tmp_path)["Every pair"]
    assert {cell.value for cell in sheet[header_row(sheet) + 1][1:40]} == {"–"}


def test_every_pair_prints_on_one_page_across_with_its_titles(tmp_path: Path) -> None:
    sheet = written(with_readouts(), tmp_path)["Every pair"]
    assert sheet.page_setup.orientation == "landscape"
    assert (sheet.page_setup.fitToWidth, sheet.page_setup.fitToHeight) == (1, 1)
    assert sheet.sheet_properties.pageSetUpPr.fitToPage
    assert sheet.print_title_rows == f"$1:${header_row(sheet)}"
    assert sheet.print_title_cols == "$A:$B"


def test_the_legend_names_every_band_and_state(tmp_path: Path) -> None:
    text = texts_of(written(plain(), tmp_path)["Every pair"])
    for words in ("0–10", "≥ 200", "permitted", "short", "unproved", "contact", "no travel"):
        assert words in text


def test_the_own_scales_stand_beside_the_matrix(tmp_path: Path) -> None:
    sheet = written(with_readouts(), tmp_path)["Every pair"]
    top = header_row(sheet)
    assert [sheet.cell(top - 1, column).value for column in (3, 4)] == [5, 0]
    assert [sheet.cell(top + 1, column).value for column in (1, 2)] == [95, 275]


def test_a_grid_too_fine_for_a_sheet_says_where_to_look(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(workbook_matrix, "MOST_CELLS", 100)
    assert "too fine" in texts_of(written(plain(), tmp_path)["Every pair"])


def test_inputs_cautions_and_marks_are_there(tmp_path: Path) -> None:
    workbook = written(plain(), tmp_path)
    text = texts_of(workbook["Inputs and cautions"])
    for caution in CAUTIONS:
        assert caution in text
    for words in (
        provenance(plain()).fingerprint,
        "DEMONSTRATION",
        "the drum turns in the stand",
        "the rule of a test",
    ):
        assert words in text
    for sheet in workbook:
        assert "DEMONSTRATION" in texts_of(sheet)
    assert "UNSURVEYED" in texts_of(written(unsurveyed(), tmp_path)["Permitted angles"])


def test_missing_travel_names_the_stage(tmp_path: Path) -> None:
    text = texts_of(written(without_travel(), tmp_path)["Permitted angles"])
    assert "couch lateral = -400.0 mm is 170.0 mm outside its travel -230 to 230" in text


def test_a_name_cannot_become_a_formula(tmp_path: Path) -> None:
    workbook = written(named(plain(), "=1+1", "=2+2"), tmp_path)
    cells = [cell for sheet in workbook for row in sheet.iter_rows() for cell in row if cell.value is not None]
    assert len([cell for cell in cells if str(cell.value).startswith("=")]) >= 4
    # "f" is a formula.
    assert not [cell for cell in cells if cell.data_type == "f"]


def test_nothing_is_cut_in_the_table(tmp_path: Path) -> None:
    sheet = written(with_readouts(), tmp_path)["Permitted angles"]
    for column in sheet.iter_cols(min_row=header_row(sheet) + 1):
        longest = max(len(str(cell.value)) for cell in column if cell.value is not None)
        assert longest + 1 < sheet.column_dimensions[column[0].column_letter].width


def test_a_bore_has_one_row_of_pairs(tmp_path: Path) -> None:
    workbook = written(one_couch_angle(), tmp_path)
    sheet = workbook["Every pair"]
    assert sheet.cell(header_row(sheet) + 1, 1).value == 0
    assert len(table_of(workbook["Permitted angles"])) == 1


def test_the_same_result_gives_the_same_bytes(tmp_path: Path) -> None:
    paths = [tmp_path / name for name in ("one.xlsx", "other.xlsx")]
    for path in paths:
        write_workbook(plain(), provenance(plain()), path)
    assert paths[0].read_bytes() == paths[1].read_bytes()
    with zipfile.ZipFile(paths[0]) as archive:
        assert {entry.date_time for entry in archive.infolist()} == {(1980, 1, 1, 0, 0, 0)}
        assert archive.testzip() is None
    properties = openpyxl.load_workbook(paths[0]).properties
    assert properties.created.date() == properties.modified.date() == provenance(plain()).date
