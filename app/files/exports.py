"""What `map` and `pose` write, chosen by the file's suffix.

The checks are for the command line to call before it computes: a wrong suffix need not cost a minute.
"""

from collections.abc import Callable, Collection
from pathlib import Path
from typing import Final

from app.files.grid_csv import write_grid_csv
from app.files.permitted_csv import write_permitted_csv
from app.files.provenance import Provenance
from app.files.result_json import write_result_json
from geometry.assess import Assessment, Pose
from geometry.errors import BadInput, Fault

Writer = Callable[[Assessment, Provenance, Path], None]


def write_map(assessment: Assessment, provenance: Provenance, path: Path) -> None:
    """Write an assessment in the format of the path's suffix. Raises BadInput for another, or where it cannot."""
    check_map_path(path)
    _MAP_WRITERS[path.suffix.lower()](assessment, provenance, path)


def write_grid(assessment: Assessment, path: Path) -> None:
    """Write every pair of angles as CSV. Raises BadInput for another suffix, or where it cannot be written."""
    check_grid_path(path)
    write_grid_csv(assessment, path)


def write_pose(pose: Pose, provenance: Provenance, path: Path) -> None:
    """Write the parts in a pose as a 3D model. Raises BadInput for another suffix, or where it cannot be written."""
    check_pose_path(path)
    # trimesh takes a second to import.
    from app.files.pose_model import write_pose_model  # noqa: PLC0415

    write_pose_model(pose, provenance, path)


def check_map_path(path: Path) -> None:
    """Raise BadInput unless `write_map` knows the suffix and the folder exists."""
    _check(path, _MAP_WRITERS)


def check_grid_path(path: Path) -> None:
    """Raise BadInput unless the suffix is .csv and the folder exists."""
    _check(path, (".csv",))


def check_pose_path(path: Path) -> None:
    """Raise BadInput unless `write_pose` knows the suffix and the folder exists."""
    _check(path, (".glb", ".ply", ".stl"))


def _check(path: Path, suffixes: Collection[str]) -> None:
    if path.suffix.lower() not in suffixes:
        found = f"the suffix '{path.suffix}'" if path.suffix else "no suffix"
        raise BadInput([Fault(str(path), "", found, f"one of {', '.join(suffixes)}")])
    if not path.parent.is_dir():
        raise BadInput([Fault(str(path), "", f"no folder '{path.parent}'", "a file in an existing folder")])


def _write_workbook(assessment: Assessment, provenance: Provenance, path: Path) -> None:
    from app.files.workbook import write_workbook  # noqa: PLC0415 - slow to import, and not always needed

    write_workbook(assessment, provenance, path)


def _write_chart_picture(assessment: Assessment, provenance: Provenance, path: Path) -> None:
    from app.files.chart_picture import write_chart_picture  # noqa: PLC0415 - as above

    write_chart_picture(assessment, provenance, path)


_MAP_WRITERS: Final[dict[str, Writer]] = {
    ".xlsx": _write_workbook,
    ".csv": write_permitted_csv,
    ".json": write_result_json,
    ".png": _write_chart_picture,
    ".pdf": _write_chart_picture,
}
