"""Reports on small plans in small rooms, for what is written of them."""

from dataclasses import replace
from functools import cache

from app.files.provenance import Provenance, provenance_of
from app.plan.check import check_plan
from geometry.machine import Readout
from geometry.setup import Setup
from geometry.treatment.data import CheckReport, PlanField
from tests.app.files.assessments import DAY, OPTIONS, ROOM, SETUP

FIELDS = (
    PlanField("AP", ((0.0, 0.0),), collimator_deg=(0.0,), place="row 2"),
    PlanField("arc", ((300.0, 0.0), (370.0, 0.0)), place="row 3"),
    PlanField("kV pair", ((90.0, 0.0),), is_setup=True, place="row 4"),
    PlanField("couch arc", ((120.0, 0.0), (120.0, 60.0)), place="row 5"),
    PlanField("beyond", ((0.0, 100.0),), place="row 6"),
    PlanField("down", ((181.0, 0.0), (120.0, 0.0)), place="row 7"),
)


@cache
def small_report() -> CheckReport:
    """Return a report on six fields, two of them not permitted; each test leaves it as it is."""
    return check_plan(SETUP, FIELDS, OPTIONS)


@cache
def report_with_scales(count: int = 3) -> CheckReport:
    """Return a report on a permitted plan in a room with scales of its own, its names as long as names can be."""
    room = replace(
        ROOM,
        name="A room whose name goes on " * 4,
        gantry=replace(ROOM.gantry, readout=Readout(180.0, -1)),
        couch=replace(ROOM.couch, turntable=replace(ROOM.couch.turntable, readout=Readout(180.0, 1))),
    )
    setup = replace(SETUP, room=room, name="Set-up $with^ {signs} & a name that goes on " * 3)
    fields = [
        PlanField(f"{'W' * 40} {k}", ((330.0 + k, 0.0), (380.0, 0.0)), collimator_deg=(10.0,)) for k in range(count)
    ]
    return check_plan(setup, fields, OPTIONS)


@cache
def report_on(setup: Setup) -> CheckReport:
    """Return a report on two fields of another set-up."""
    return check_plan(setup, FIELDS[:2], OPTIONS)


def provenance_for(report: CheckReport) -> Provenance:
    """Return the provenance of a report, dated by the tests' day."""
    return provenance_of(report.scene, report.options, DAY)
