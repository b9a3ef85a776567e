"""The command line from end to end, on a small room of its own."""

import csv
import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from app.cli import BAD_INPUT, DONE, STOPPED, run
from geometry.errors import Cancelled

ROOM = """
format = 1
name = "Test room"
demonstration = true
source_axis_distance_mm = 1000
[gantry]
travel_deg = [-180, 180]
[couch]
[couch.turntable]
travel_deg = [-90, 90]
[couch.lateral]
travel_mm = [-200, 200]
[couch.longitudinal]
travel_mm = [-500, 1200]
[couch.vertical]
travel_mm = [-600, 400]
[[part]]
name = "head"
mount = "gantry"
shape = "box"
size_mm = [600, 600, 300]
at_mm = [0, 0, 560]
[[part]]
name = "table top"
mount = "couch"
shape = "box"
size_mm = [500, 2000, 60]
at_mm = [0, -1000, -30]
"""

SETUP = """
format = 1
name = "Test set-up"
room = "test.room.toml"
demonstration = true
[patient]
position = "HFS"
source = "body"
stature_mm = 1700
[table]
from_head_end_mm = 50
[isocentre]
landmark = "xiphoid"
front_mm = -100
[required]
fixed_mm = 25
reason = "a test"
"""


@pytest.fixture
def setup_path(tmp_path: Path) -> Path:
    (tmp_path / "test.room.toml").write_text(ROOM, encoding="utf-8")
    path = tmp_path / "test.setup.toml"
    path.write_text(SETUP, encoding="utf-8")
    return path


def rows(path: Path) -> list[dict[str, str]]:
    with path.open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def test_map_writes_what_was_asked_for(setup_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    folder = setup_path.parent
    outs = [folder / f"out.{suffix}" for suffix in ("xlsx", "csv", "json", "png", "pdf")]
    grid = folder / "grid.csv"
    coarse = ["--gantry-step", "5", "--couch-step", "10", "--edge", "1"]
    arguments = ["map", str(setup_path), *coarse, "--grid", str(grid)]
    for out in outs:
        arguments += ["--out", str(out)]
    assert run(arguments) == DONE
    printed = capsys.readouterr().out
    for out in (*outs, grid):
        assert out.stat().st_size > 500
        assert f"Wrote {out}" in printed
    assert len(rows(grid)) == 72 * 19  # 180 is reached from both sides and listed once
    assert list(folder.glob(".wideberth-*")) == []


def test_map_and_pose_agree(setup_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    grid = setup_path.parent / "grid.csv"
    assert run(["map", str(setup_path), "--grid", str(grid), "--gantry-step", "30", "--couch-step", "45"]) == DONE
    capsys.readouterr()
    for row in rows(grid):
        assert (
            run(["pose", str(setup_path), "--gantry", row["gantry_deg"], "--couch", row["couch_deg"], "--json"]) == DONE
        )
        pose = json.loads(capsys.readouterr().out)
        assert pose["state"] == row["state"]
        assert pose["clearance_mm"] == pytest.approx(float(row["clearance_mm"]), abs=1e-3)


def test_required_on_the_command_line_replaces_the_setups(setup_path: Path) -> None:
    shares = []
    for required in ("5", "150"):
        out = setup_path.parent / f"{required}.csv"
        assert (
            run(["map", str(setup_path), "--out", str(out), "--edge", "1", "--required", required, "--quiet"]) == DONE
        )
        table = rows(out)
        assert {row["required_mm"] for row in table if row["required_mm"]} <= {required}
        shares.append(sum(float(row["gantry_extent_deg"]) for row in table))
    assert shares[0] > shares[1]


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (("fixed_mm = 25", "fixed_mm = 0"), ("required", "0")),
        (('landmark = "xiphoid"', 'landmrk = "xiphoid"'), ("landmrk", "landmark")),
        (("stature_mm = 1700", "stature_mm = nan"), ("stature_mm",)),
        (("format = 1", "format = 2"), ("format", "2")),
        (('room = "test.room.toml"', 'room = "gone.room.toml"'), ("gone.room.toml",)),
        (("stature_mm = 1700", 'stature_mm = "tall"'), ("stature_mm", "tall")),
    ],
)
def test_bad_input_is_told_and_nothing_is_written(
    setup_path: Path, change: tuple[str, str], words: tuple[str, ...], capsys: pytest.CaptureFixture[str]
) -> None:
    setup_path.write_text(SETUP.replace(*change), encoding="utf-8")
    out = setup_path.parent / "out.csv"
    assert run(["map", str(setup_path), "--out", str(out)]) == BAD_INPUT
    told = capsys.readouterr().err
    assert all(word in told for word in (*words, "allowed"))
    assert "Traceback" not in told
    assert not out.exists()


def test_a_wrong_suffix_is_found_before_anything_is_read(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["map", str(tmp_path / "none.setup.toml"), "--out", str(tmp_path / "out.doc")]) == BAD_INPUT
    told = capsys.readouterr().err
    assert "out.doc" in told
    assert "none.setup.toml" not in told


def test_no_file_to_write_is_a_fault(setup_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["map", str(setup_path)]) == BAD_INPUT
    assert "--out" in capsys.readouterr().err


@pytest.mark.parametrize("number", ["nan", "inf", "-1", "0", "wide"])
def test_a_number_out_of_range_ends_with_2(setup_path: Path, number: str, capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as ended:
        run(["map", str(setup_path), "--out", "x.csv", f"--required={number}"])
    assert ended.value.code == BAD_INPUT
    assert "allowed" in capsys.readouterr().err


def test_beyond_the_travel_is_a_result_and_not_bad_input(setup_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    setup_path.write_text(SETUP.replace("from_head_end_mm = 50", "from_head_end_mm = 1800"), encoding="utf-8")
    out = setup_path.parent / "out.csv"
    assert run(["map", str(setup_path), "--out", str(out), "--edge", "1"]) == DONE
    assert "longitudinal" in capsys.readouterr().out
    assert {row["gantry_extent_deg"] for row in rows(out)} == {"0"}
    assert run(["pose", str(setup_path), "--gantry", "0", "--couch", "0", "--json"]) == DONE
    assert json.loads(capsys.readouterr().out)["state"] == "no travel"


def test_stopped_work_writes_nothing(
    setup_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    def stopped(*_arguments: object) -> None:
        raise Cancelled("stopped on request")

    monkeypatch.setattr("geometry.assess.assess", stopped)
    out = setup_path.parent / "out.csv"
    assert run(["map", str(setup_path), "--out", str(out)]) == STOPPED
    assert "nothing was written" in capsys.readouterr().err
    assert not out.exists()


@pytest.mark.skipif(sys.platform == "win32", reason="a process cannot be sent Ctrl-C alone there")
def test_ctrl_c_leaves_nothing_half_written(setup_path: Path) -> None:
    out = setup_path.parent / "out.json"
    # An edge this fine keeps it busy for long enough.
    command = [sys.executable, "-m", "app", "map", str(setup_path), "--out", str(out), "--edge", "0.05"]
    root = Path(__file__).resolve().parents[2]
    environment = {**os.environ, "PYTHONPATH": str(root)}
    with subprocess.Popen(command, stderr=subprocess.PIPE, stdout=subprocess.PIPE, env=environment) as process:
        time.sleep(2.0)
        process.send_signal(signal.SIGINT)
        _, told = process.communicate(timeout=120)
    assert process.returncode in (STOPPED, -signal.SIGINT)
    assert b"Traceback" not in told
    assert not out.exists()
    assert list(setup_path.parent.glob(".wideberth-*")) == []


def test_help_names_the_commands(capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as ended:
        run(["--help"])
    assert ended.value.code == DONE
    printed = capsys.readouterr().out
    for command in ("open", "map", "pose", "check"):
        assert f"    {command} " in printed


@pytest.mark.parametrize(("arguments", "path"), [([], None), (["open", "a.setup.toml"], Path("a.setup.toml"))])
def test_the_window_opens_without_a_command_and_on_a_set_up(
    monkeypatch: pytest.MonkeyPatch, arguments: list[str], path: Path | None
) -> None:
    opened: list[Path | None] = []
    monkeypatch.setattr("app.window.start.run_window", lambda wanted: opened.append(wanted) or DONE)
    assert run(arguments) == DONE
    assert opened == [path]


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="there is no device that is full")
def test_output_that_cannot_be_written_is_bad_input(setup_path: Path) -> None:
    command = [sys.executable, "-m", "app", "pose", str(setup_path), "--gantry", "0", "--couch", "0", "--json"]
    with Path("/dev/full").open("w", encoding="utf-8") as full:
        ended = subprocess.run(command, stdout=full, stderr=subprocess.PIPE, text=True, check=False, timeout=120)
    assert ended.returncode == BAD_INPUT
    assert "standard output" in ended.stderr
    assert ended.stderr.count("\n") == 1


def test_file_names_reach_a_terminal_without_what_it_would_obey(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    missing = tmp_path / "red\x1b[31m.setup.toml"
    assert run(["pose", str(missing), "--gantry", "0", "--couch", "0"]) == BAD_INPUT
    told = capsys.readouterr().err
    assert "\x1b" not in told
    assert "red\\u001b[31m.setup.toml" in told
