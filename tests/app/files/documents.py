"""A small room and a small set-up as plain values, and how to write such values as TOML."""

import datetime
import json
import tomllib
from collections.abc import Callable, Iterator
from copy import deepcopy
from pathlib import Path
from typing import Any

import pytest

from geometry.errors import BadInput, Fault

Document = dict[str, Any]

ROOM_TEXT = """
format = 1
name = "Test room"
source_axis_distance_mm = 1000
max_excess_mm = 0.5

[survey]
by = "nobody in particular"
on = 2025-03-14
method = "tape measure"
uncertainty_mm = 3

[gantry]
travel_deg = [-185, 185]
speed_deg_per_s = 6
readout = { zero_deg = 180, sense = -1, resolution_deg = 0.1 }

[collimator]
travel_deg = [-175, 175]

[couch]
head_end_mm = 10
eccentric_offset_mm = [0, 5, 0]
turntable = { travel_deg = [-95, 95] }
eccentric = { travel_deg = [-10, 10] }
lateral = { travel_mm = [-230, 230], speed_mm_per_s = 40, readout = { zero_mm = 1000, sense = 1, resolution_mm = 1 } }
longitudinal = { travel_mm = [-200, 1100] }
vertical = { travel_mm = [-650, 400] }
pitch = { travel_deg = [-3, 3] }
roll = { travel_deg = [-3, 3] }

[[accessory]]
name = "applicator"
slot = "tray"

[[accessory]]
name = "cone"
slot = "tray"

[[arm]]
name = "panel"
[[arm.position]]
name = "parked"
shift_mm = [400, 0, 0]
turn_deg = 20
turn_axis = "y"
turn_about_mm = [0, 0, 100]
[[arm.position]]
name = "extended"

[[arm]]
name = "snout"
direction = [0, 3, -4]
travel_mm = [0, 400]

[[part]]
name = "floor"
mount = "fixed"
shape = "box"
size_mm = [6000, 6000, 100]
centre_mm = [0, 0, -1350]
colour = "Light Grey"

[[part]]
name = "stand"
mount = "fixed"
shape = "cylinder"
radius_mm = 700
start_mm = [0, 1000, 0]
end_mm = [0, 1500, 0]

[[part]]
name = "drum"
mount = "gantry"
shape = "ring"
inner_radius_mm = 500
outer_radius_mm = 900
start_mm = [0, 800, 0]
end_mm = [0, 1000, 0]
arc_deg = [-60, 240]

[[part]]
name = "head"
mount = "gantry"
shape = "loft"
axis = "z"
sections = [
  { along_mm = 420, outline = { circle_radius_mm = 330 } },
  { along_mm = 600, outline = { ellipse_mm = [350, 300], exponent = 2.5, centre_mm = [0, 10] } },
  { along_mm = 900, outline = { rectangle_mm = [760, 800], corner_radius_mm = 200 } },
]

[[part]]
name = "panel"
mount = "gantry"
arm = "panel"
shape = "box"
size_mm = [400, 400, 50]
turns = [["x", 10], ["z", -5]]
at_mm = [0, 0, -600]

[[part]]
name = "snout"
mount = "collimator"
arm = "snout"
shape = "frustum"
start_radius_mm = 200
end_radius_mm = 100
start_mm = [0, 0, 400]
end_mm = [0, 0, 300]

[[part]]
name = "applicator"
mount = "collimator"
accessory = "applicator"
shape = "box"
size_mm = [250, 250, 300]
centre_mm = [0, 0, 250]

[[part]]
name = "cone"
mount = "collimator"
accessory = "cone"
shape = "box"
size_mm = [50, 50, 100]
centre_mm = [0, 0, 250]

[[part]]
name = "table top"
mount = "couch"
shape = "extrusion"
axis = "y"
along_mm = [-2100, 0]
outline = { points = [[-265, 0], [265, 0], [180, -70], [-180, -70]], holes = [[[-50, -20], [50, -20], [0, -40]]] }

[[part]]
name = "pedestal"
mount = "couch"
follows = ["turntable"]
shape = "box"
size_mm = [600, 900, 400]
centre_mm = [0, -1500, -1100]
colour = "#A0b0C0"

[[joined]]
first = "drum"
second = "stand"
reason = "the drum turns in the stand"

[[joined]]
parts = ["pedestal"]
with = ["floor", "stand"]
reason = "stands on the floor"
"""

SETUP_TEXT = """
format = 1
name = "Head"
room = "test.room.toml"
notes = "two\\nlines"

[patient]
position = "HFP"
source = "body"
stature_mm = 1756
mass_kg = 80
build = "man"
sizes = { chest_depth_mm = 260 }
arm_left = "above the head"
arm_right = "at the side"
legs = "apart"

[table]
from_head_end_mm = 50
lateral_mm = 5
height_mm = 20

[isocentre]
landmark = "vertex"
left_mm = 10
head_mm = -80
front_mm = -20

[couch]
pitch_deg = 1
roll_deg = -1
eccentric_deg = 2

[fitted]
accessories = ["cone"]
arms = { panel = "extended", snout = 120 }
collimator_deg = 30

[required]
fixed_mm = 20
k = 1.5
reason = "department's rule"
with_survey = true
component = [ { name = "couch sag", sd_mm = 2 }, { name = "surface", sd_mm = 5, patient_only = true } ]

[[device]]
name = "mask frame"
shape = "box"
size_mm = [300, 400, 20]
centre_mm = [0, -200, 10]
"""


def room_document() -> Document:
    return tomllib.loads(ROOM_TEXT)


def setup_document() -> Document:
    return tomllib.loads(SETUP_TEXT)


def as_toml(value: object) -> str:
    """Return a value in TOML's inline form."""
    if isinstance(value, dict):
        return "{" + ", ".join(f"{_quoted(key)} = {as_toml(item)}" for key, item in value.items()) + "}"
    if isinstance(value, list):
        return "[" + ", ".join(as_toml(item) for item in value) + "]"
    if isinstance(value, str):
        return _quoted(value)
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, datetime.date):
        return value.isoformat()
    return repr(value)


def written(path: Path, document: Document | str) -> Path:
    """Write a document, as it is or as values, and return the path."""
    text = document
    if not isinstance(document, str):
        text = "\n".join(f"{_quoted(key)} = {as_toml(value)}" for key, value in document.items())
    path.write_text(str(text), encoding="utf-8")
    return path


def changed(document: Document, place: tuple[str | int, ...], value: object) -> Document:
    """Return a copy with the value at `place` replaced, or removed where it is None."""
    document = deepcopy(document)
    inner: Any = document
    for step in place[:-1]:
        inner = inner[step]
    if value is None:
        del inner[place[-1]]
    else:
        inner[place[-1]] = value
    return document


def places(value: object, so_far: tuple[str | int, ...] = ()) -> Iterator[tuple[str | int, ...]]:
    """Yield the place of every value in a document, tables and lists too."""
    if so_far:
        yield so_far
    if isinstance(value, dict):
        for key, item in value.items():
            yield from places(item, (*so_far, key))
    elif isinstance(value, list):
        for i, item in enumerate(value):
            yield from places(item, (*so_far, i))


def value_at(document: Document, place: tuple[str | int, ...]) -> Any:  # noqa: ANN401 - whatever is there
    """Return the value at a place of `places`."""
    inner: Any = document
    for step in place:
        inner = inner[step]
    return inner


def faults_of(read: Callable[[], object]) -> tuple[Fault, ...]:
    """Return the faults with which `read` refuses its file."""
    with pytest.raises(BadInput) as caught:
        read()
    return caught.value.faults


def outcome(read: Callable[[], object]) -> object:
    """Return what `read` returns, or the tuple of faults with which it refuses its file."""
    try:
        return read()
    except BadInput as error:
        return error.faults


def _quoted(text: str) -> str:
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")
