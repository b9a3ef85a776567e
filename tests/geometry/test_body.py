"""The parametric envelope: sound solids, the sizes it promises, postures, landmarks, ranges."""

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from geometry.body import SIZES, Body, body_landmarks, body_parts
from geometry.body_sizes import sizes_of
from geometry.errors import GeometryError
from geometry.pieces import ConvexPiece
from geometry.scene import faceted_pieces

ARMS = ("at the side", "on the chest", "above the head")
BODIES = (
    Body(1756.0, build="man"),
    Body(1100.0),
    Body(1900.0, 160.0, "man"),
    Body(1628.0, build="woman", prone=True),
)
ORDER = ("vertex", "chin", "sternal notch", "xiphoid", "navel", "symphysis")


def pieces_of(body: Body, max_excess_mm: float = 1.0) -> dict[str, tuple[ConvexPiece, ...]]:
    return {name: faceted_pieces(solid, max_excess_mm)[0] for name, solid in body_parts(body)}


def points_of(body: Body) -> np.ndarray:
    return np.concatenate([piece.vertices for pieces in pieces_of(body).values() for piece in pieces])


def outside_mm(piece: ConvexPiece, point: np.ndarray) -> float:
    """Return the greatest signed distance of a point to a face's plane: not above 0 inside."""
    corner = piece.vertices[piece.faces]
    normal = np.cross(corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0])
    length = np.linalg.norm(normal, axis=1)
    flat = length > 1e-9
    return float((((point - corner[:, 0])[flat] * normal[flat]).sum(axis=1) / length[flat]).max())


@pytest.mark.parametrize(("left", "right", "legs"), list(itertools.product(ARMS, ARMS, ("together", "apart"))))
def test_every_posture_is_a_body(left: str, right: str, legs: str) -> None:
    body = Body(1700.0, arm_left=left, arm_right=right, legs=legs)  # type: ignore[arg-type]
    parts = pieces_of(body)
    assert set(parts) == {"head and neck", "trunk", "pelvis", "left arm", "right arm", "left leg", "right leg"}
    assert 35 <= sum(len(pieces) for pieces in parts.values()) <= 75
    points = points_of(body)
    assert points[:, 2].min() >= -1700.0 - 1.0
    assert points[:, 2].min() <= -1700.0 + 1.0
    highest = points[:, 2].max()
    if "above the head" in (left, right):
        assert 50.0 < highest < 700.0
    else:
        assert highest == pytest.approx(0.0, abs=1.0)


@pytest.mark.parametrize("body", BODIES)
def test_the_envelope_is_at_least_as_wide_and_deep_as_its_sizes(body: Body) -> None:
    sizes = sizes_of(body.stature_mm, body.mass_kg, body.build, body.sizes)
    parts = pieces_of(body)

    def extent(names: tuple[str, ...], axis: int) -> float:
        points = np.concatenate([piece.vertices for name in names for piece in parts[name]])
        return float(np.ptp(points[:, axis]))

    assert extent(("head and neck",), 0) >= sizes["head_breadth_mm"]
    assert extent(("head and neck",), 1) >= sizes["head_length_mm"]
    assert extent(("trunk",), 0) >= max(sizes["chest_breadth_mm"], sizes["waist_breadth_mm"])
    assert extent(("trunk",), 1) >= max(sizes["chest_depth_mm"], sizes["waist_depth_mm"])
    assert extent(("pelvis",), 0) >= sizes["hip_breadth_mm"]
    assert extent(("left arm", "right arm"), 0) >= sizes["bideltoid_breadth_mm"]
    assert extent(("left arm", "right arm"), 0) >= 0.97 * sizes["forearm_forearm_breadth_mm"]


def test_neighbours_meet_so_that_no_joint_gapes() -> None:
    parts = pieces_of(Body(1700.0))
    for one, other in (
        ("head and neck", "trunk"),
        ("trunk", "pelvis"),
        ("trunk", "left arm"),
        ("pelvis", "left leg"),
        ("pelvis", "right leg"),
    ):
        shared = [
            piece
            for piece in parts[one]
            for neighbour in parts[other]
            if min(outside_mm(piece, point) for point in neighbour.vertices) <= 1e-6
            or min(outside_mm(neighbour, point) for point in piece.vertices) <= 1e-6
        ]
        assert shared, (one, other)


@pytest.mark.parametrize("body", [*BODIES, Body(1650.0, slope_deg=15.0)])
def test_landmarks_lie_on_the_skin_in_anatomical_order(body: Body) -> None:
    landmarks = body_landmarks(body)
    assert tuple(landmarks) == ORDER
    heights = [landmarks[name][2] for name in ORDER]  # type: ignore[index]
    assert heights == sorted(heights, reverse=True)
    pieces = [piece for of_part in pieces_of(body).values() for piece in of_part]
    for name, point in landmarks.items():
        assert point[0] == 0.0
        # Inside no piece by more than 1 mm, and within 1 mm of one. A raised trunk folds over the symphysis a little.
        fold = 5.0 if name == "symphysis" and body.slope_deg > 0.0 else 1.0
        assert -fold <= min(outside_mm(piece, point) for piece in pieces) <= 1.0, name


def test_a_supine_body_lies_on_its_back_and_a_prone_one_on_its_front() -> None:
    supine, prone = points_of(Body(1700.0)), points_of(Body(1700.0, prone=True))
    assert supine[:, 1].max() == pytest.approx(0.0, abs=1.0)
    trunk = np.concatenate([piece.vertices for piece in pieces_of(Body(1700.0, prone=True))["trunk"]])
    assert prone[:, 1].min() == pytest.approx(trunk[:, 1].min(), abs=25.0)
    # Toes point to the ceiling, or stretch away.
    assert supine[supine[:, 2] < -1600.0][:, 1].min() < -200.0
    assert prone[:, 2].min() < -1720.0


def test_a_slope_raises_the_head_and_leaves_the_legs() -> None:
    flat, raised = Body(1650.0), Body(1650.0, slope_deg=12.0)
    lift = body_landmarks(flat)["vertex"] - body_landmarks(raised)["vertex"]
    # The head is about 0.77 m from the hips: 0.77 * sin 12 deg.
    assert lift[1] == pytest.approx(160.0, abs=25.0)
    assert np.allclose(body_landmarks(flat)["symphysis"], body_landmarks(raised)["symphysis"])


def test_left_and_right_mirror_each_other() -> None:
    points = points_of(Body(1700.0))
    assert points[:, 0].max() == pytest.approx(-points[:, 0].min(), abs=1.0)


def test_a_measured_size_replaces_the_mean() -> None:
    body = Body(1700.0, sizes=(("chest_depth_mm", 400.0),))
    trunk = np.concatenate([piece.vertices for piece in pieces_of(body)["trunk"]])
    assert 400.0 <= np.ptp(trunk[:, 1]) <= 401.5


@pytest.mark.parametrize(
    ("keys", "words"),
    [
        ({"stature_mm": 300.0}, "stature_mm"),
        ({"stature_mm": float("nan")}, "stature_mm"),
        ({"stature_mm": 1700.0, "mass_kg": 900.0}, "mass_kg"),
        ({"stature_mm": 1700.0, "sizes": (("chest_dept_mm", 300.0),)}, "chest_depth_mm"),
        ({"stature_mm": 1700.0, "sizes": (("chest_depth_mm", 5000.0),)}, "chest_depth_mm"),
        ({"stature_mm": 1700.0, "slope_deg": 60.0}, "slope_deg"),
        ({"stature_mm": 1700.0, "arm_left": "over the head"}, "arm_left"),
        ({"stature_mm": 1700.0, "legs": "crossed"}, "legs"),
        ({"stature_mm": 1700.0, "build": "child"}, "build"),
        ({"stature_mm": 1700.0, "slope_deg": 10.0, "prone": True}, "prone"),
    ],
)
def test_what_is_out_of_range_is_refused_by_name(keys: dict[str, object], words: str) -> None:
    with pytest.raises(GeometryError, match=words):
        Body(**keys)  # type: ignore[arg-type]


@settings(max_examples=20)
@given(
    stature_mm=st.floats(700.0, 2300.0),
    mass_kg=st.one_of(st.none(), st.floats(5.0, 300.0)),
    left=st.sampled_from(ARMS),
    prone=st.booleans(),
)
def test_any_stature_and_mass_make_solids(stature_mm: float, mass_kg: float | None, left: str, prone: bool) -> None:
    body = Body(stature_mm, mass_kg, arm_left=left, prone=prone)  # type: ignore[arg-type]
    points = points_of(body)
    assert np.isfinite(points).all()
    assert np.ptp(points[:, 2]) >= stature_mm - 1.0


def test_sizes_have_ranges_that_hold_their_means() -> None:
    for name, size in SIZES.items():
        assert size.low < min(size.man, size.woman), name
        assert size.high > max(size.man, size.woman), name
