from pathlib import Path

import pytest

from app.document import document as document_module
from app.document.document import new_document, open_document, stamp_of
from app.files.fingerprint import fingerprint
from app.files.setup_file import read_setup
from geometry.errors import BadInput
from geometry.scene import build_scene
from tests.app.files.documents import ROOM_TEXT, SETUP_TEXT, faults_of, written

SETUPS = sorted(Path("sample_rooms").glob("*/*.setup.toml"))
ROOMS = sorted(Path("sample_rooms").glob("*/*.room.toml"))


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    written(tmp_path / "test.room.toml", ROOM_TEXT)
    written(tmp_path / "a.setup.toml", SETUP_TEXT)
    return tmp_path


def test_a_document_holds_what_the_file_says() -> None:
    for path in SETUPS:
        document = open_document(path)
        assert fingerprint(document.setup) == fingerprint(read_setup(path))
        assert document.path == path.absolute()
        assert document.stamp == stamp_of(path.read_bytes())
        assert document.source.encoded(document.source.text) == path.read_bytes()


@pytest.mark.parametrize("start", [b"", b"\xef\xbb\xbf"])
@pytest.mark.parametrize("newline", ["\n", "\r\n"])
def test_byte_order_mark_and_line_ends_are_kept(folder: Path, start: bytes, newline: str) -> None:
    content = start + SETUP_TEXT.replace("\n", newline).encode()
    (folder / "a.setup.toml").write_bytes(content)
    source = open_document(folder / "a.setup.toml").source
    assert "\r" not in source.text
    assert source.encoded(source.text) == content


def test_faults_of_a_file_are_those_of_its_reader(folder: Path) -> None:
    bad = written(folder / "bad.setup.toml", SETUP_TEXT.replace("stature_mm = 1756", "stature_mm = 17"))
    assert faults_of(lambda: open_document(bad)) == faults_of(lambda: read_setup(bad))
    assert faults_of(lambda: open_document(folder / "none.setup.toml"))[0].found == "no such file"


def test_a_file_written_between_two_readings_is_read_again(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = folder / "a.setup.toml"
    calls = []

    def reader(file: Path) -> object:
        setup = read_setup(file)
        if not calls:
            written(file, SETUP_TEXT.replace('name = "Head"', 'name = "Another head"'))
        calls.append(file)
        return setup

    monkeypatch.setattr(document_module, "read_setup", reader)
    document = open_document(path)
    assert document.setup.name == "Another head"
    assert "Another head" in document.source.text
    assert len(calls) == 2


def test_a_file_that_never_stands_still_is_refused(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = folder / "a.setup.toml"

    def reader(file: Path) -> object:
        setup = read_setup(file)
        written(file, file.read_text(encoding="utf-8") + "#\n")
        return setup

    monkeypatch.setattr(document_module, "read_setup", reader)
    assert faults_of(lambda: open_document(path))[0].found == "a file that changes while it is read"


@pytest.mark.parametrize("room", ROOMS, ids=lambda path: path.name)
def test_a_first_set_up_lies_within_every_sample_room(room: Path) -> None:
    document = new_document(room)
    assert document.path is None
    assert document.stamp is None
    assert build_scene(document.setup).no_travel == ()
    assert "to be replaced" in document.setup.required.reason
    assert document.setup.required.of_pair_mm(with_patient=False) > 0.0


@pytest.mark.parametrize(
    ("stage", "travel"),
    [
        ("longitudinal", "[300.5, 900]"),
        ("longitudinal", "[-900, -250]"),
        ("vertical", "[-650, -160]"),
        ("lateral", "[20, 90]"),
    ],
)
def test_a_first_set_up_goes_where_the_couch_can(folder: Path, stage: str, travel: str) -> None:
    lines = [
        f"{stage} = {{ travel_mm = {travel} }}" if line.startswith(f"{stage} =") else line
        for line in ROOM_TEXT.splitlines()
    ]
    room = written(folder / "narrow.room.toml", "\n".join(lines))
    assert build_scene(new_document(room).setup).no_travel == ()


def test_a_first_set_up_that_the_couch_cannot_reach_is_told_not_refused(folder: Path) -> None:
    text = ROOM_TEXT.replace("vertical = { travel_mm = [-650, 400] }", "vertical = { travel_mm = [100, 400] }")
    document = new_document(written(folder / "high.room.toml", text))
    assert "vertical" in build_scene(document.setup).no_travel[0]
    assert document.setup.on_table.height_mm == 0.0


def test_a_first_set_up_takes_the_survey_along(folder: Path) -> None:
    required = new_document(folder / "test.room.toml").setup.required
    assert [(component.name, component.sd_mm) for component in required.components] == [("room model", 3.0)]


def test_a_bad_room_is_refused_with_its_faults(folder: Path) -> None:
    bad = written(folder / "bad.room.toml", ROOM_TEXT.replace("source_axis_distance_mm = 1000", ""))
    with pytest.raises(BadInput, match="source_axis_distance_mm"):
        new_document(bad)


def test_a_document_is_called_by_its_file_or_by_its_set_up(folder: Path) -> None:
    assert open_document(folder / "a.setup.toml").name == "a.setup.toml"
    assert new_document(folder / "test.room.toml").name == "New set-up"
