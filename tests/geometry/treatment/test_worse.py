"""Two reports on one plan as one: the worse, field by field and move by move."""

from dataclasses import replace

import pytest

from geometry.states import State
from geometry.treatment.check import Planned, check_fields
from geometry.treatment.worse import told_as, worse_of
from tests.geometry.small_rooms import moved_isocentre, post, setup_with
from tests.geometry.treatment.test_check import OPTIONS, check, field, states


def test_the_worse_of_two_reports_is_told_field_by_field() -> None:
    setup, blocked = setup_with(), setup_with([post("post", 60.0, 500.0)])
    fields = [field("one", (0.0, 0.0)), field("two", (60.0, 0.0))]
    free, tight = told_as(check(setup, *fields), "one"), told_as(check(blocked, *fields), "other")
    for found in (worse_of(free, tight), worse_of(tight, free)):
        assert states(found.fields) == [State.PERMITTED, State.CONTACT]
        assert states(found.moves) == [State.CONTACT]
        assert found.better is None
        # The post is the room's: the state of table, patient and devices is the same in both.
        assert [one.table_as for one in (*found.fields, *found.moves)] == ["", "", ""]


def test_the_worse_of_two_tables_says_of_which_it_is() -> None:
    setup = setup_with()
    raised = moved_isocentre(setup, (0.0, 395.0, 0.0))
    fields = [field("top", (0.0, 0.0)), field("below", (180.0, 0.0)), field("left", (150.0, 0.0))]
    low = told_as(check(setup, *fields), "low")
    high = check_fields(setup, [Planned(one, raised) for one in fields[:2]] + [Planned(fields[2], setup)], OPTIONS)
    found = worse_of(low, told_as(high, "high"))
    assert states(found.fields)[:2] == [State.SHORT, State.PERMITTED]
    assert found.fields[0].table_as == "high"
    assert [one.table_settled for one in found.fields] == [False, False, True]
    assert found.fields[2].table_as == ""
    assert found.moves[0].table_as == "high"
    assert found.moves[0].state is not State.PERMITTED


def test_reports_over_different_turns_are_not_compared_and_can_be_held_to_the_same() -> None:
    setup = setup_with()
    planned = [Planned(field("there", (178.0, 0.0)), setup), Planned(field("here", (-160.0, 0.0)), setup)]
    free = check(setup, *planned)
    assert [found.points_deg[0][0] for found in free.fields] == [-182.0, -160.0]
    around = replace(free.fields[0], points_deg=((178.0, 0.0),))
    other = replace(free, fields=(around, free.fields[1]))
    with pytest.raises(ValueError, match="different turns"):
        worse_of(free, other)
    held = check_fields(setup, planned, OPTIONS, held=other)
    assert [found.points_deg for found in held.fields] == [found.points_deg for found in other.fields]
    assert held.moves[0].turns == (((178.0, 0.0), (-160.0, 0.0)),)
