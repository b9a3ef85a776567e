"""`wideberth check`: the fields of a plan, and the moves between them, against a set-up."""

import argparse
import datetime
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Final

from app.cautions import CAUTIONS
from app.command_options import add_proof_options
from app.terminal import TerminalProgress
from geometry.errors import BadInput, Fault, GeometryError

if TYPE_CHECKING:
    from app.files.provenance import Provenance
    from geometry.assess import Options
    from geometry.treatment.data import CheckReport, PlanField

PERMITTED: Final = 0
NOT_PERMITTED: Final = 1

OUT_SUFFIXES: Final = ".pdf dry-run sheet, .xlsx workbook, .json all of it"


def add_check(parser: argparse.ArgumentParser) -> None:
    """Add what `check` takes, and the command itself."""
    parser.set_defaults(command=_check)
    parser.add_argument("setup", metavar="SETUP", type=Path, help="set-up file, *.setup.toml")
    parser.add_argument(
        "fields", metavar="FIELDS", type=Path, help="RT Plan or RT Ion Plan (.dcm), or a .csv of fields"
    )
    parser.add_argument("--out", metavar="FILE", type=Path, action="append", default=[], help=OUT_SUFFIXES)
    parser.add_argument("--json", action="store_true", help="as JSON in place of the table")
    add_proof_options(parser)
    parser.add_argument(
        "--fit",
        metavar="FIELD=WHAT",
        action="append",
        default=[],
        help="what is fitted for a field (its name, its number, or 'all'): accessories and arm positions between "
        "semicolons, 'none', or nothing for what the set-up has",
    )
    parser.add_argument(
        "--table",
        choices=("both", "plan", "setup"),
        default="both",
        help="whose table positions count where plan and set-up differ; both: each field must be clear with both",
    )
    parser.add_argument("--paper", choices=("a4", "letter"), default="a4", help="of the dry-run sheet, a4")
    parser.add_argument("--quiet", action="store_true", help="no progress, no table")


def read_fields(path: Path) -> "tuple[PlanField, ...]":
    """Return the fields of a list or a plan, told apart by the suffix .csv. Raises BadInput."""
    if path.suffix.lower() == ".csv":
        from app.plan_files.fields_csv import read_field_rows  # noqa: PLC0415

        return read_field_rows(path)
    from app.plan_files.plan_dicom import read_plan_fields  # noqa: PLC0415

    return read_plan_fields(path)


def _check(chosen: argparse.Namespace) -> int:
    # Kept from `--help` and `--version`, which need not wait for numba.
    from app.files.provenance import provenance_of  # noqa: PLC0415
    from app.plan_files.check_exports import check_report_path  # noqa: PLC0415
    from app.plan_files.check_json import check_json  # noqa: PLC0415
    from geometry.assess import Options  # noqa: PLC0415

    for path in chosen.out:
        check_report_path(path)
    options = Options(
        edge_deg=chosen.edge,
        gantry_tolerance_deg=chosen.gantry_tolerance,
        couch_tolerance_deg=chosen.couch_tolerance,
    )
    with TerminalProgress(quiet=chosen.quiet) as progress:
        report = _report(chosen, options, progress)
        provenance = provenance_of(report.scene, options, datetime.datetime.now().astimezone().date())
        if chosen.out:
            _write(chosen, report, provenance, progress)
    if chosen.json:
        sys.stdout.write(check_json(report, provenance) + "\n")
    elif not chosen.quiet:
        _show(report, provenance, chosen.out)
    return PERMITTED if report.permitted else NOT_PERMITTED


def _report(chosen: argparse.Namespace, options: "Options", progress: TerminalProgress) -> "CheckReport":
    from app.files.setup_file import read_setup  # noqa: PLC0415
    from app.plan.check import Choices, check_plan  # noqa: PLC0415
    from geometry.prepare import prepare_path_kernels  # noqa: PLC0415
    from geometry.scene import with_required  # noqa: PLC0415

    choices = Choices(_fits(chosen.fit), chosen.table)
    setup = read_setup(chosen.setup)
    fields = read_fields(chosen.fields)
    if chosen.required is not None:
        setup = with_required(setup, chosen.required, "given on the command line for every pair")
    prepare_path_kernels(progress)
    try:
        return check_plan(setup, fields, options, choices, str(chosen.fields), progress)
    except GeometryError as error:
        raise BadInput([Fault(str(chosen.setup), "", str(error), "solids that can be built")]) from error


def _write(
    chosen: argparse.Namespace, report: "CheckReport", provenance: "Provenance", progress: TerminalProgress
) -> None:
    from app.plan.gaps import compare_gaps  # noqa: PLC0415
    from app.plan_files.check_exports import CheckExport, write_check  # noqa: PLC0415
    from app.plan_files.gaps_csv import read_kept_gaps  # noqa: PLC0415
    from geometry.assess import assess  # noqa: PLC0415

    gaps = compare_gaps(read_kept_gaps(chosen.setup), report, provenance.fingerprint)
    with_chart = any(path.suffix.lower() == ".pdf" for path in chosen.out)
    assessment = assess(report.setup, report.options, progress) if with_chart else None
    export = CheckExport(report, provenance, assessment, gaps, "Letter" if chosen.paper == "letter" else "A4")
    for path in chosen.out:
        progress.report(1.0, f"writing {path.name}")
        write_check(export, path)


def _fits(said: list[str]) -> dict[str, tuple[str, ...]]:
    from app.files.wording import printable  # noqa: PLC0415

    found: dict[str, tuple[str, ...]] = {}
    for text in said:
        field, sign, what = text.partition("=")
        if not sign or not field.strip():
            raise BadInput([Fault("command line", "--fit", f"'{printable(text)}'", "FIELD=WHAT, as '2=cone'")])
        words = tuple(part.strip() for part in what.split(";") if part.strip())
        if found.setdefault(field.strip(), words) != words:
            raise BadInput([Fault("command line", "--fit", f"'{printable(field.strip())}' twice", "each field once")])
    return found


def _show(report: "CheckReport", provenance: "Provenance", written: list[Path]) -> None:
    from app.check_table import show_report  # noqa: PLC0415
    from app.files.wording import escaped  # noqa: PLC0415

    show_report(report, provenance)
    for path in written:
        sys.stdout.write(f"Wrote {escaped(str(path))}\n")
    sys.stdout.write(f"{CAUTIONS[0]}\n")
