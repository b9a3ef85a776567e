"""The parametric envelope: sound solids, the sizes it promises, postures, landmarks, ranges."""

import itertools
from dataclasses import replace
from functools import cache

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from geometry.body import ARM_POSTURES, LEG_POSTURES, SIZES, Body, body_landmarks, body_parts
from geometry.body.outline import HalvedOutline
from geometry.body_sizes import sizes_of
from geometry.errors import GeometryError
from geometry.frames import moved, rotation_x, transform
from geometry.pieces import ConvexPiece
from geometry.scene import faceted_pieces
from geometry.solids import Group, Loft, Placed, Solid

Array = NDArray[np.float64]

BODIES = {
    "man": Body(1756.0, build="man"),
    "woman": Body(1628.0, build="woman"),
    "child": Body(1100.0),
    "smallest": Body(700.0),
    "tall and heavy": Body(2200.0, 250.0, "man"),
    "heaviest": Body(2000.0, 290.0, "woman"),
    "slight": Body(1800.0, 40.0, "woman"),
    "prone": Body(1720.0, 78.0, "man", prone=True),
    "one arm up on a slope": Body(1640.0, 70.0, "woman", arm_left="above the head", slope_deg=12.0),
    "steep": Body(1756.0, 95.0, "man", slope_deg=40.0),
}
PARTS = ("head and neck", "trunk", "left arm", "right arm", "pelvis", "left leg", "right leg")
ORDER = ("vertex", "chin", "sternal notch", "xiphoid", "navel", "symphysis")
EXCESS_MM = 1.0

bodies = pytest.mark.parametrize("body", BODIES.values(), ids=BODIES)


def pieces_of(body: Body) -> dict[str, tuple[ConvexPiece, ...]]:
    return {name: faceted_pieces(solid, EXCESS_MM)[0] for name, solid in body_parts(body)}


def points_of(body: Body, *names: str) -> Array:
    """Return the vertices of the named parts, of all without a name, (n, 3), mm."""
    parts = pieces_of(body)
    return np.concatenate([piece.vertices for name in names or PARTS for piece in parts[name]])


def thickest_mm(body: Body) -> float:
    size = sizes_of(body.stature_mm, body.mass_kg, body.build, body.sizes)
    return max(size["chest_depth_mm"], size["waist_depth_mm"], size["hip_depth_mm"])


@cache
def planes_of(piece: ConvexPiece) -> tuple[Array, Array]:
    """Return outward unit normals and offsets of a piece's faces, (m, 3) and (m,)."""
    corner = piece.vertices[piece.faces]
    normal = np.cross(corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0])
    length = np.linalg.norm(normal, axis=1)
    normal = normal[length > 1e-9] / length[length > 1e-9, None]
    return normal, (normal * corner[length > 1e-9, 0]).sum(axis=1)


def outside_mm(piece: ConvexPiece, points: Array) -> Array:
    """Return for each of `points`, (n, 3), the greatest signed distance to a face's plane: not above 0 inside."""
    normal, offset = planes_of(piece)
    return (points @ normal.T - offset).max(axis=1)


def touch(one: ConvexPiece, other: ConvexPiece) -> bool:
    """Tell whether a vertex of either piece lies in the other."""
    return any(outside_mm(a, b.vertices).min() <= 1e-6 for a, b in ((one, other), (other, one)))


def volume_mm3(body: Body) -> float:
    """Return the volume of all pieces, overlaps counted as often as they are covered."""
    corners = [piece.vertices[piece.faces] for pieces in pieces_of(body).values() for piece in pieces]
    return float(np.linalg.det(np.concatenate(corners)).sum() / 6.0)


def surface_of(solid: Solid, rng: np.random.Generator) -> Array:
    """Return points of a true solid made of lofts, (n, 3): on lines between the edges of neighbouring sections."""
    if isinstance(solid, Group):
        return np.concatenate([surface_of(one, rng) for one in solid.solids])
    if isinstance(solid, Placed):
        return moved(solid.matrix, surface_of(solid.solid, rng))
    assert isinstance(solid, Loft)
    rims = []
    for position, outline in solid.sections:
        edge = rng.permutation(np.resize(outline.boundary(200), (200, 2)))
        rims.append(np.insert(edge, {"y": 1, "z": 2}[solid.axis], position, axis=1))
    share = rng.uniform(size=(200, 1))
    return np.concatenate([*rims, *(one + share * (other - one) for one, other in itertools.pairwise(rims))])


def cut_at(body: Body, names: tuple[str, ...], z: float) -> Array:
    """Return where edges of the named parts' pieces pass z, (n, 2): x and y, mm."""
    cuts = [np.empty((0, 3))]
    for name in names:
        for piece in pieces_of(body)[name]:
            one, other = (piece.vertices[np.roll(piece.faces, turn, axis=1)].reshape(-1, 3) for turn in (0, 1))
            across = ((one[:, 2] - z) * (other[:, 2] - z) <= 0.0) & (one[:, 2] != other[:, 2])
            share = ((z - one[:, 2]) / np.where(across, other[:, 2] - one[:, 2], 1.0))[across, None]
            cuts.append(one[across] + share * (other[across] - one[across]))
    return np.concatenate(cuts)[:, :2]


# Postures


@pytest.mark.parametrize(
    ("left", "right", "legs"),
    [*itertools.product(ARM_POSTURES, ARM_POSTURES, LEG_POSTURES[:1]), (*ARM_POSTURES[:2], "apart")],
)
def test_every_posture_is_a_body(left: str, right: str, legs: str) -> None:
    body = Body(1700.0, arm_left=left, arm_right=right, legs=legs)  # type: ignore[arg-type]
    assert tuple(name for name, _ in body_parts(body)) == PARTS
    pieces = [piece for of_part in pieces_of(body).values() for piece in of_part]
    assert 35 <= len(pieces) <= 60
    assert np.mean([len(piece.vertices) for piece in pieces]) <= 40
    points = points_of(body)
    assert points[:, 2].min() == pytest.approx(-1700.0, abs=EXCESS_MM)
    if "above the head" in (left, right):
        assert 100.0 < points[:, 2].max() < 400.0
    else:
        assert points[:, 2].max() == pytest.approx(0.0, abs=EXCESS_MM)


def test_hands_are_where_the_posture_says() -> None:
    body = Body(1700.0, arm_left="on the chest", arm_right="above the head")
    landmarks = body_landmarks(body)
    left, right = points_of(body, "left arm"), points_of(body, "right arm")
    # The left hand lies on the chest, beyond the mid-line, no lower than the xiphoid.
    hand = left[left[:, 0] < 0.0]
    assert len(hand) > 0
    assert hand[:, 2].min() > landmarks["xiphoid"][2]
    assert hand[:, 1].max() < 0.8 * landmarks["xiphoid"][1]
    # The right elbow points outward, beyond the shoulders; the hand comes back above the head.
    assert right[:, 0].min() < points_of(Body(1700.0), "right arm")[:, 0].min() - 50.0
    assert right[right[:, 2] > 150.0][:, 0].max() > -100.0


def test_legs_apart_are_apart() -> None:
    together, apart = Body(1700.0), Body(1700.0, legs="apart")
    assert np.ptp(points_of(together, "left leg", "right leg")[:, 0]) < 400.0
    left, right = points_of(apart, "left leg"), points_of(apart, "right leg")
    feet = [leg[leg[:, 2] < -1600.0][:, 0] for leg in (left, right)]
    assert feet[0].min() - feet[1].max() > 250.0


@pytest.mark.parametrize("body", [Body(1756.0, 82.0), Body(1756.0, 150.0, "man"), Body(960.0)])
def test_a_hand_at_the_side_makes_way_for_legs_apart(body: Body) -> None:
    apart = replace(body, legs="apart")
    tip = points_of(apart, "left arm")[:, 2].min()
    for share in (0.02, 0.05, 0.08):
        z = float(tip + share * body.stature_mm)
        hand, thigh = cut_at(apart, ("left arm",), z), cut_at(apart, ("left leg",), z)
        assert hand[:, 0].mean() > thigh[:, 0].max()


def test_left_and_right_mirror_each_other() -> None:
    for posture in ("at the side", "above the head"):
        body = Body(1700.0, arm_left=posture, arm_right=posture)  # type: ignore[arg-type]
        for part in ("arm", "leg"):
            left, right = points_of(body, f"left {part}"), points_of(body, f"right {part}")
            assert np.allclose(left.min(axis=0)[1:], right.min(axis=0)[1:], atol=EXCESS_MM)
            assert np.allclose(left[:, 0].max(), -right[:, 0].min(), atol=EXCESS_MM)
    alike, other = Body(1700.0, arm_left="above the head"), Body(1700.0, arm_right="above the head")
    assert points_of(alike, "left arm")[:, 0].max() == pytest.approx(
        -points_of(other, "right arm")[:, 0].min(), abs=1.0
    )


# Sizes


@pytest.mark.parametrize("body", [BODIES[name] for name in ("man", "woman", "child", "tall and heavy", "prone")])
def test_the_envelope_is_at_least_as_wide_and_deep_as_its_sizes(body: Body) -> None:
    size = sizes_of(body.stature_mm, body.mass_kg, body.build, body.sizes)
    lengths = body_landmarks(body)
    head = np.ptp(points_of(body, "head and neck"), axis=0)
    assert head[0] >= size["head_breadth_mm"]
    assert head[1] >= size["head_length_mm"]
    # The chest is measured at the nipples: 0.130 / 0.170 of the way from the sternal notch to the xiphoid.
    nipples = lengths["sternal notch"][2] + 0.130 / 0.170 * (lengths["xiphoid"][2] - lengths["sternal notch"][2])
    chest = np.ptp(cut_at(body, ("trunk",), nipples), axis=0)
    assert np.all(chest >= (size["chest_breadth_mm"] - 1e-6, size["chest_depth_mm"] - 1e-6))
    waist = np.ptp(cut_at(body, ("trunk",), lengths["navel"][2]), axis=0)
    assert np.all(waist >= (size["waist_breadth_mm"] - 1e-6, size["waist_depth_mm"] - 1e-6))
    assert np.ptp(cut_at(body, ("pelvis",), lengths["symphysis"][2])[:, 0]) >= size["hip_breadth_mm"] - 1e-6
    arms = points_of(body, "left arm", "right arm")
    shoulders = arms[arms[:, 2] > nipples]
    assert np.ptp(shoulders[:, 0]) >= size["bideltoid_breadth_mm"]
    assert np.ptp(arms[:, 0]) >= size["forearm_forearm_breadth_mm"]
    arm = points_of(body, "left arm")
    assert np.ptp(arm[:, 2]) >= size["shoulder_elbow_length_mm"] + 0.97 * size["forearm_hand_length_mm"]
    if not body.prone:
        leg = points_of(body, "left leg")
        assert np.ptp(leg[leg[:, 2] < -0.98 * body.stature_mm][:, 1]) >= size["foot_length_mm"]


@pytest.mark.parametrize(
    ("name", "part", "axis"),
    [
        ("chest_depth_mm", "trunk", 1),
        ("chest_breadth_mm", "trunk", 0),
        ("waist_depth_mm", "trunk", 1),
        ("waist_breadth_mm", "trunk", 0),
        ("hip_breadth_mm", "pelvis", 0),
    ],
)
def test_a_measured_size_replaces_the_mean(name: str, part: str, axis: int) -> None:
    points = points_of(Body(1700.0, sizes=((name, 480.0),)), part)
    assert 480.0 - 1e-6 <= np.ptp(points[:, axis]) <= 480.0 * 1.1 + 2.0 * EXCESS_MM


@pytest.mark.parametrize("name", SIZES)
def test_every_size_has_a_range_about_its_means_and_is_felt(name: str) -> None:
    size = SIZES[name]
    assert size.low < min(size.man, size.woman)
    assert size.high > max(size.man, size.woman)
    body = Body(1700.0)
    larger = replace(body, sizes=((name, 1.1 * sizes_of(1700.0, None, "mean", ())[name]),))
    if name == "forearm_forearm_breadth_mm":
        assert np.ptp(points_of(larger), axis=0)[0] > 1.09 * np.ptp(points_of(body), axis=0)[0]
    else:
        assert volume_mm3(larger) > 1.002 * volume_mm3(body)


def test_mass_widens_and_stature_lengthens() -> None:
    usual, heavy, tall = Body(1700.0, 70.0), Body(1700.0, 120.0), Body(1900.0, 70.0)
    wider = np.ptp(points_of(heavy, "trunk"), axis=0) / np.ptp(points_of(usual, "trunk"), axis=0)
    assert np.all(wider[:2] > 1.2)
    assert wider[2] == pytest.approx(1.0, abs=0.01)
    longer = np.ptp(points_of(tall, "trunk"), axis=0) / np.ptp(points_of(usual, "trunk"), axis=0)
    assert longer[2] > 1.1
    assert longer[0] < 1.0


# Sound solids


@bodies
def test_parts_meet_so_that_no_joint_gapes(body: Body) -> None:
    parts = pieces_of(body)
    for one, other in (
        ("head and neck", "trunk"),
        ("trunk", "pelvis"),
        ("trunk", "left arm"),
        ("trunk", "right arm"),
        ("pelvis", "left leg"),
        ("pelvis", "right leg"),
    ):
        # How far the deepest vertex of one part's pieces lies in a piece of the other.
        depth = max(
            -outside_mm(piece, neighbour.vertices).min()
            for first, second in ((one, other), (other, one))
            for piece in parts[first]
            for neighbour in parts[second]
        )
        assert depth >= (-1e-6 if one == "trunk" and other == "pelvis" else 2.0), (one, other)


@bodies
def test_a_limb_has_no_gap_where_it_bends(body: Body) -> None:
    for posture in ARM_POSTURES:
        bent = replace(body, arm_left=posture)
        for name in ("left arm", "left leg"):
            pieces = list(pieces_of(bent)[name])
            reached, waiting = [pieces.pop()], True
            while waiting:
                touching = [piece for piece in pieces if any(touch(piece, one) for one in reached)]
                pieces = [piece for piece in pieces if all(piece is not one for one in touching)]
                reached, waiting = [*reached, *touching], bool(touching)
            assert not pieces, (posture, name)


@pytest.mark.parametrize("name", ["prone", "one arm up on a slope"])
def test_pieces_contain_the_true_solids_and_their_excess_is_kept(name: str) -> None:
    for part, solid in body_parts(BODIES[name]):
        pieces, excess_mm = faceted_pieces(solid, EXCESS_MM)
        assert 0.0 < excess_mm <= EXCESS_MM
        true = surface_of(solid, np.random.default_rng(20240611))
        assert len(true) >= 1000
        outside = np.min([outside_mm(piece, true) for piece in pieces], axis=0)
        assert outside.max() <= 1e-9, part


@bodies
def test_nothing_sinks_into_what_the_body_lies_on(body: Body) -> None:
    points = points_of(body)
    if body.prone:
        assert points[:, 1].min() == pytest.approx(-thickest_mm(body), abs=EXCESS_MM)
        return
    assert points[:, 1].max() == pytest.approx(0.0, abs=EXCESS_MM)
    # Above the hips the plane rises with the slope, about the lowest line of the trunk.
    trunk = points_of(body, "trunk")
    hinge = trunk[trunk[:, 1].argmax()]
    turn = rotation_x(-body.slope_deg)
    level = moved(transform(turn, hinge - turn @ hinge), points)
    above = points[:, 2] > hinge[2]
    assert level[above][:, 1].max() <= EXCESS_MM


def test_a_supine_body_has_its_toes_up_and_a_prone_one_stretched() -> None:
    supine, prone = points_of(Body(1700.0)), points_of(Body(1700.0, prone=True))
    assert supine[supine[:, 2] < -1650.0][:, 1].min() == pytest.approx(-260.0, abs=20.0)
    assert prone[:, 2].min() < -1800.0
    # The nose of a prone body touches what it lies on; the back of the head is the highest of it.
    head = points_of(Body(1700.0, prone=True), "head and neck")
    assert head[:, 1].min() == pytest.approx(prone[:, 1].min(), abs=EXCESS_MM)


def test_a_slope_raises_the_head_and_leaves_the_legs() -> None:
    flat, raised = Body(1650.0), Body(1650.0, slope_deg=12.0)
    # From the hips to the vertex there are about 0.78 m: 0.78 sin 12 deg.
    lift = body_landmarks(flat)["vertex"] - body_landmarks(raised)["vertex"]
    assert lift[1] == pytest.approx(162.0, abs=10.0)
    assert np.array_equal(points_of(flat, "left leg"), points_of(raised, "left leg"))


# Landmarks


@bodies
def test_landmarks_lie_on_the_skin_in_anatomical_order(body: Body) -> None:
    landmarks = body_landmarks(body)
    assert set(landmarks) == set(ORDER)
    if body.slope_deg <= 15.0:
        heights = [landmarks[name][2] for name in ORDER]  # type: ignore[index]
        assert heights == sorted(heights, reverse=True)
    pieces = [piece for of_part in pieces_of(body).values() for piece in of_part]
    for name, point in landmarks.items():
        assert point.shape == (3,)
        assert point[0] == 0.0
        # In no piece by more than 1 mm, and within 1 mm of one.
        assert -1.0 <= min(float(outside_mm(piece, point[None])[0]) for piece in pieces) <= 1.0, name
    if body.slope_deg == 0.0:
        assert landmarks["vertex"][2] == pytest.approx(points_of(body, "head and neck")[:, 2].max())


def test_landmarks_are_the_callers_own() -> None:
    body = BODIES["man"]
    body_landmarks(body)["navel"][:] = 0.0
    assert body_landmarks(body)["navel"][2] < -600.0


# Ranges


@pytest.mark.parametrize(
    ("keys", "words"),
    [
        ({"stature_mm": 300.0}, "stature_mm = 300.* from 700 to 2300"),
        ({"stature_mm": float("nan")}, "stature_mm = nan"),
        ({"stature_mm": "tall"}, "stature_mm = 'tall'"),
        ({"stature_mm": 1700.0, "mass_kg": 900.0}, "mass_kg = 900.* from 5 to 300"),
        ({"stature_mm": 1800.0, "mass_kg": 10.0}, "mass_kg = 10 .* stature_mm = 1800; .* 25.9 to 421.2"),
        ({"stature_mm": 800.0, "mass_kg": 100.0}, "mass_kg = 100 .* stature_mm = 800"),
        ({"stature_mm": 1700.0, "build": "wman"}, "build = 'wman'.*did you mean 'woman'"),
        ({"stature_mm": 1700.0, "arm_left": "on chest"}, "arm_left = 'on chest'.*did you mean 'on the chest'"),
        ({"stature_mm": 1700.0, "legs": "crossed"}, "legs = 'crossed'.*together, apart"),
        ({"stature_mm": 1700.0, "sizes": (("chest_dept_mm", 300.0),)}, "did you mean 'chest_depth_mm'"),
        ({"stature_mm": 1700.0, "sizes": (("chest_depth_mm", 5000.0),)}, "chest_depth_mm = 5000.* from 90 to 600"),
        ({"stature_mm": 1700.0, "sizes": (("chest_depth_mm", 300.0), ("chest_depth_mm", 310.0))}, "twice"),
        ({"stature_mm": 1700.0, "sizes": 3}, "sizes = 3"),
        ({"stature_mm": 1700.0, "slope_deg": 60.0}, "slope_deg = 60.* from 0 to 45"),
        ({"stature_mm": 1700.0, "slope_deg": 10.0, "prone": True}, "slope_deg = 10 of a prone"),
    ],
)
def test_what_is_out_of_range_is_refused_by_name(keys: dict[str, object], words: str) -> None:
    with pytest.raises(GeometryError, match=words):
        Body(**keys)  # type: ignore[arg-type]


@settings(max_examples=10, deadline=None)
@given(
    stature_mm=st.floats(700.0, 2300.0),
    index=st.none() | st.floats(8.5, 120.0),
    measured=st.dictionaries(st.sampled_from(sorted(SIZES)), st.floats(0.0, 1.0), max_size=4),
    arm=st.sampled_from(ARM_POSTURES),
    prone=st.booleans(),
)
def test_any_body_is_made_of_solids_that_start_at_the_vertex(
    stature_mm: float, index: float | None, measured: dict[str, float], arm: str, prone: bool
) -> None:
    mass_kg = None if index is None else min(max(index * (stature_mm / 1000.0) ** 2, 5.0), 300.0)
    sizes = tuple((k, SIZES[k].low + share * (SIZES[k].high - SIZES[k].low)) for k, share in measured.items())
    body = Body(stature_mm, mass_kg, "mean", sizes, arm, "at the side", "apart", 0.0, prone)  # type: ignore[arg-type]
    points = points_of(body)
    assert np.isfinite(points).all()
    assert points_of(body, "head and neck")[:, 2].max() == pytest.approx(0.0, abs=1e-6)
    assert points[:, 2].min() <= -stature_mm + 1e-6


# The outline of its sections


def test_the_halved_outline_is_within_its_polygon_which_exceeds_it_no_more_than_stated() -> None:
    outline = HalvedOutline(180.0, 140.0, 60.0, (10.0, -20.0), 2.3, 3.0)
    polygon, excess_mm = outline.enclosing(0.5)
    assert polygon.is_valid
    assert polygon.convex_hull.area == pytest.approx(polygon.area)
    assert polygon.bounds == pytest.approx((-170.0, -160.0, 190.0, 40.0))
    edge = outline.boundary(2000)
    assert shapely.Polygon(edge).exterior.is_ccw
    assert shapely.contains_xy(polygon.buffer(1e-9), edge[:, 0], edge[:, 1]).all()
    assert excess_mm <= 0.5
    assert shapely.hausdorff_distance(polygon, shapely.Polygon(edge)) <= excess_mm + 1e-3
    centre = np.array([10.0, -20.0])
    assert outline.contains(centre + 0.999 * (edge - centre)).all()
    assert not outline.contains(centre + 1.001 * (edge - centre)).any()
    # Flat below 60 mm, full above 140: the corners of the two halves' rectangles are filled differently.
    assert not outline.contains(np.array([[10.0 + 0.75 * 180.0, -20.0 - 0.75 * 140.0]])).any()
    assert outline.contains(np.array([[10.0 + 0.75 * 180.0, -20.0 + 0.75 * 60.0]])).all()


@pytest.mark.parametrize("max_excess_mm", [0.05, 0.5, 5.0])
def test_outlines_of_all_shapes_keep_the_excess(max_excess_mm: float) -> None:
    rng = np.random.default_rng(20240612)
    for _ in range(20):
        half_width, below, above = np.exp(rng.uniform(np.log(3.0), np.log(400.0), 3))
        outline = HalvedOutline(half_width, below, above, (5.0, 7.0), *rng.uniform(2.0, 3.0, 2))
        polygon, excess_mm = outline.enclosing(max_excess_mm)
        edge = outline.boundary(4000)
        assert shapely.contains_xy(polygon.buffer(1e-9), edge[:, 0], edge[:, 1]).all()
        assert 0.0 < excess_mm <= max_excess_mm
        corners = shapely.points(polygon.exterior.coords)
        # The inscribed polygon of 4000 points is within 1e-3 of the edge.
        assert shapely.distance(corners, shapely.Polygon(edge)).max() <= excess_mm + 1e-3
