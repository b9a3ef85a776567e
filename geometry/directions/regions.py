"""How much of the sphere the permitted angles reach, and the lines around it.

The plane of angles is folded so that every direction stands once: gantry 0 to 180, couch -180 to 180. A gantry angle
-g at couch c goes to g at c + 180. Solid angles there are sin(g) dg dc, in closed form for borders that are straight.
"""

import math
from dataclasses import dataclass
from typing import Final

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.affinity import affine_transform

from geometry.assess import Assessment, tolerances_of
from geometry.directions.axes import Interval, PatientAxes, directions_patient
from geometry.spans import permitted_runs

Array = NDArray[np.float64]

SPHERE_SR: Final = 4.0 * math.pi

# Angles that differ by less, deg, are one: folding adds and takes away whole turns.
_SAME_DEG: Final = 1e-9
_STEP_DEG: Final = 1.0
_FOLDED: Final = shapely.box(0.0, -180.0, 180.0, 180.0)


@dataclass(frozen=True)
class Share:
    """How much of all beam directions is permitted and how much can be reached at all.

    Directions that several pairs of angles give count once. The coplanar circle is what the gantry runs through with
    the couch at 0; of its 360 deg so much is permitted and in reach.
    """

    permitted_sr: float
    reachable_sr: float
    coplanar_permitted_deg: float
    coplanar_reachable_deg: float

    @property
    def of_sphere(self) -> float:
        """The permitted share of the whole sphere, 0 to 1."""
        return self.permitted_sr / SPHERE_SR

    @property
    def of_reachable(self) -> float:
        """The permitted share of what can be reached, 0 to 1; NaN where nothing with an area can."""
        return self.permitted_sr / self.reachable_sr if self.reachable_sr > 0.0 else math.nan


def share_of(assessment: Assessment) -> Share:
    """Return the share of directions that a set-up leaves: of permitted readings, that is, tolerances included."""
    room = assessment.scene.setup.room
    gantry, couch = (room.gantry.low, room.gantry.high), (room.couch.turntable.low, room.couch.turntable.high)
    if assessment.scene.no_travel:
        return Share(0.0, 0.0, 0.0, 0.0)
    travel = shapely.box(gantry[0], couch[0], gantry[1], couch[1])
    runs: list[Interval] = []
    reach: list[Interval] = []
    tolerances = tolerances_of(room, assessment.options)
    for couch_deg, sense in _coplanar_angles(couch):
        _, permitted = permitted_runs(assessment.proof, tolerances, couch_deg)
        runs += [_sorted(sense * run.low_deg, sense * run.high_deg) for run in permitted]
        reach.append(_sorted(sense * gantry[0], sense * gantry[1]))
    return Share(
        solid_angle_sr(folded(assessment.permitted_region)),
        solid_angle_sr(folded(travel)),
        _covered_deg(runs),
        _covered_deg(reach),
    )


def folded(region: shapely.Geometry) -> shapely.Geometry:
    """Return a region of the plane (x gantry, unwrapped, y couch, deg) folded to gantry 0 to 180, couch -180 to 180."""
    if region.is_empty:
        return shapely.MultiPolygon()
    x0, y0, x1, y1 = region.bounds
    pieces = []
    for half in range(math.floor(x0 / 180.0), math.ceil(x1 / 180.0)):
        strip = shapely.intersection(region, shapely.box(180.0 * half, y0 - 1.0, 180.0 * half + 180.0, y1 + 1.0))
        # A half-turn of even count turns on from where it begins, one of odd count back to it.
        sense, start, turned = (1.0, 180.0 * half, 0.0) if half % 2 == 0 else (-1.0, 180.0 * half + 180.0, 180.0)
        for turn in range(math.floor((-y1 - 360.0) / 360.0), math.ceil((360.0 - y0) / 360.0) + 1):
            shift = turned + 360.0 * turn
            if y0 + shift < 180.0 and y1 + shift > -180.0:
                pieces.append(affine_transform(strip, [sense, 0.0, 0.0, 1.0, -sense * start, shift]))
    # Where areas meet the fold along a line alone, that line is no part of the region.
    return _areas(shapely.intersection(_areas(shapely.union_all(pieces, grid_size=_SAME_DEG)), _FOLDED))


def solid_angle_sr(region: shapely.Geometry) -> float:
    """Return the solid angle of a folded region: the integral of sin(gantry) d gantry d couch."""
    oriented = (shapely.orient_polygons(part) for part in shapely.get_parts(region) if part.geom_type == "Polygon")
    return sum((_ring_sr(ring) for polygon in oriented for ring in (polygon.exterior, *polygon.interiors)), 0.0)


def outlines(region: shapely.Geometry, axes: PatientAxes) -> tuple[Array, ...]:
    """Return the lines around a region of the plane of angles as directions, each (k, 3), DICOM patient axes.

    Borders of the plane that are none on the sphere, its seam and its poles, are left out.
    """
    flat = folded(region)
    if flat.is_empty:
        return ()
    edges = _without_frame(shapely.boundary(flat))
    lines = shapely.segmentize(shapely.line_merge(edges), _STEP_DEG)
    points = [shapely.get_coordinates(line) for line in shapely.get_parts(lines) if line.length > _SAME_DEG]
    return tuple(directions_patient(line[:, 0], line[:, 1], axes) for line in points)


def _without_frame(edges: shapely.Geometry) -> shapely.Geometry:
    """Return borders without the plane's frame, but with those parts of its seam that have a region on one side."""
    inner = shapely.difference(edges, _FOLDED.boundary)
    low, high = (
        shapely.intersection(edges, shapely.LineString([(0.0, couch), (180.0, couch)])) for couch in (-180.0, 180.0)
    )
    seam = shapely.symmetric_difference(low, affine_transform(high, [1.0, 0.0, 0.0, 1.0, 0.0, -360.0]))
    parts = (*shapely.get_parts(inner), *shapely.get_parts(seam))
    return shapely.MultiLineString([part for part in parts if part.geom_type == "LineString" and not part.is_empty])


def _areas(region: shapely.Geometry) -> shapely.Geometry:
    """Return the polygons among the parts of a region."""
    return shapely.MultiPolygon([part for part in shapely.get_parts(region) if isinstance(part, shapely.Polygon)])


def _ring_sr(ring: shapely.Geometry) -> float:
    """Return the integral of -cos(gantry) d couch around a ring, which by Green's theorem is the solid angle in it."""
    gantry, couch = np.radians(shapely.get_coordinates(ring)).T
    half = np.diff(gantry) / 2.0
    # The mean of cos over a straight edge; np.sinc has the factor pi in it.
    mean = np.cos((gantry[1:] + gantry[:-1]) / 2.0) * np.sinc(half / np.pi)
    return float(np.sum(-mean * np.diff(couch)))


def _coplanar_angles(couch_travel: Interval) -> list[tuple[float, float]]:
    """Return the couch angles within the travel that keep the beams coplanar, and which way the gantry counts there."""
    first, last = (math.ceil(couch_travel[0] / 180.0), math.floor(couch_travel[1] / 180.0))
    return [(180.0 * half, 1.0 if half % 2 == 0 else -1.0) for half in range(first, last + 1)]


def _sorted(one: float, other: float) -> Interval:
    return min(one, other), max(one, other)


def _covered_deg(intervals: list[Interval]) -> float:
    """Return how much of a circle intervals of angles cover together."""
    pieces: list[Interval] = []
    for low, high in intervals:
        if high - low >= 360.0:
            return 360.0
        start = low % 360.0
        stop = start + high - low
        pieces += [(start, min(stop, 360.0)), (0.0, max(stop - 360.0, 0.0))]
    covered, end = 0.0, 0.0
    for low, high in sorted(pieces):
        covered += max(0.0, high - max(low, end))
        end = max(end, high)
    return covered
