"""What is written follows the suffix."""

from pathlib import Path

import pytest

from app.files.exports import check_grid_path, check_map_path, check_pose_path, write_grid, write_map, write_pose
from geometry.assess import assess_pose
from geometry.errors import BadInput
from tests.app.files.assessments import SETUP, one_couch_angle, provenance

BEGINNINGS = {".xlsx": b"PK", ".csv": b"couch_deg,", ".json": b"{", ".png": b"\x89PNG", ".pdf": b"%PDF"}


@pytest.mark.parametrize("suffix", [*BEGINNINGS, ".CSV"])
def test_the_suffix_chooses_the_format(suffix: str, tmp_path: Path) -> None:
    path = tmp_path / f"result{suffix}"
    write_map(one_couch_angle(), provenance(one_couch_angle()), path)
    assert path.read_bytes().startswith(BEGINNINGS[suffix.lower()])
    assert [entry.name for entry in tmp_path.iterdir()] == [path.name]


@pytest.mark.parametrize("name", ["result.xls", "result", "result.txt", ".csv"])
def test_another_suffix_is_refused_with_what_is_allowed(name: str, tmp_path: Path) -> None:
    with pytest.raises(BadInput) as caught:
        write_map(one_couch_angle(), provenance(one_couch_angle()), tmp_path / name)
    (fault,) = caught.value.faults
    assert fault.file == str(tmp_path / name)
    assert fault.allowed == "one of .xlsx, .csv, .json, .png, .pdf"
    assert not list(tmp_path.iterdir())


def test_a_missing_folder_is_told_before_anything_is_computed(tmp_path: Path) -> None:
    for check, name in ((check_map_path, "a.csv"), (check_grid_path, "a.csv"), (check_pose_path, "a.glb")):
        check(tmp_path / name)
        with pytest.raises(BadInput, match="no folder"):
            check(tmp_path / "nowhere" / name)


def test_a_grid_is_csv_alone(tmp_path: Path) -> None:
    path = tmp_path / "grid.csv"
    write_grid(one_couch_angle(), path)
    assert path.read_bytes().startswith(b"gantry_deg,couch_deg,clearance_mm,")
    with pytest.raises(BadInput, match=r"allowed: one of \.csv"):
        write_grid(one_couch_angle(), tmp_path / "grid.xlsx")


def test_a_pose_is_a_model(tmp_path: Path) -> None:
    pose = assess_pose(SETUP, 0.0, 0.0)
    path = tmp_path / "pose.glb"
    write_pose(pose, provenance(one_couch_angle()), path)
    assert path.read_bytes().startswith(b"glTF")
    with pytest.raises(BadInput, match=r"allowed: one of \.glb, \.ply, \.stl"):
        write_pose(pose, provenance(one_couch_angle()), tmp_path / "pose.obj")
