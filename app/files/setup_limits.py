"""What the numbers of a set-up may be, one constant a kind, in the units of the keys that they are for."""

from typing import Final

from app.files.values import Limits

FROM_HEAD_END_MM: Final = Limits(-5000.0, 5000.0)
LATERAL_MM: Final = Limits(-1000.0, 1000.0)
HEIGHT_MM: Final = Limits(-500.0, 1000.0)
OFFSET_MM: Final = Limits(-3000.0, 3000.0)
WHOLE_TURN_DEG: Final = Limits(-360.0, 360.0)
SLOPE_DEG: Final = Limits(0.0, 45.0)
REQUIRED_MM: Final = Limits(0.0, 1000.0)
COVERAGE: Final = Limits(0.0, 10.0)
SD_MM: Final = Limits(0.0, 200.0)
STEP_DEG: Final = Limits(0.05, 45.0)
EDGE_DEG: Final = Limits(0.05, 5.0)
TOLERANCE_DEG: Final = Limits(0.0, 10.0)

MOST_COMPONENTS: Final = 50
BODY_POSITIONS: Final = ("HFS", "HFP", "FFS", "FFP")
