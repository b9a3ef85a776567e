"""Jobs on threads: order, parts, errors, cancel, and that nothing is left."""

import threading
import time
from collections.abc import Iterator

import pytest
from pytestqt.qtbot import QtBot

from app.jobs import Job, Jobs, Publish
from geometry.errors import Cancelled
from geometry.progress import Progress


@pytest.fixture
def jobs(qtbot: QtBot) -> Iterator[Jobs]:  # noqa: ARG001 - there has to be an application
    made = Jobs()
    yield made
    made.shutdown()
    assert not [thread for thread in threading.enumerate() if thread.name.startswith("wideberth")]


def test_parts_and_result_come_back_in_order_on_the_gui_thread(jobs: Jobs, qtbot: QtBot) -> None:
    heard: list[tuple[str, object, bool]] = []

    def work(progress: Progress, publish: Publish) -> str:
        assert threading.current_thread() is not threading.main_thread()
        publish(1)
        publish(2)
        progress.report(0.5, "half")
        return "result"

    def hear(kind: str, content: object) -> None:
        heard.append((kind, content, threading.current_thread() is threading.main_thread()))

    jobs.start(Job("lane", work, lambda done: hear("done", done), lambda part: hear("part", part)))
    qtbot.waitUntil(lambda: len(heard) == 3)
    assert heard == [("part", 1, True), ("part", 2, True), ("done", "result", True)]
    assert not jobs.is_busy()


def test_an_error_comes_back_and_the_lane_goes_on(jobs: Jobs, qtbot: QtBot) -> None:
    heard: list[object] = []

    def fail(_progress: Progress, _publish: Publish) -> None:
        raise ValueError("no such thing")

    jobs.start(Job("lane", fail, heard.append, on_error=heard.append))
    jobs.start(Job("lane", lambda _progress, _publish: "next", heard.append))
    qtbot.waitUntil(lambda: len(heard) == 2)
    assert isinstance(heard[0], ValueError)
    assert heard[1] == "next"


def test_a_superseded_job_stops_and_calls_back_no_more(jobs: Jobs, qtbot: QtBot) -> None:
    heard: list[object] = []
    running = threading.Event()

    def endless(progress: Progress, publish: Publish) -> None:
        while not progress.cancelled():
            running.set()
            time.sleep(0.001)
        publish("too late")
        raise Cancelled("stopped")

    jobs.start(Job("lane", endless, heard.append, heard.append, heard.append))
    running.wait(5.0)
    jobs.start_instead(Job("lane", lambda _progress, _publish: "latest", heard.append))
    qtbot.waitUntil(lambda: bool(heard))
    assert heard == ["latest"]


def test_progress_and_the_end_of_a_lane_are_told(jobs: Jobs, qtbot: QtBot) -> None:
    told: list[tuple[str, float, str]] = []
    go_on = threading.Event()
    jobs.progressed.connect(lambda *report: told.append(report))

    def work(progress: Progress, _publish: Publish) -> None:
        progress.report(0.25, "a quarter")
        go_on.wait(5.0)

    jobs.start(Job("lane", work))
    qtbot.waitUntil(lambda: bool(told))
    with qtbot.waitSignal(jobs.finished) as finished:
        go_on.set()
    assert told[0] == ("lane", 0.25, "a quarter")
    assert finished.args == ["lane"]


def test_lanes_run_side_by_side(jobs: Jobs, qtbot: QtBot) -> None:
    meeting = threading.Barrier(2, timeout=5.0)
    done: list[object] = []
    for lane in ("one", "two"):
        jobs.start(Job(lane, lambda _progress, _publish: meeting.wait(), done.append))
    qtbot.waitUntil(lambda: len(done) == 2)
