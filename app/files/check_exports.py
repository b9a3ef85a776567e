"""What `check` writes, chosen by the file's suffix; checked by the command line before it computes."""

from collections.abc import Callable
from pathlib import Path
from typing import Final

from app.files.check_json import write_check_json
from app.files.provenance import Provenance
from geometry.errors import BadInput, Fault
from geometry.treatment import CheckReport

Writer = Callable[[CheckReport, Provenance, Path], None]


def write_check(report: CheckReport, provenance: Provenance, path: Path) -> None:
    """Write a report in the format of the path's suffix. Raises BadInput for another, or where it cannot."""
    check_report_path(path)
    _WRITERS[path.suffix.lower()](report, provenance, path)


def check_report_path(path: Path) -> None:
    """Raise BadInput unless `write_check` knows the suffix and the folder exists."""
    if path.suffix.lower() not in _WRITERS:
        found = f"the suffix '{path.suffix}'" if path.suffix else "no suffix"
        raise BadInput([Fault(str(path), "", found, f"one of {', '.join(_WRITERS)}")])
    if not path.parent.is_dir():
        raise BadInput([Fault(str(path), "", f"no folder '{path.parent}'", "a file in an existing folder")])


_WRITERS: Final[dict[str, Writer]] = {".json": write_check_json}
