"""The stages of the latest set-up, while set-ups arrive faster than they can be looked through."""

from collections.abc import Iterator
from dataclasses import replace

import pytest
from pytestqt.qtbot import QtBot

from app.files.setup_file import read_setup
from app.jobs import Jobs
from app.live import Stage
from app.window.follower import Follower
from geometry.assess import Options
from geometry.errors import GeometryError
from geometry.setup import Isocentre, Setup
from tests.window_driver import ROOMS, pause, wait_for

OPTIONS = Options(gantry_step_deg=4.0, couch_step_deg=4.0, edge_deg=1.0)


@pytest.fixture
def follower(qtbot: QtBot) -> Iterator[Follower]:  # noqa: ARG001 - there has to be an application
    jobs = Jobs()
    made = Follower(jobs)
    yield made
    jobs.shutdown()


def moved(setup: Setup, left_mm: float) -> Setup:
    _, head, front = setup.isocentre.offset_mm
    return replace(setup, isocentre=replace(setup.isocentre, offset_mm=(left_mm, head, front)))


def test_every_stage_of_the_last_set_up_comes_and_some_of_those_on_the_way(follower: Follower) -> None:
    setup = read_setup(ROOMS / "particle_snout" / "head.setup.toml")
    stages: list[Stage] = []
    follower.staged.connect(stages.append)
    last = setup
    for step in range(40):
        last = moved(setup, 0.5 * step)
        follower.follow(last, OPTIONS)
        pause(0.01)
    wait_for(lambda: bool(stages) and stages[-1].setup is last and stages[-1].assessment is not None, "the proof")
    assert len({stage.setup.isocentre.offset_mm[0] for stage in stages}) > 2
    order = [stage.setup.isocentre.offset_mm[0] for stage in stages]
    assert order == sorted(order), "an older set-up was shown after a newer one"


def test_a_set_up_that_cannot_be_built_is_told_and_the_next_one_is_looked_through(follower: Follower) -> None:
    setup = read_setup(ROOMS / "particle_snout" / "head.setup.toml")
    errors: list[Exception] = []
    stages: list[Stage] = []
    follower.failed.connect(errors.append)
    follower.staged.connect(stages.append)
    follower.follow(replace(setup, isocentre=Isocentre(None)), OPTIONS)
    wait_for(lambda: bool(errors), "the error")
    assert isinstance(errors[0], GeometryError)
    follower.follow(setup, OPTIONS)
    wait_for(lambda: bool(stages) and stages[-1].assessment is not None, "the proof")
