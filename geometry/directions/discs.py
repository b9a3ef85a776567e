"""Half of the sphere as a flat disc of equal areas, and the discs that a patient's directions are shown on.

Lambert's azimuthal equal-area projection (Snyder, "Map Projections: A Working Manual", USGS 1395, chapter 24), scaled
so that a half sphere fills the unit disc: at the angle t from its centre a direction lies sqrt(2) sin(t/2) from the
middle. One unit of area on the disc is 2 sr.
"""

from dataclasses import dataclass
from enum import StrEnum
from typing import Final

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Vector = tuple[float, float, float]

# Far enough beyond the rim for a line that crosses it; the projection itself ends at the opposite pole.
_BEYOND_RIM: Final = -0.5


@dataclass(frozen=True)
class Hemisphere:
    """The directions around `centre`, as one sees them who stands there and looks to the patient, `up` upwards.

    `centre`, `right` and `up` are unit vectors in DICOM patient axes, at right angles to each other.
    """

    name: str
    centre: Vector
    right: Vector
    up: Vector

    def places(self, directions: Array) -> Array:
        """Return where directions (..., 3) lie, (..., 2): x to the right, y up, the rim at 1.

        Places go on for 30° beyond the rim, so that a line can be cut there; further off they are NaN.
        """
        depth = directions @ np.array(self.centre)
        plane = np.stack([directions @ np.array(self.right), directions @ np.array(self.up)], axis=-1)
        with np.errstate(invalid="ignore", divide="ignore"):
            scale = np.where(depth >= _BEYOND_RIM, 1.0 / np.sqrt(1.0 + depth), np.nan)
        found: Array = plane * scale[..., None]
        return found

    def directions(self, places: Array) -> Array:
        """Return the unit vectors (..., 3), DICOM patient axes, at places (..., 2); NaN beyond the rim."""
        square = np.sum(places**2, axis=-1)
        inside = square <= 1.0 + 1e-12
        depth = np.where(inside, 1.0 - square, np.nan)
        plane = places * np.sqrt(1.0 + depth)[..., None]
        found: Array = (
            plane[..., :1] * np.array(self.right)
            + plane[..., 1:] * np.array(self.up)
            + depth[..., None] * np.array(self.centre)
        )
        return found

    def holds(self, directions: Array) -> NDArray[np.bool_]:
        """Tell which directions (..., 3) lie on this disc, its rim included."""
        held: NDArray[np.bool_] = directions @ np.array(self.centre) >= -1e-12
        return held

    def stepped(self, direction: Array, right_deg: float, up_deg: float) -> Array:
        """Return the direction, (3,), further to the right and up by about so much, as this disc is seen.

        Exact at the centre. Beyond the rim it is as far behind it as the step went beyond, so on the other disc.
        """
        # At the centre one radian is 1 / sqrt(2) of the radius.
        place = self.places(direction) + np.radians([right_deg, up_deg]) / np.sqrt(2.0)
        length = float(np.hypot(place[0], place[1]))
        if length <= 1.0:
            return self.directions(place)
        centre = np.array(self.centre)
        found = self.directions(place / length * max(2.0 - length, 0.0))
        mirrored: Array = found - 2.0 * (found @ centre) * centre
        return mirrored


FRONT: Final = Hemisphere("from the front", (0.0, -1.0, 0.0), (1.0, 0.0, 0.0), (0.0, 0.0, 1.0))
BACK: Final = Hemisphere("from the back", (0.0, 1.0, 0.0), (-1.0, 0.0, 0.0), (0.0, 0.0, 1.0))
HEAD: Final = Hemisphere("from the head", (0.0, 0.0, 1.0), (-1.0, 0.0, 0.0), (0.0, -1.0, 0.0))
FEET: Final = Hemisphere("from the feet", (0.0, 0.0, -1.0), (1.0, 0.0, 0.0), (0.0, -1.0, 0.0))


class Pairing(StrEnum):
    """How the sphere is cut in two."""

    FRONT_AND_BACK = "front and back"
    HEAD_AND_FEET = "head and feet"

    @property
    def hemispheres(self) -> tuple[Hemisphere, Hemisphere]:
        """The two halves; every direction lies on one of them at least."""
        return (FRONT, BACK) if self is Pairing.FRONT_AND_BACK else (HEAD, FEET)


def pixel_places(size: int) -> Array:
    """Return the middles of size x size pixels over a disc, (size, size, 2), the first row on top."""
    across = (np.arange(size) + 0.5) / size * 2.0 - 1.0
    return np.stack(np.broadcast_arrays(across[None, :], -across[:, None]), axis=-1)
