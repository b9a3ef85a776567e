"""Scenes that differ by shifts, and maps that must be the same.

`NUMBA_DISABLE_JIT=1 python -m tests.geometry.carried_cases` prints `small_maps` as JSON, by the very same kernels
uncompiled, and what comes of queries that do not get far or anywhere.
"""

import json
import sys
from dataclasses import replace

import numba
import numpy as np
from numpy.typing import NDArray

from geometry import kernel
from geometry.carried import anchor_of, carried_map
from geometry.scene import build_scene
from geometry.setup import Setup
from geometry.sweep import ClearanceMap, sweep
from tests.reference.distances import TOLERANCE_MM
from tests.reference.rooms import random_setup

Array = NDArray[np.float64]

SMALL_GRID = np.array([-90.0, -60.0, 30.0, 31.0, 32.0]), np.array([-20.0, -19.0, 0.0])


def with_isocentre_off(setup: Setup, by_mm: Array) -> Setup:
    """Return the set-up with its isocentre elsewhere in the patient by `by_mm` (3,): the couch parts shift as much."""
    isocentre = setup.isocentre
    if isocentre.landmark is None:
        assert isocentre.dicom_mm is not None
        return replace(setup, isocentre=replace(isocentre, dicom_mm=_moved(isocentre.dicom_mm, by_mm)))
    return replace(setup, isocentre=replace(isocentre, offset_mm=_moved(isocentre.offset_mm, by_mm)))


def with_patient_off(setup: Setup, by_mm: Array) -> Setup:
    """Return the set-up with its patient elsewhere on the table by `by_mm` (3,): the table shifts, the patient not."""
    where = setup.on_table
    along, across, up = (float(x) for x in by_mm)
    return replace(
        setup,
        on_table=replace(
            where,
            from_head_end_mm=where.from_head_end_mm + along,
            lateral_mm=where.lateral_mm + across,
            height_mm=where.height_mm + abs(up),
        ),
    )


def _moved(point: tuple[float, float, float], by_mm: Array) -> tuple[float, float, float]:
    x, y, z = np.array(point) + by_mm
    return float(x), float(y), float(z)


def random_shift(rng: np.random.Generator, length_mm: float) -> Array:
    """Return a vector of that length in any direction."""
    direction = rng.normal(size=3)
    return length_mm * direction / np.linalg.norm(direction)


def worst_difference_mm(found: ClearanceMap, expected: ClearanceMap) -> float:
    """Return by how much the distances of two maps differ at most; infinite where one has a number or contact alone."""
    for name in ("clearance_mm", "slack_mm"):
        if not np.array_equal(np.isnan(getattr(found, name)), np.isnan(getattr(expected, name))):
            return float("inf")
    if not np.array_equal(found.clearance_mm == 0.0, expected.clearance_mm == 0.0):
        return float("inf")
    known = ~np.isnan(expected.clearance_mm)
    return max(
        float(np.abs(found.clearance_mm - expected.clearance_mm)[known].max(initial=0.0)),
        float(np.abs(found.slack_mm - expected.slack_mm)[known].max(initial=0.0)),
    )


def assert_same(found: ClearanceMap | None, expected: ClearanceMap, *, ties: bool = False) -> None:
    """Hold a map against what the sweep finds; where two pairs are as near, either may be named.

    `ties` tells that this is the rule rather than the exception.
    """
    assert found is not None
    assert found.scene is expected.scene
    assert worst_difference_mm(found, expected) <= TOLERANCE_MM
    known = ~np.isnan(expected.clearance_mm)
    assert np.array_equal(found.machine_part >= 0, known)
    assert np.array_equal(found.couch_part >= 0, known)
    between = np.linalg.norm(found.machine_point_mm - found.couch_point_mm, axis=-1)
    assert np.abs(between - expected.clearance_mm)[known].max(initial=0.0) <= TOLERANCE_MM
    # Apart, the nearest parts are those of the sweep wherever they are but one pair.
    clear = known & (expected.clearance_mm > 0.0)
    same = (found.machine_part == expected.machine_part) & (found.couch_part == expected.couch_part)
    assert ties or np.count_nonzero(same & clear) >= 0.98 * np.count_nonzero(clear)


def small_maps() -> dict[str, list[float]]:
    """Return a carried map of a small room, and the sweep's of the same."""
    rng = np.random.default_rng(12)
    setup = random_setup(rng, most_parts=1)
    anchor = anchor_of(sweep(build_scene(setup), *SMALL_GRID, threads=1), threads=1)
    scene = build_scene(with_isocentre_off(setup, random_shift(rng, 15.0)))
    swept, carried = sweep(scene, *SMALL_GRID, threads=1), carried_map(anchor, scene, threads=1)
    assert carried is not None
    return {
        "swept": [*swept.clearance_mm.ravel().tolist(), *swept.slack_mm.ravel().tolist()],
        "carried": [*carried.clearance_mm.ravel().tolist(), *carried.slack_mm.ravel().tolist()],
    }


def from_a_hasty_anchor(seed: int) -> float:
    """Return by how much a carried map is off whose anchor knows little: its queries gave up after three steps, mm."""
    rng = np.random.default_rng(seed)
    setup = random_setup(rng, most_parts=1)
    exact = sweep(build_scene(setup), *SMALL_GRID, threads=1)
    sound = anchor_of(exact, threads=1)
    steps, kernel.STEPS = kernel.STEPS, 3
    anchor = replace(sound, turning=anchor_of(exact, threads=1).turning)
    kernel.STEPS = steps
    scene = build_scene(with_isocentre_off(setup, random_shift(rng, 19.0)))
    found = carried_map(anchor, scene, threads=1)
    return np.inf if found is None else worst_difference_mm(found, sweep(scene, *SMALL_GRID, threads=1))


def without_convergence() -> dict[str, bool]:
    """Tell whether a carried map knows nothing where no query gets anywhere, with an anchor that is sound or not."""
    rng = np.random.default_rng(12)
    setup = random_setup(rng, most_parts=1)
    scene = build_scene(setup)
    exact = sweep(scene, *SMALL_GRID, threads=1)
    sound = anchor_of(exact, threads=1)
    kernel.STEPS = 0
    unsound = anchor_of(sweep(scene, *SMALL_GRID, threads=1), threads=1)
    maps = {"sound": carried_map(sound, scene, threads=1), "unsound": carried_map(unsound, scene, threads=1)}
    return {
        name: found is not None and bool(np.isnan([found.clearance_mm, found.slack_mm]).all())
        for name, found in maps.items()
    }


def main() -> int:
    """Print what the uncompiled kernels find."""
    if not numba.config.DISABLE_JIT:
        raise SystemExit("set NUMBA_DISABLE_JIT=1: compiled kernels cannot be changed")
    hasty = [from_a_hasty_anchor(seed) for seed in (12, 16, 21)]
    print(json.dumps({**small_maps(), "hasty": hasty, "unknown": without_convergence()}))
    return 0


if __name__ == "__main__":
    sys.exit(main())
