"""The README's commands, which people paste, and which continuous integration runs."""

import re
import shlex
from pathlib import Path

import pytest

from app.files.setup_file import read_setup

ROOT = Path(__file__).parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")


def command(marker: str) -> str:
    """Return the line of the code block that follows a marker."""
    (line,) = re.findall(rf"<!-- {marker} -->\n```\w*\n(.*)\n```\n", README)
    return str(line)


def test_the_test_command_makes_an_environment_and_runs_the_one_check_command() -> None:
    steps = command("test command").split(" && ")
    assert steps[0] == "python3 -m venv .venv"
    assert steps[-1] == ".venv/bin/python -m tests.check"


def test_the_map_command_makes_an_environment_and_names_a_set_up_that_is_there() -> None:
    steps = command("map command").split(" && ")
    assert steps[0] == "python3 -m venv .venv"
    program, subcommand, setup, *_ = shlex.split(steps[-1])
    assert (program, subcommand) == (".venv/bin/wideberth", "map")
    assert (ROOT / setup).is_file()


def test_the_first_room_and_its_set_up_are_read_as_they_stand(tmp_path: Path) -> None:
    room, setup = re.findall(r"```toml\n(.*?)```", README, flags=re.DOTALL)
    (tmp_path / "ours.room.toml").write_text(room, encoding="utf-8")
    (tmp_path / "first.setup.toml").write_text(setup, encoding="utf-8")
    read = read_setup(tmp_path / "first.setup.toml")
    assert [part.name for part in read.room.parts] == ["head", "table top", "floor"]
    assert read.room.survey is None
    assert not read.room.demonstration


@pytest.mark.parametrize("link", sorted(set(re.findall(r"\]\(([^)#:]+)\)", README))))
def test_a_link_leads_to_a_file(link: str) -> None:
    assert (ROOT / link).exists()
