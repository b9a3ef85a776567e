"""The command line: `wideberth map`, `wideberth pose` and `wideberth check`."""

import argparse
import datetime
import os
import sys
import time
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Final, TypeVar

from app import __version__
from app.cautions import CAUTIONS
from app.check_command import add_check
from app.command_options import add_proof_options, number_type
from app.files.wording import escaped
from app.terminal import TerminalProgress
from geometry.errors import BadInput, Cancelled, Fault, GeometryError, WideberthError

if TYPE_CHECKING:
    from geometry.assess import Assessment

Result = TypeVar("Result")

DONE: Final = 0
BAD_INPUT: Final = 2
STOPPED: Final = 130

MAP_SUFFIXES: Final = ".xlsx workbook, .csv permitted-angle table, .json all of it, .png or .pdf angle chart"


def run(arguments: Sequence[str]) -> int:
    """Run one command and return its exit status; every fault goes to standard error, none as a traceback."""
    parser = _parser()
    chosen = parser.parse_args(arguments)
    try:
        status = int(chosen.command(chosen))
        print(end="", flush=True)
    except OSError as error:
        # Faults of files are BadInput by now, or name their file: this is what was printed.
        if isinstance(error, BrokenPipeError) or error.filename is not None:
            raise
        # Python would try once more at the end, and end with a status of its own.
        sys.stdout = open(os.devnull, "w", encoding="utf-8")  # noqa: PTH123, SIM115
        print(f"wideberth: standard output: cannot be written ({error.strerror})", file=sys.stderr)
        return BAD_INPUT
    except BadInput as error:
        for fault in error.faults:
            print(f"wideberth: {escaped(str(fault))}", file=sys.stderr)
        return BAD_INPUT
    except Cancelled:
        print("wideberth: stopped; nothing was written", file=sys.stderr)
        return STOPPED
    except WideberthError as error:
        print(f"wideberth: {escaped(str(error))}", file=sys.stderr)
        return BAD_INPUT
    return status


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="wideberth",
        description="Map which gantry and couch angles of a treatment room stay clear of a patient's set-up.",
        epilog=" ".join(CAUTIONS),
    )
    parser.add_argument("--version", action="version", version=f"wideberth {__version__}")
    parser.set_defaults(command=_window, setup=None)
    commands = parser.add_subparsers(metavar="COMMAND", description="Without one the window opens.")
    _add_open(commands.add_parser("open", help="the window on a set-up", epilog=CAUTIONS[0]))
    _add_map(commands.add_parser("map", help="the permitted angles of a set-up", epilog=CAUTIONS[0]))
    _add_pose(commands.add_parser("pose", help="the clearance at one pair of angles", epilog=CAUTIONS[0]))
    add_check(commands.add_parser("check", help="the fields of a plan, and the moves between them", epilog=CAUTIONS[0]))
    return parser


def _add_open(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("setup", metavar="SETUP", type=Path, help="set-up file, *.setup.toml")


def _add_map(parser: argparse.ArgumentParser) -> None:
    parser.set_defaults(command=_map)
    parser.add_argument("setup", metavar="SETUP", type=Path, help="set-up file, *.setup.toml")
    parser.add_argument("--out", metavar="FILE", type=Path, action="append", default=[], help=MAP_SUFFIXES)
    parser.add_argument("--grid", metavar="FILE.csv", type=Path, help="every pair of angles")
    step = number_type("deg", 0.05, 45.0)
    parser.add_argument("--gantry-step", metavar="DEG", type=step, default=1.0, help="grid of gantry angles, 1")
    parser.add_argument("--couch-step", metavar="DEG", type=step, default=1.0, help="grid of couch angles, 1")
    add_proof_options(parser)
    parser.add_argument("--quiet", action="store_true", help="no progress, no summary")


def _add_pose(parser: argparse.ArgumentParser) -> None:
    parser.set_defaults(command=_pose)
    parser.add_argument("setup", metavar="SETUP", type=Path, help="set-up file, *.setup.toml")
    angle = number_type("deg", -1e6, 1e6)
    parser.add_argument("--gantry", metavar="DEG", type=angle, required=True, help="IEC 61217")
    parser.add_argument("--couch", metavar="DEG", type=angle, required=True, help="IEC 61217")
    parser.add_argument("--out", metavar="FILE", type=Path, help="the scene: .glb, .ply or .stl")
    parser.add_argument("--json", action="store_true", help="as JSON")


def _window(chosen: argparse.Namespace) -> int:
    from app.window.start import run_window  # noqa: PLC0415 - Qt is not needed without a window

    return run_window(chosen.setup)


def _map(chosen: argparse.Namespace) -> int:
    # Kept from `--help` and `--version`, which need not wait for numba.
    from app.files.exports import check_grid_path, check_map_path, write_grid, write_map  # noqa: PLC0415
    from app.files.provenance import provenance_of  # noqa: PLC0415
    from app.files.setup_file import read_setup  # noqa: PLC0415
    from geometry.assess import Options, assess  # noqa: PLC0415
    from geometry.prepare import prepare_kernels  # noqa: PLC0415
    from geometry.scene import with_required  # noqa: PLC0415

    if not chosen.out and chosen.grid is None:
        raise BadInput([Fault("command line", "--out", "no file to write", MAP_SUFFIXES)])
    for path in chosen.out:
        check_map_path(path)
    if chosen.grid is not None:
        check_grid_path(chosen.grid)
    setup = read_setup(chosen.setup)
    if chosen.required is not None:
        setup = with_required(setup, chosen.required, "given on the command line for every pair")
    options = Options(
        gantry_step_deg=chosen.gantry_step,
        couch_step_deg=chosen.couch_step,
        edge_deg=chosen.edge,
        gantry_tolerance_deg=chosen.gantry_tolerance,
        couch_tolerance_deg=chosen.couch_tolerance,
    )
    with TerminalProgress(quiet=chosen.quiet) as progress:
        prepare_kernels(progress)
        start = time.monotonic()
        assessment = _named(chosen.setup, lambda: assess(setup, options, progress))
        seconds = time.monotonic() - start
        provenance = provenance_of(assessment.scene, options, datetime.datetime.now().astimezone().date())
        for path in chosen.out:
            progress.report(1.0, f"writing {path.name}")
            write_map(assessment, provenance, path)
        if chosen.grid is not None:
            progress.report(1.0, f"writing {chosen.grid.name}")
            write_grid(assessment, chosen.grid)
    if not chosen.quiet:
        _summary(assessment, seconds)
        for path in (*chosen.out, *([chosen.grid] if chosen.grid else [])):
            print(f"Wrote {escaped(str(path))}")
    return DONE


def _named(path: Path, compute: Callable[[], Result]) -> Result:
    """Run `compute`; a solid that cannot be built is a fault of the file that asks for it."""
    try:
        return compute()
    except GeometryError as error:
        raise BadInput([Fault(str(path), "", str(error), "solids that can be built")]) from error


def _summary(assessment: "Assessment", seconds: float) -> None:
    """Print what was found, in a few lines."""
    from geometry.states import CODE_OF, State  # noqa: PLC0415

    scene = assessment.scene
    size = assessment.state.size
    permitted = int((assessment.state == CODE_OF[State.PERMITTED]).sum())
    print(f"{scene.setup.name}, {scene.setup.room.name}")
    print(f"{permitted} of {size} angle pairs permitted ({100.0 * permitted / size:.1f} %), found in {seconds:.1f} s.")
    for reason in scene.no_travel:
        print(f"No travel: {reason}.")
    if scene.setup.room.demonstration:
        print("The room is an invented demonstration.")
    elif scene.setup.room.survey is None:
        print("Nobody has surveyed this room.")
    print(CAUTIONS[0])


def _pose(chosen: argparse.Namespace) -> int:
    from app.files.exports import check_pose_path, write_pose  # noqa: PLC0415
    from app.files.pose_json import pose_json  # noqa: PLC0415
    from app.files.provenance import provenance_of  # noqa: PLC0415
    from app.files.setup_file import read_setup  # noqa: PLC0415
    from geometry.assess import Options, assess_pose  # noqa: PLC0415

    if chosen.out is not None:
        check_pose_path(chosen.out)
    setup = read_setup(chosen.setup)
    pose = _named(chosen.setup, lambda: assess_pose(setup, chosen.gantry, chosen.couch))
    if chosen.out is not None:
        today = datetime.datetime.now().astimezone().date()
        write_pose(pose, provenance_of(pose.scene, Options(), today), chosen.out)
    if chosen.json:
        print(pose_json(pose))
        return DONE
    print(f"gantry {pose.gantry_deg:g} deg, couch {pose.couch_deg:g} deg: {pose.state}")
    if pose.machine_part is not None and pose.couch_part is not None:
        print(f"clearance {pose.clearance_mm:.1f} mm, slack {pose.slack_mm:.1f} mm")
        print(f"between {pose.machine_part.label} and {pose.couch_part.label}")
    for reason in pose.scene.no_travel:
        print(f"no travel: {reason}")
    if chosen.out is not None:
        print(f"Wrote {escaped(str(chosen.out))}")
    return DONE
