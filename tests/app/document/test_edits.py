import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from app.document.device_edits import (
    add_box,
    device_position_mm,
    move_device,
    position_field,
    remove_device,
    shift_device,
)
from app.document.document import Document, open_document
from app.document.edits import (
    FIELDS,
    add_component,
    arm_place,
    change_component,
    component_field,
    field_named,
    fit,
    in_turn,
    remove_component,
    set_arm,
    set_value,
    slide_field,
)
from app.document.fields import ChoiceField, Edit, NumberField, TextField
from app.document.setup_fields import IN_DICOM
from app.files.setup_file import read_setup
from geometry.body import Body
from geometry.errors import BadInput, GeometryError
from geometry.scene import build_scene
from geometry.setup import Isocentre, Surface
from geometry.solids import Box
from tests.app.files.documents import ROOM_TEXT, SETUP_TEXT, changed, setup_document, written

BREAST = Path("sample_rooms/c_arm_close/breast.setup.toml")
SNOUT = Path("sample_rooms/particle_snout/head.setup.toml")


@pytest.fixture(scope="module")
def breast() -> Document:
    return open_document(BREAST)


@pytest.fixture(scope="module")
def snout() -> Document:
    return open_document(SNOUT)


@pytest.fixture
def small(tmp_path: Path) -> Document:
    written(tmp_path / "test.room.toml", ROOM_TEXT)
    return open_document(written(tmp_path / "a.setup.toml", SETUP_TEXT))


@pytest.fixture
def imported(breast: Document) -> Document:
    surface = Surface(
        Box((400.0, 250.0, 900.0)), "closed surface mesh", (("xiphoid", (1.0, -125.0, 30.0)),), (10.0, 20.0, 30.0)
    )
    setup = replace(breast.setup, patient=surface, isocentre=Isocentre(None, dicom_mm=(10.0, 20.0, 30.0)))
    return replace(breast, setup=setup, source=replace(breast.source, setup=setup))


# The table of fields


def test_every_field_has_its_own_key_and_says_what_it_is() -> None:
    keys = [field.key for field in FIELDS]
    assert len(set(keys)) == len(keys)
    assert all(field.label and field.help.endswith(".") for field in FIELDS)
    with pytest.raises(KeyError):
        field_named("table.colour")


def test_a_number_given_back_changes_nothing(breast: Document) -> None:
    told = 0
    for field in FIELDS:
        if field.key.startswith("isocentre.dicom"):
            continue
        assert set_value(field.key, field.read(breast))(breast) == breast
        told += 1
    assert told > 30


def test_each_number_takes_the_ends_of_its_range_and_nothing_beyond(breast: Document) -> None:
    breast = set_value("patient.mass_kg", None)(breast)
    for field in FIELDS:
        if not isinstance(field, NumberField) or field.key.startswith(("isocentre.dicom", "patient.mass")):
            continue
        for value in (field.limits.low, field.limits.high):
            assert field.read(field.changed(breast, value)) == value, field.key
        for value in (field.limits.low - 1.0, field.limits.high + 1.0, math.nan, math.inf):
            with pytest.raises(GeometryError, match=r"; allowed: .* to ") as caught:
                field.changed(breast, value)
            assert field.title in str(caught.value)
            assert field.allowed in str(caught.value)


# The readers of files are the judges: whatever a range here allows, they take, and they refuse what lies beyond.
@pytest.mark.parametrize(
    ("key", "place"),
    [
        ("table.from_head_end_mm", ("table", "from_head_end_mm")),
        ("table.lateral_mm", ("table", "lateral_mm")),
        ("table.height_mm", ("table", "height_mm")),
        ("isocentre.left_mm", ("isocentre", "left_mm")),
        ("isocentre.head_mm", ("isocentre", "head_mm")),
        ("isocentre.front_mm", ("isocentre", "front_mm")),
        ("couch.pitch_deg", ("couch", "pitch_deg")),
        ("couch.roll_deg", ("couch", "roll_deg")),
        ("couch.eccentric_deg", ("couch", "eccentric_deg")),
        ("fitted.collimator_deg", ("fitted", "collimator_deg")),
        ("patient.stature_mm", ("patient", "stature_mm")),
        ("patient.mass_kg", ("patient", "mass_kg")),
        ("patient.sizes.chest_depth_mm", ("patient", "sizes", "chest_depth_mm")),
        ("required.fixed_mm", ("required", "fixed_mm")),
        ("required.k", ("required", "k")),
        ("required.component", ("required", "component", 0, "sd_mm")),
        ("device", ("device", 0, "at_mm")),
    ],
)
def test_ranges_are_those_of_the_file_reader(tmp_path: Path, key: str, place: tuple[str | int, ...]) -> None:
    written(tmp_path / "test.room.toml", ROOM_TEXT)
    if key == "required.component":
        limits = component_field(0).limits
    elif key == "device":
        limits = position_field("mask frame", 0).limits
    else:
        field = field_named(key)
        assert isinstance(field, NumberField)
        limits = field.limits

    # Stature and mass have to go together.
    document = changed(setup_document(), ("patient", "mass_kg"), None)
    statures = {limits.low: 750.0, limits.high: 2100.0} if key == "patient.mass_kg" else {}

    def read(value: float) -> None:
        shown = [value, 0.0, 0.0] if key == "device" else value
        with_stature = changed(document, ("patient", "stature_mm"), statures.get(value, 1756.0))
        read_setup(written(tmp_path / "a.setup.toml", changed(with_stature, place, shown)))

    read(limits.low)
    read(limits.high)
    for beyond in (limits.low - 0.5, limits.high + 0.5):
        with pytest.raises(BadInput):
            read(beyond)


def test_the_slope_is_that_of_the_file_reader(tmp_path: Path) -> None:
    written(tmp_path / "test.room.toml", ROOM_TEXT)
    on_back = changed(setup_document(), ("patient", "position"), "HFS")
    for value in (0.0, 45.0):
        read_setup(written(tmp_path / "a.setup.toml", changed(on_back, ("patient", "slope_deg"), value)))
    field = field_named("patient.slope_deg")
    assert isinstance(field, NumberField)
    assert (field.limits.low, field.limits.high) == (0.0, 45.0)
    with pytest.raises(BadInput):
        read_setup(written(tmp_path / "a.setup.toml", changed(on_back, ("patient", "slope_deg"), 45.5)))


def test_an_empty_number_is_for_those_that_may_be_empty(breast: Document) -> None:
    assert set_value("patient.mass_kg", None)(breast).setup.patient == replace(breast.setup.patient, mass_kg=None)
    turned = set_value("fitted.collimator_deg", 20.0)(breast)
    assert set_value("fitted.collimator_deg", None)(turned).setup == breast.setup
    with pytest.raises(GeometryError, match=r"table, height = nothing; allowed: -500 to 1000 mm"):
        set_value("table.height_mm", None)(breast)


def test_words_and_texts_are_checked(breast: Document) -> None:
    assert set_value("patient.arm_left", "on the chest")(breast).setup.patient != breast.setup.patient
    with pytest.raises(GeometryError, match=r"body, left arm = 'up'; allowed: 'at the side'"):
        set_value("patient.arm_left", "up")(breast)
    assert set_value("name", "  A name ")(breast).setup.name == "A name"
    with pytest.raises(GeometryError, match=r"name = .*allowed: 1 to 200 characters"):
        set_value("name", " ")(breast)
    assert set_value("notes", "")(breast).setup.notes == ""
    with pytest.raises(GeometryError, match="required clearance, reason"):
        set_value("required.reason", "two\nlines")(breast)


def test_titles_are_those_of_the_undo_list() -> None:
    assert field_named("isocentre.head_mm").title == "isocentre, to the head"
    assert field_named("name").title == "name"


# The patient


def test_mass_and_stature_have_to_go_together(breast: Document) -> None:
    with pytest.raises(GeometryError, match="mass_kg = 6 is not allowed at stature_mm = 1640; allowed"):
        set_value("patient.mass_kg", 6.0)(breast)
    assert set_value("patient.mass_kg", 50.0)(breast).setup != breast.setup


def test_the_front_lies_down_with_the_position(breast: Document) -> None:
    flat = set_value("patient.slope_deg", 0.0)(breast)
    prone = set_value("patient.position", "FFP")(flat)
    assert prone.setup.patient_position == "FFP"
    assert isinstance(prone.setup.patient, Body)
    assert prone.setup.patient.prone
    assert build_scene(prone.setup).parts
    assert set_value("patient.position", "HFS")(prone).setup == flat.setup


def test_a_body_on_a_slope_does_not_turn_over_unseen(breast: Document) -> None:
    with pytest.raises(GeometryError, match="slope_deg = 10 of a prone body"):
        set_value("patient.position", "HFP")(breast)


def test_a_body_from_sizes_has_no_side_position(breast: Document) -> None:
    with pytest.raises(GeometryError, match="patient, position = 'HFDL'; allowed: 'HFS'"):
        set_value("patient.position", "HFDL")(breast)


def test_measured_sizes_come_and_go(breast: Document) -> None:
    wide = in_turn(set_value("patient.sizes.hip_breadth_mm", 420.0), set_value("patient.sizes.chest_depth_mm", 280.0))(
        breast
    )
    assert isinstance(wide.setup.patient, Body)
    assert wide.setup.patient.sizes == (("chest_depth_mm", 280.0), ("hip_breadth_mm", 420.0))
    field = field_named("patient.sizes.hip_breadth_mm")
    assert isinstance(field, NumberField)
    assert field.usual is not None
    assert 300.0 < field.usual(wide) < 420.0
    gone = set_value("patient.sizes.hip_breadth_mm", None)(wide)
    assert isinstance(gone.setup.patient, Body)
    assert gone.setup.patient.sizes == (("chest_depth_mm", 280.0),)


def test_an_imported_envelope_has_no_sizes(imported: Document) -> None:
    with pytest.raises(GeometryError, match="imported envelope"):
        set_value("patient.stature_mm", 1700.0)(imported)
    assert set_value("patient.position", "HFDL")(imported).setup.patient_position == "HFDL"


def test_the_position_that_dicom_files_state_stays(imported: Document) -> None:
    fixed = replace(imported, source=replace(imported.source, names_dicom=True))
    with pytest.raises(GeometryError, match="allowed: 'HFS'"):
        set_value("patient.position", "HFP")(fixed)


# The isocentre


def test_dicom_coordinates_are_for_imported_envelopes(breast: Document) -> None:
    field = field_named("isocentre.landmark")
    assert isinstance(field, ChoiceField)
    assert IN_DICOM not in field.options(breast)
    with pytest.raises(GeometryError, match="isocentre, from"):
        set_value("isocentre.landmark", IN_DICOM)(breast)
    with pytest.raises(GeometryError, match="one of the two"):
        set_value("isocentre.dicom_mm[0]", 3.0)(breast)


def test_the_isocentre_stays_put_when_it_is_told_from_elsewhere(imported: Document) -> None:
    before = build_scene(imported.setup).p_isocentre_tabletop
    from_landmark = set_value("isocentre.landmark", "xiphoid")(imported)
    assert from_landmark.setup.isocentre == Isocentre("xiphoid", (9.0, 0.0, -145.0))
    np.testing.assert_allclose(build_scene(from_landmark.setup).p_isocentre_tabletop, before, atol=1e-9)
    assert set_value("isocentre.landmark", IN_DICOM)(from_landmark).setup == imported.setup


def test_the_envelope_knows_the_plans_isocentre_while_it_is_in_use(imported: Document) -> None:
    moved = set_value("isocentre.dicom_mm[2]", 31.0)(imported)
    assert isinstance(moved.setup.patient, Surface)
    assert moved.setup.patient.isocentre_mm is None
    assert set_value("isocentre.dicom_mm[2]", 30.0)(moved).setup == imported.setup


def test_distances_want_a_landmark(imported: Document) -> None:
    with pytest.raises(GeometryError, match="a distance to a landmark"):
        set_value("isocentre.left_mm", 3.0)(imported)


# Accessories and arms


def test_one_accessory_fits_a_slot(breast: Document) -> None:
    fitted = fit("cone")(fit("electron applicator 15")(breast))
    assert fitted.setup.fitted == ("cone",)
    assert fit("cone", fitted=False)(fitted).setup.fitted == ()
    with pytest.raises(GeometryError, match="did you mean 'cone'"):
        fit("cones")(breast)


def test_an_arm_goes_to_its_positions_or_slides(snout: Document) -> None:
    arm = snout.setup.room.arm_named("snout")
    slide = slide_field(arm)
    assert slide.read(snout) == 280.0
    named = set_arm("snout", "half way")(snout)
    assert arm_place(named, arm) == "half way"
    assert slide.read(named) is None
    assert slide.read(slide.changed(named, 100.0)) == 100.0
    assert [name for name, _ in named.setup.arm_positions] == [a.name for a in snout.setup.room.arms]
    with pytest.raises(GeometryError, match=r"arm 'snout' = 'up'; allowed: .*'half way'.* or a slide"):
        set_arm("snout", "up")(snout)
    with pytest.raises(GeometryError, match=r"arm 'X-ray panel' = 12\.0; allowed: 'folded'"):
        set_arm("X-ray panel", 12.0)(snout)
    with pytest.raises(GeometryError, match="arm, snout = 9000 mm; allowed: "):
        slide.changed(snout, 9000.0)


def test_an_arm_that_nobody_moved_is_in_its_first_position(breast: Document, small: Document) -> None:
    assert arm_place(breast, breast.setup.room.arms[0]) == "retracted"
    alone = replace(small, setup=replace(small.setup, arm_positions=()))
    assert arm_place(alone, small.setup.room.arm_named("snout")) == 0.0


# Required clearance


def test_components_are_added_changed_and_removed(breast: Document) -> None:
    count = len(breast.setup.required.components)
    more = add_component("bolus", 1.5, patient_only=True)(breast)
    assert (more.setup.required.components[-1].name, more.setup.required.components[-1].patient_only) == ("bolus", True)
    other = change_component(count, name="wrap", sd_mm=2.5, patient_only=False)(more)
    assert other.setup.required.components[-1] == replace(
        more.setup.required.components[-1], name="wrap", sd_mm=2.5, patient_only=False
    )
    assert remove_component(count)(other).setup == breast.setup


@pytest.mark.parametrize(
    ("edit", "words"),
    [
        (add_component("couch sag", 1.0), "which is taken"),
        (add_component(" ", 1.0), "1 to 200 characters"),
        (add_component("x", 201.0), "standard deviation = 201 mm; allowed: 0 to 200 mm"),
        (change_component(0, name="couch sag"), "which is taken"),
        (change_component(9, sd_mm=1.0), "component 10 of 6; allowed: 1 to 6"),
        (remove_component(-1), "allowed: 1 to 6"),
        (in_turn(*(remove_component(0) for _ in range(6)), set_value("required.fixed_mm", 0.0)), "above 0 mm"),
    ],
)
def test_components_that_cannot_be_are_refused(breast: Document, edit: Edit, words: str) -> None:
    with pytest.raises(GeometryError, match=words):
        edit(breast)


# Devices


def test_devices_are_shifted_to_a_place_or_by_so_much(breast: Document) -> None:
    moved = shift_device("hand grip", (1.0, 0.0, -2.0))(move_device("hand grip", (10.0, 20.0, 30.0))(breast))
    grip = next(device for device in moved.setup.devices if device.name == "hand grip")
    assert device_position_mm(grip) == (11.0, 20.0, 28.0)
    before, after = (
        next(part for part in build_scene(d.setup).parts if part.name == "hand grip") for d in (breast, moved)
    )
    for old, new in zip(before.pieces, after.pieces, strict=True):
        np.testing.assert_allclose(new.vertices - old.vertices, np.tile((11.0, 20.0, 28.0), (len(old.vertices), 1)))
    assert move_device("hand grip", (0.0, 0.0, 0.0))(moved).setup == breast.setup


def test_the_position_of_a_device_is_a_number_a_direction(breast: Document) -> None:
    along = position_field("leg pad", 1)
    assert along.read(breast) == 0.0
    assert along.read(along.changed(breast, -35.0)) == -35.0
    with pytest.raises(GeometryError, match="device leg pad, along = 30000 mm; allowed: -20000 to 20000 mm"):
        along.changed(breast, 30000.0)


def test_devices_come_and_go(breast: Document) -> None:
    more = add_box("wedge", (100.0, 200.0, 50.0), (0.0, -800.0, 25.0))(breast)
    assert more.setup.devices[-1].kind == "device"
    assert device_position_mm(more.setup.devices[-1]) == (0.0, -800.0, 25.0)
    assert remove_device("wedge")(more).setup == breast.setup
    with pytest.raises(GeometryError, match="did you mean 'leg pad'"):
        remove_device("leg pads")(breast)


@pytest.mark.parametrize(
    ("edit", "words"),
    [
        (add_box("table top", (1.0, 1.0, 1.0)), "name of a device = 'table top', which is taken"),
        (add_box("trunk", (1.0, 1.0, 1.0)), "which is taken"),
        (add_box("leg pad", (1.0, 1.0, 1.0)), "which is taken"),
        (add_box("x", (1.0, 0.0, 1.0)), "size y = 0 mm; allowed: above 0, at most 20000 mm"),
        (shift_device("leg pad", (0.0, math.nan, 0.0)), "device 'leg pad' at y = nan mm"),
    ],
)
def test_devices_that_cannot_be_are_refused(breast: Document, edit: Edit, words: str) -> None:
    with pytest.raises(GeometryError, match=words):
        edit(breast)


def test_texts_of_the_table_are_read_back(breast: Document) -> None:
    texts = [field for field in FIELDS if isinstance(field, TextField)]
    assert {field.key for field in texts} == {"name", "notes", "required.reason"}
    for field in texts:
        assert field.read(field.changed(breast, "other words")) == "other words"
