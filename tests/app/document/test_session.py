from pathlib import Path

import pytest

from app.document.document import Document, open_document
from app.document.edits import fit, set_value
from app.document.session import Session
from geometry.errors import GeometryError

BOOST = Path("sample_rooms/c_arm_close/electron_boost.setup.toml")


@pytest.fixture
def session() -> Session:
    return Session(open_document(BOOST))


def head_mm(session: Session) -> float:
    return session.document.setup.isocentre.offset_mm[1]


def drag(session: Session, *values: float) -> None:
    for value in values:
        session.apply(set_value("isocentre.head_mm", value), "isocentre, to the head", "isocentre.head_mm")


def test_a_step_can_be_undone_and_done_again(session: Session) -> None:
    assert session.apply(set_value("table.height_mm", 30.0), "table, height")
    assert session.undo_text == "Undo table, height"
    assert session.redo_text == ""
    assert session.undo()
    assert session.document.setup.on_table.height_mm == 0.0
    assert session.redo_text == "Redo table, height"
    assert session.redo()
    assert session.document.setup.on_table.height_mm == 30.0
    assert not session.redo()


def test_a_drag_is_one_step_until_it_ends(session: Session) -> None:
    drag(session, 61.0, 62.0, 63.0)
    session.end_merge()
    drag(session, 64.0)
    assert session.undo()
    assert head_mm(session) == 63.0
    assert session.undo()
    assert head_mm(session) == 60.0
    assert not session.undo()


def test_another_edit_in_between_ends_a_drag(session: Session) -> None:
    drag(session, 61.0)
    session.apply(set_value("table.height_mm", 5.0), "table, height", "table.height_mm")
    drag(session, 62.0)
    session.undo()
    assert head_mm(session) == 61.0


def test_a_drag_back_to_where_it_began_is_no_step(session: Session) -> None:
    drag(session, 61.0, 60.0)
    session.end_merge()
    assert session.undo_text == ""
    assert not session.dirty


def test_an_edit_that_changes_nothing_is_no_step(session: Session) -> None:
    assert not session.apply(set_value("isocentre.head_mm", 60.0), "isocentre, to the head")
    assert session.undo_text == ""


def test_a_refused_edit_leaves_everything_as_it_was(session: Session) -> None:
    drag(session, 61.0)
    before = session.document
    with pytest.raises(GeometryError, match="allowed: -500 to 1000 mm"):
        session.apply(set_value("table.height_mm", 5000.0), "table, height")
    assert session.document is before
    assert session.undo_text == "Undo isocentre, to the head"


def test_a_new_step_forgets_what_was_taken_back(session: Session) -> None:
    drag(session, 61.0)
    session.undo()
    session.apply(set_value("name", "Another"), "name")
    assert session.redo_text == ""
    assert not session.redo()


def test_dirty_is_against_what_is_saved(session: Session) -> None:
    assert not session.dirty
    session.apply(fit("cone"), "accessory cone")
    assert session.dirty
    session.mark_saved(session.document)
    assert not session.dirty
    session.undo()
    assert session.dirty
    session.redo()
    assert not session.dirty


def test_how_a_set_up_is_looked_at_is_not_saved_but_undone(session: Session) -> None:
    session.apply(set_value("options.edge_deg", 0.5), "readout, edge")
    assert not session.dirty
    session.undo()
    assert session.document.options.edge_deg == 0.25


def test_a_recovered_document_is_dirty() -> None:
    assert Session(open_document(BOOST), saved=False).dirty


def test_undo_across_a_save_keeps_the_new_file(session: Session, tmp_path: Path) -> None:
    drag(session, 61.0)
    saved = Document(session.document.setup, tmp_path / "b.setup.toml", session.document.source, stamp="s")
    session.mark_saved(saved)
    session.undo()
    assert session.document.path == tmp_path / "b.setup.toml"
    assert session.document.stamp == "s"
    assert head_mm(session) == 60.0


def test_what_is_edited_while_the_file_is_written_stays_unsaved(session: Session, tmp_path: Path) -> None:
    handed = session.document
    drag(session, 61.0)
    session.mark_saved(Document(handed.setup, tmp_path / "b.setup.toml", handed.source, stamp="s"), of=handed)
    assert head_mm(session) == 61.0
    assert session.document.path == tmp_path / "b.setup.toml"
    assert session.dirty


def test_listeners_hear_of_changes_until_they_stop(session: Session) -> None:
    heard: list[float] = []
    stop = session.listen(lambda: heard.append(head_mm(session)))
    drag(session, 61.0, 62.0)
    session.undo()
    stop()
    stop()
    session.redo()
    assert heard == [61.0, 62.0, 60.0]


def test_another_document_has_no_past(session: Session) -> None:
    drag(session, 61.0)
    session.replace_document(open_document(BOOST))
    assert session.undo_text == ""
    assert not session.dirty
    assert head_mm(session) == 60.0
