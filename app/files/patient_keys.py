"""The patient's envelope as a set-up file describes it."""

from dataclasses import dataclass
from typing import Final, Literal, get_args

from app.files.dicom import (
    read_external_contour,
    read_plan_isocentres,
    read_plan_patient_position,
    structure_patient_position,
)
from app.files.reading import Table
from app.files.setup_limits import BODY_POSITIONS, SLOPE_DEG
from app.files.shapes import mesh_of
from app.files.values import Limits
from app.files.wording import printable
from geometry.body import Body
from geometry.body_sizes import MASS_RANGE_KG, SIZES, STATURE_RANGE_MM
from geometry.frames import PATIENT_POSITIONS
from geometry.landmarks import Landmark
from geometry.setup import Surface
from geometry.solids import Solid

Source = Literal["body", "mesh", "structure set"]
Arm = Literal["at the side", "on the chest", "above the head"]
Build = Literal["man", "woman", "mean"]
Legs = Literal["together", "apart"]
Point = tuple[float, float, float]

LANDMARKS: Final[tuple[Landmark, ...]] = get_args(Landmark)
_SOURCES: Final[tuple[Source, ...]] = get_args(Source)
_ARMS: Final[tuple[Arm, ...]] = get_args(Arm)
_BUILDS: Final[tuple[Build, ...]] = ("mean", "man", "woman")
_LEGS: Final[tuple[Legs, ...]] = get_args(Legs)


@dataclass(frozen=True)
class Patient:
    """What [patient] says. `envelope` is None after a fault; `plan_isocentres_mm` is empty where no plan is named."""

    position: str
    envelope: Body | Surface | None
    plan_isocentres_mm: tuple[Point, ...] = ()


def patient_of(top: Table) -> Patient:
    """Return what [patient] says, files that it names included."""
    table = top.required_table("patient")
    position = table.choice("position", PATIENT_POSITIONS)
    source = table.choice("source", _SOURCES)
    if table.raw("source") != source:
        table.ignore_rest()
        return Patient(position, None)
    if source == "body":
        return Patient(position, _body(table, position))
    return _imported(table, position, source)


def _body(table: Table, position: str) -> Body | None:
    if position not in BODY_POSITIONS:
        table.fault("position", f"'{position}' with a body made from sizes", f"one of {', '.join(BODY_POSITIONS)}")
    stature_mm = table.number("stature_mm", Limits(*STATURE_RANGE_MM))
    mass_kg = table.optional_number("mass_kg", Limits(*MASS_RANGE_KG))
    build = table.choice("build", _BUILDS, default="mean")
    sizes = _sizes(table)
    arm_left = table.choice("arm_left", _ARMS, default="at the side")
    arm_right = table.choice("arm_right", _ARMS, default="at the side")
    legs = table.choice("legs", _LEGS, default="together")
    slope_deg = table.number("slope_deg", SLOPE_DEG, default=0.0)
    prone = position.endswith("P")
    return table.built(lambda: Body(stature_mm, mass_kg, build, sizes, arm_left, arm_right, legs, slope_deg, prone))


def _sizes(table: Table) -> tuple[tuple[str, float], ...]:
    """Return the sizes that were measured, in the order of their names' list."""
    sizes = table.table("sizes")
    if sizes is None:
        return ()
    return tuple(
        (name, sizes.number(name, Limits(size.low, size.high))) for name, size in SIZES.items() if sizes.has(name)
    )


def _imported(table: Table, position: str, source: Source) -> Patient:
    landmarks = _landmarks(table)
    isocentres = _plan(table, position)
    if source == "mesh":
        solid = mesh_of(table)
        words = "closed surface mesh"
    else:
        solid = _contours(table, position)
        words = "external contour of a structure set"
    surface = None if solid is None else table.built(lambda: Surface(solid, words, landmarks))
    return Patient(position, surface, isocentres)


def _contours(table: Table, position: str) -> Solid | None:
    path = table.file("file")
    roi = table.optional_text("roi")
    if path is None:
        return None
    _check_position(table, "file", table.attempted(lambda: structure_patient_position(path)), position)
    return table.attempted(lambda: read_external_contour(path, roi))


def _landmarks(table: Table) -> tuple[tuple[Landmark, Point], ...]:
    given = table.table("landmarks")
    if given is None:
        return ()
    return tuple((name, given.vector(name)) for name in LANDMARKS if given.has(name))


def _plan(table: Table, position: str) -> tuple[Point, ...]:
    """Return the isocentres of the plan that is named, if one is; its patient position has to be the set-up's."""
    path = table.file("plan") if table.has("plan") else None
    if path is None:
        return ()
    _check_position(table, "plan", table.attempted(lambda: read_plan_patient_position(path)), position)
    return table.attempted(lambda: read_plan_isocentres(path)) or ()


def _check_position(table: Table, key: str, stated: str | None, position: str) -> None:
    """Note a fault where a DICOM file states a patient position that is not the set-up's."""
    if stated is not None and stated != position:
        table.fault(key, f"a file for patient position '{printable(stated)}'", f"'{position}', as position says")
