"""`map` on patients that other people's software wrote.

Sources: pydicom's own test file rtstruct.dcm (in its wheel), and the plan and structure set of dicompyler-core 0.5.6
(`tests.open_data`).
"""

import json
from pathlib import Path

import pydicom.data
import pytest

from app.cli import DONE, run
from tests.open_data import open_data_folder

ROOM = Path(__file__).resolve().parents[2] / "sample_rooms" / "c_arm_wide" / "c_arm_wide.room.toml"


def setup_file(folder: Path, structures: Path, patient: str, isocentre: str) -> Path:
    """Write a set-up on a structure set and return its path."""
    path = folder / "imported.setup.toml"
    path.write_text(
        f"""
format = 1
name = "Imported"
room = "{ROOM.as_posix()}"
[patient]
position = "HFS"
source = "structure set"
file = "{structures.as_posix()}"
{patient}
[table]
from_head_end_mm = 300
height_mm = 10
[isocentre]
{isocentre}
[required]
fixed_mm = 30
reason = "a test"
""",
        encoding="utf-8",
    )
    return path


def mapped(path: Path) -> dict[str, object]:
    out = path.with_suffix(".json")
    coarse = ["--gantry-step=5", "--couch-step=15", "--edge=1", "--quiet"]
    assert run(["map", str(path), "--out", str(out), *coarse]) == DONE
    result: dict[str, object] = json.loads(out.read_text(encoding="utf-8"))
    return result


@pytest.mark.download
def test_the_open_plan_and_structure_set_give_a_map(tmp_path: Path) -> None:
    data = open_data_folder()
    plan = f'plan = "{(data / "rtplan.dcm").as_posix()}"'
    result = mapped(setup_file(tmp_path, data / "rtss.dcm", plan, "from_plan = 1"))
    text = json.dumps(result)
    # Some of the plane is open and some is not, and nobody's name or number went along.
    assert "permitted" in text
    assert "contact" in text
    identifiers = [str(pydicom.dcmread(data / "rtss.dcm").get(key, "")) for key in ("PatientName", "PatientID")]
    assert not any(name and name in text for name in identifiers)


def test_pydicoms_structure_set_gives_a_map(tmp_path: Path) -> None:
    structures = Path(str(pydicom.data.get_testdata_file("rtstruct.dcm", download=False)))
    result = mapped(setup_file(tmp_path, structures, "", "dicom_mm = [0, 0, 0]"))
    assert "permitted" in json.dumps(result)
