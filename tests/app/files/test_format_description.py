"""The description of the file formats agrees with the readers."""

import re
from pathlib import Path

import pytest

from app.files.patient_keys import LANDMARKS
from app.files.room_file import read_room
from app.files.setup_file import read_setup
from geometry.body_sizes import SIZES
from geometry.frames import PATIENT_POSITIONS
from geometry.machine import Stage

DESCRIPTION = Path(__file__).parents[3] / "sample_rooms" / "README.md"


@pytest.fixture(scope="module")
def blocks() -> list[str]:
    """Return the TOML examples: those of the room in order, the set-up's last."""
    return re.findall(r"^```toml\n(.*?)^```$", DESCRIPTION.read_text(encoding="utf-8"), re.MULTILINE | re.DOTALL)


def test_its_examples_make_one_room_and_a_set_up_in_it(blocks: list[str], tmp_path: Path) -> None:
    *room_blocks, setup_block = blocks
    room_path = tmp_path / "c_arm_wide.room.toml"
    room_path.write_text("\n".join(room_blocks), encoding="utf-8")
    room = read_room(room_path)
    assert len(room.parts) == 9
    assert len(room.joined) == 3
    setup_path = tmp_path / "x.setup.toml"
    setup_path.write_text(setup_block, encoding="utf-8")
    setup = read_setup(setup_path)
    assert setup.room.name == room.name
    assert setup.arm_positions == (("kV panel", "parked"), ("snout", 120.0))


def test_it_names_every_word_that_the_readers_know() -> None:
    text = DESCRIPTION.read_text(encoding="utf-8")
    words = [f'"{stage}"' for stage in Stage] + [f'"{landmark}"' for landmark in LANDMARKS]
    words += [f"`{name}`" for name in (*PATIENT_POSITIONS, *SIZES)]
    assert len(words) > 20
    assert [word for word in words if word not in text] == []


def test_it_states_the_range_of_every_size_of_a_body() -> None:
    text = DESCRIPTION.read_text(encoding="utf-8")
    rows = re.findall(r"^\| `(\w+)` \| .* \| (\d+) to (\d+) \|$", text, re.MULTILINE)
    stated = {name: (float(low), float(high)) for name, low, high in rows}
    assert {name: stated.get(name) for name in SIZES} == {name: (size.low, size.high) for name, size in SIZES.items()}
