from pathlib import Path

from app.samples import sample_rooms, samples_folder
from tests.window_driver import ROOMS


def test_the_rooms_beside_the_source_are_found_with_all_their_set_ups() -> None:
    folder = samples_folder()
    assert folder == ROOMS
    rooms = sample_rooms(folder)
    assert {room.path for room in rooms} == set(ROOMS.glob("*/*.room.toml"))
    assert {setup.path for room in rooms for setup in room.setups} == set(ROOMS.glob("*/*.setup.toml"))
    assert all(room.name.startswith("Demonstration") and room.notes for room in rooms)


def test_what_cannot_be_read_is_left_out(tmp_path: Path) -> None:
    (tmp_path / "mine").mkdir()
    (tmp_path / "mine" / "a.room.toml").write_text('format = 1\nname = "A"\n')
    (tmp_path / "mine" / "b.room.toml").write_text("format = [")
    (tmp_path / "mine" / "one.setup.toml").write_text('format = 99\nname = "of a later program"\n')
    (room,) = sample_rooms(tmp_path)
    assert (room.name, room.notes, room.setups) == ("A", "", ())
