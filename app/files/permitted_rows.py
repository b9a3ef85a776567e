"""The permitted-angle table row by row, for every format that holds it."""

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import groupby

from app.files.readings import finite, own_scales, reading_deg, rounded_down, shown_deg
from geometry.assess import Assessment
from geometry.scene import Scene
from geometry.spans import Span

# Thousandths of a millimetre: finer than anyone measures, and the proved bound is rounded down to it.
_MM_DIGITS = 3


@dataclass(frozen=True)
class PermittedRow:
    """A span or, with None for all that only a span has and extent 0, a couch angle with nothing permitted.

    Angles are IEC 61217 in [0, 360); the gantry turns clockwise from `gantry_from_deg` by `gantry_extent_deg`. The
    `..._readout_deg` are the same angles on the room's own scales, None where it has none. `least_clearance_mm` and
    `required_mm` are rounded down to a thousandth, so that the one stays a bound and not below the other.
    """

    couch_deg: float
    gantry_from_deg: float | None = None
    gantry_to_deg: float | None = None
    gantry_extent_deg: float = 0.0
    least_clearance_mm: float | None = None
    machine_part: str | None = None
    couch_part: str | None = None
    required_mm: float | None = None
    couch_readout_deg: float | None = None
    gantry_from_readout_deg: float | None = None
    gantry_to_readout_deg: float | None = None


def permitted_rows(assessment: Assessment) -> Iterator[PermittedRow]:
    """Yield the rows, couch angles of the grid in the order of their travel, gantry angles likewise."""
    by_couch = {couch_deg: list(spans) for couch_deg, spans in groupby(assessment.spans, lambda span: span.couch_deg)}
    for couch_deg in assessment.map.couch_deg.tolist():
        spans = by_couch.get(couch_deg, [])
        if not spans:
            yield _nothing(assessment.scene, couch_deg)
        for span in spans:
            yield _row(assessment.scene, span)


def part_label(scene: Scene, index: int) -> str | None:
    """Return `SIDE/PART` of a part by its index in the scene, None for -1: no part."""
    return scene.parts[index].label if index >= 0 else None


def _nothing(scene: Scene, couch_deg: float) -> PermittedRow:
    couch = own_scales(scene.setup.room).couch
    return PermittedRow(
        couch_deg=reading_deg(couch_deg), couch_readout_deg=None if couch is None else shown_deg(couch, couch_deg)
    )


def _row(scene: Scene, span: Span) -> PermittedRow:
    scales = own_scales(scene.setup.room)
    gantry, couch = scales.gantry, scales.couch
    return PermittedRow(
        couch_deg=reading_deg(span.couch_deg),
        gantry_from_deg=reading_deg(span.gantry_from_deg),
        gantry_to_deg=reading_deg(span.gantry_to_deg),
        gantry_extent_deg=round(span.extent_deg, 9),
        least_clearance_mm=rounded_down(span.least_clearance_mm, _MM_DIGITS),
        machine_part=part_label(scene, span.machine_part),
        couch_part=part_label(scene, span.couch_part),
        required_mm=_required(span),
        couch_readout_deg=None if couch is None else shown_deg(couch, span.couch_deg),
        gantry_from_readout_deg=None if gantry is None else shown_deg(gantry, span.gantry_from_deg),
        gantry_to_readout_deg=None if gantry is None else shown_deg(gantry, span.gantry_to_deg),
    )


def _required(span: Span) -> float | None:
    """Return what the named pair must keep, None where nothing at all was to be checked."""
    return rounded_down(span.required_mm, _MM_DIGITS) if finite(span.least_clearance_mm) is not None else None
