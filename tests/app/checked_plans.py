"""Plans checked against sample set-ups; each report is made once for all tests of a process."""

from functools import cache
from pathlib import Path

from app.files.setup_file import read_setup
from app.plan.check import Choices, check_plan
from app.plan.timeline import timeline_of
from app.plan.timeline_clearance import ClearanceOverTime, clearance_along
from geometry.assess import Options
from geometry.treatment.data import CheckReport, PlanField

FOLDER = Path(__file__).resolve().parents[2] / "sample_rooms"
BREAST = FOLDER / "c_arm_close" / "breast.setup.toml"
PROSTATE = FOLDER / "c_arm_wide" / "prostate.setup.toml"

MIXED_FIELDS = (
    PlanField("Medial tangent", ((50.0, 0.0),)),
    PlanField("Anterior arc", ((330.0, 0.0), (400.0, 0.0)), (10.0, 10.0)),
    PlanField("Setup AP", ((0.0, 0.0),), is_setup=True),
    PlanField("Couch arc", ((30.0, 30.0), (75.0, 30.0))),
    PlanField("Close", ((47.0, 30.0),)),
    PlanField("Boost", ((300.0, 330.0),), applicator="cone 9"),
    PlanField("Behind the stop", ((150.0, 60.0), (190.0, 60.0))),
)
# Back and forth, so that another order is quicker.
ZIGZAG_FIELDS = tuple(PlanField(f"G{angle}", ((float(angle), 0.0),), (0.0,)) for angle in (0, 90, 10, 100))
SHIFTED_FIELDS = (
    PlanField("A", ((20.0, 0.0),), (0.0,), isocentre_mm=(0.0, 0.0, 0.0)),
    PlanField("B", ((20.0, 0.0),), (90.0,), isocentre_mm=(0.0, 0.0, 0.0)),
    PlanField("C", ((20.0, 0.0), (80.0, 20.0)), (90.0,), isocentre_mm=(0.0, 0.0, 30.0)),
)


@cache
def mixed_report() -> CheckReport:
    """Return fields of every state, in a room with its own scales."""
    return check_plan(read_setup(BREAST), MIXED_FIELDS, Options())


@cache
def zigzag_report() -> CheckReport:
    """Return a plan that another order does in less time, all permitted."""
    return check_plan(read_setup(PROSTATE), ZIGZAG_FIELDS, Options())


@cache
def shifted_report() -> CheckReport:
    """Return a plan in which collimator and table move between fields, and an arc turns both axes."""
    return check_plan(read_setup(PROSTATE), SHIFTED_FIELDS, Options())


@cache
def fitted_report() -> CheckReport:
    """Return the mixed plan after somebody said what is fitted for its boost."""
    return check_plan(read_setup(BREAST), MIXED_FIELDS, Options(), Choices({"Boost": ("cone",)}))


@cache
def curve_of(make: str) -> ClearanceOverTime:
    """Return the clearance over the whole of a report of this module, named by its function."""
    return clearance_along(timeline_of(globals()[make]()))
