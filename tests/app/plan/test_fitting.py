"""What is fitted, in words, against a room's accessories and arms."""

from dataclasses import replace

import pytest

from app.plan.fitting import Fitted, Unfit, accessory_named, fitted_from, with_accessory, with_fitted
from geometry.machine import Accessory, Arm, ArmPosition, Room
from geometry.setup import Setup
from tests.geometry.small_rooms import setup_with


@pytest.fixture
def setup() -> Setup:
    plain = setup_with()
    room = replace(
        plain.room,
        accessories=(
            Accessory("electron applicator 15", "tray"),
            Accessory("cone", "tray"),
            Accessory("chair rail"),
            Accessory("Tray-1"),
            Accessory("tray 1"),
        ),
        arms=(
            Arm("kV source", (ArmPosition("parked"), ArmPosition("extended"))),
            Arm("snout", (ArmPosition("back"),), (0.0, 0.0, -1.0), (0.0, 400.0)),
        ),
    )
    return replace(plain, room=room)


@pytest.fixture
def room(setup: Setup) -> Room:
    return setup.room


def test_words_are_matched_but_for_case_spaces_and_signs(room: Room) -> None:
    assert fitted_from(["Electron-Applicator  15"], room) == Fitted(("electron applicator 15",), ())
    assert fitted_from(["kv SOURCE = Extended", "snout=120"], room) == Fitted(
        None, (("kV source", "extended"), ("snout", 120.0))
    )
    assert fitted_from(["none"], room) == Fitted((), ())
    assert fitted_from(["chair rail", "cone"], room) == Fitted(("cone", "chair rail"), ())


def test_what_is_not_one_accessory_is_none(room: Room) -> None:
    assert accessory_named("applicator 15", room) is None
    assert accessory_named("TRAY 1", room) is None  # two of them
    assert accessory_named("CONE", room) == "cone"


@pytest.mark.parametrize(
    ("words", "found"),
    [
        (["conee"], "conee"),
        (["tray1"], "tray1"),
        (["kV source=out"], "kV source=out"),
        (["kV panel=extended"], "kV panel"),
        (["snout=401"], "snout=401"),
        (["snout=nan"], "snout=nan"),
        (["snout=1_0"], "snout=1_0"),
        (["snout=10", "snout=20"], "'snout' at 10 mm and at 20 mm"),
        (["kV source=parked", "KV source=extended"], "'kV source' at 'parked' and at 'extended'"),
        (["cone", "electron applicator 15"], "slot 'tray'"),
        (["none", "cone"], "none"),
    ],
)
def test_what_is_not_there_is_refused(words: list[str], found: str, room: Room) -> None:
    with pytest.raises(Unfit) as caught:
        fitted_from(words, room)
    assert found in caught.value.found
    assert caught.value.allowed


def test_accessories_are_replaced_and_arms_stay_unless_named(setup: Setup) -> None:
    given = replace(setup, fitted=("cone",), arm_positions=(("snout", 10.0),))
    assert with_fitted(given, Fitted(None, (("kV source", "extended"),))).arm_positions == (
        ("kV source", "extended"),
        ("snout", 10.0),
    )
    assert with_fitted(given, Fitted(None, ())).fitted == ("cone",)
    assert with_fitted(given, Fitted((), ())).fitted == ()


def test_an_accessory_takes_the_place_of_the_one_in_its_slot(setup: Setup) -> None:
    given = replace(setup, fitted=("cone", "chair rail"))
    assert with_accessory(given, "electron applicator 15").fitted == ("electron applicator 15", "chair rail")
    assert with_accessory(given, "Tray-1").fitted == ("cone", "chair rail", "Tray-1")


def test_the_same_place_twice_is_one(room: Room) -> None:
    assert fitted_from(["snout=10", "snout=10.0"], room).arms == (("snout", 10.0),)


def test_a_room_without_any_says_so(room: Room) -> None:
    bare = replace(room, accessories=(), arms=())
    for words, allowed in (("cone", "none: the room has no accessories"), ("arm=out", "none: the room has no arms")):
        with pytest.raises(Unfit) as caught:
            fitted_from([words], bare)
        assert caught.value.allowed == allowed
