"""Options that several commands have, and how their values are checked."""

import argparse
import math
from collections.abc import Callable


def number_type(unit: str, low: float, high: float) -> Callable[[str], float]:
    """Return an argparse type for a number in a range."""

    def parse(text: str) -> float:
        try:
            value = float(text)
        except ValueError:
            value = math.nan
        if not low <= value <= high:
            raise argparse.ArgumentTypeError(f"found {text!r}; allowed: {low:g} to {high:g} {unit}")
        return value

    return parse


def add_proof_options(parser: argparse.ArgumentParser) -> None:
    """Add required clearance, edge resolution and readout tolerances."""
    parser.add_argument(
        "--required",
        metavar="MM",
        type=number_type("mm", 0.1, 500.0),
        help="required clearance of every pair, in place of the set-up's",
    )
    parser.add_argument(
        "--edge",
        metavar="DEG",
        type=number_type("deg", 0.05, 5.0),
        default=0.25,
        help="edge resolution of the proof, 0.25",
    )
    tolerance = number_type("deg", 0.0, 10.0)
    for axis in ("gantry", "couch"):
        parser.add_argument(
            f"--{axis}-tolerance", metavar="DEG", type=tolerance, default=1.0, help=f"of the {axis} readout, 1"
        )
