"""What the window shows of a set-up, in stages: pieces with a map at once, then the exact map, at last the proof."""

import time
from dataclasses import dataclass, replace
from typing import Final

from geometry.assess import Assessment, Options, assess_map, exact_map
from geometry.carried import Anchor, anchor_of, carried_map
from geometry.directions.regions import Share, share_of
from geometry.progress import Progress, Silent, stop_if_cancelled
from geometry.scene import Scene, build_scene
from geometry.scene_shifts import shifts_between
from geometry.setup import Setup
from geometry.sweep import ClearanceMap

# What a coarse map may cost while the user's hand moves, s, and the steps to choose from, deg.
_COARSE_S: Final = (0.03, 0.11)
_STEPS_DEG: Final = (1.0, 2.0, 3.0, 4.0, 6.0)
# The step of maps that follow from one before while the hand moves.
CARRIED_STEP_DEG: Final = 2.0
_CARRIED: Final = Options(gantry_step_deg=CARRIED_STEP_DEG, couch_step_deg=CARRIED_STEP_DEG)


@dataclass(frozen=True, eq=False)
class Stage:
    """How far a set-up is looked through.

    `map` is the finest so far, `is_exact` that on the grid of the options; `is_carried` says that it followed from one
    before. `assessment`, and `share` of the sphere with it, are there once all is proved.
    """

    setup: Setup
    options: Options
    scene: Scene
    map: ClearanceMap | None = None
    is_exact: bool = False
    is_carried: bool = False
    assessment: Assessment | None = None
    share: Share | None = None


class LiveMaps:
    """Maps that are quick enough to follow a hand, and what they need to know of those before.

    A set-up that differs by shifts from one whose maps are known gets its own ones in a fraction of a sweep: one of
    `CARRIED_STEP_DEG` at once, the exact one at rest. Any other gets a coarse map, whose step follows from how long the
    last ones took on this machine. All values are exact at their angles.
    """

    def __init__(self) -> None:
        self.step_deg = 2.0
        self._anchors: tuple[Anchor, Anchor] | None = None
        self._anchor_options: Options | None = None

    def first_stage(self, setup: Setup, options: Options) -> Stage:
        """Return the scene with a map within the blink of an eye. GeometryError."""
        scene = build_scene(setup)
        carried = self._carried(0, scene, options)
        if carried is not None:
            return Stage(setup, options, scene, carried, is_carried=True)
        start = time.monotonic()
        # Not to be cancelled: what follows a hand must show something, however fast the hand moves.
        coarse = exact_map(scene, Options(gantry_step_deg=self.step_deg, couch_step_deg=self.step_deg), Silent())
        self.learn(time.monotonic() - start)
        return Stage(setup, options, scene, coarse)

    def exact_stage(self, first: Stage, progress: Progress) -> Stage:
        """Return the stage with the map on the grid of its options. Raises Cancelled."""
        stop_if_cancelled(progress)
        found = self._carried(1, first.scene, first.options, progress)
        exact = found if found is not None else exact_map(first.scene, first.options, progress)
        return replace(first, map=exact, is_exact=True, is_carried=found is not None)

    def _carried(
        self, which: int, scene: Scene, options: Options, progress: Progress | None = None
    ) -> ClearanceMap | None:
        anchors = self._anchors if self._anchor_options == options else None
        return carried_map(anchors[which], scene, progress) if anchors is not None else None

    def learn(self, seconds: float) -> None:
        """Take the next step up or down where a coarse map took too long, or hardly any time."""
        place = _STEPS_DEG.index(self.step_deg)
        if seconds > _COARSE_S[1]:
            place = min(place + 1, len(_STEPS_DEG) - 1)
        elif seconds < _COARSE_S[0]:
            place = max(place - 1, 0)
        self.step_deg = _STEPS_DEG[place]

    def wants_anchor(self, before: Scene | None, scene: Scene) -> bool:
        """Tell whether the maps to come would gain from an anchor at a scene that follows another by a shift."""
        return before is not None and shifts_between(before, scene) is not None

    def anchor_at(self, exact: ClearanceMap | None, scene: Scene, options: Options, progress: Progress) -> None:
        """Let the maps to come follow from that of a scene, which is made if it is not known. Raises Cancelled."""
        coarse = exact_map(scene, _CARRIED, progress)
        fine = exact_map(scene, options, progress) if exact is None else exact
        self._anchors = anchor_of(coarse, progress), anchor_of(fine, progress)
        self._anchor_options = options


def proved_stage(exact: Stage, progress: Progress) -> Stage:
    """Return the stage with everything proved. Raises Cancelled."""
    if exact.map is None:
        raise ValueError("the exact map comes before the proof")
    assessment = assess_map(exact.map, exact.options, progress)
    # Computed here, on the worker's time; the chart asks for it at once.
    _ = assessment.permitted_region
    return replace(exact, assessment=assessment, share=share_of(assessment))
