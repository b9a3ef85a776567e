"""What `check` writes, chosen by the file's suffix; checked by the command line before it computes."""

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Final, Literal

from app.files.provenance import Provenance
from app.plan.gaps import GapRow
from app.plan_files.check_json import write_check_json
from geometry.assess import Assessment
from geometry.errors import BadInput, Fault
from geometry.treatment.data import CheckReport

Paper = Literal["A4", "Letter"]


@dataclass(frozen=True, eq=False)
class CheckExport:
    """All that goes into a file about a checked plan.

    `assessment`, of the set-up by itself, shades the chart of the dry-run sheet; `gaps` are those kept with the set-up.
    """

    report: CheckReport
    provenance: Provenance
    assessment: Assessment | None = None
    gaps: tuple[GapRow, ...] = ()
    paper: Paper = "A4"


Writer = Callable[[CheckExport, Path], None]


def write_check(export: CheckExport, path: Path) -> None:
    """Write a report in the format of the path's suffix. Raises BadInput for another, or where it cannot."""
    check_report_path(path)
    _WRITERS[path.suffix.lower()](export, path)


def check_report_path(path: Path) -> None:
    """Raise BadInput unless `write_check` knows the suffix and the folder exists."""
    if path.suffix.lower() not in _WRITERS:
        found = f"the suffix '{path.suffix}'" if path.suffix else "no suffix"
        raise BadInput([Fault(str(path), "", found, f"one of {', '.join(_WRITERS)}")])
    if not path.parent.is_dir():
        raise BadInput([Fault(str(path), "", f"no folder '{path.parent}'", "a file in an existing folder")])


def _write_json(export: CheckExport, path: Path) -> None:
    write_check_json(export.report, export.provenance, path)


def _write_sheet(export: CheckExport, path: Path) -> None:
    from app.plan_files.sheet_pdf import write_sheet  # noqa: PLC0415 - slow to import, and not always needed

    write_sheet(export.report, export.assessment, export.provenance, path, export.paper, export.gaps)


def _write_workbook(export: CheckExport, path: Path) -> None:
    from app.plan_files.workbook_check import write_check_workbook  # noqa: PLC0415 - as above

    write_check_workbook(export.report, export.provenance, path, export.gaps)


_WRITERS: Final[dict[str, Writer]] = {".pdf": _write_sheet, ".xlsx": _write_workbook, ".json": _write_json}
