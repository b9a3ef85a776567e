from PySide6.QtCore import Qt
from pytestqt.qtbot import QtBot

from app.files.setup_file import read_setup
from app.window.banner import banner_text
from app.window.parts_panel import PartsPanel
from geometry.scene import build_scene
from tests.window_driver import ROOMS


def test_a_click_goes_from_shown_over_see_through_to_hidden(qtbot: QtBot) -> None:
    panel = PartsPanel()
    qtbot.addWidget(panel)
    told: list[dict[str, str]] = []
    panel.visibility_changed.connect(told.append)
    scene = build_scene(read_setup(ROOMS / "cobalt" / "neck.setup.toml"))
    panel.show_scene(scene)
    assert told == [{part.label: "shown" for part in scene.parts}]
    side = panel.tree.topLevelItem(0)
    item = side.child(0)
    label = item.data(0, Qt.ItemDataRole.UserRole)
    words = []
    for _ in range(3):
        panel.tree.itemClicked.emit(item, 0)
        words.append(told[-1][label])
    assert words == ["see-through", "hidden", "shown"]
    panel.tree.itemClicked.emit(side, 0)
    assert {told[-1][part.label] for part in scene.parts if part.side == "gantry"} == {"see-through"}
    panel.show_everything()
    assert set(told[-1].values()) == {"shown"}


def test_parts_stay_as_they_are_drawn_when_others_come(qtbot: QtBot) -> None:
    panel = PartsPanel()
    qtbot.addWidget(panel)
    panel.show_scene(build_scene(read_setup(ROOMS / "c_arm_wide" / "head.setup.toml")))
    panel.tree.itemClicked.emit(panel.tree.topLevelItem(0).child(0), 0)
    before = {label: word for label, word in panel.visibility().items() if word != "shown"}
    panel.show_scene(build_scene(read_setup(ROOMS / "c_arm_wide" / "prostate.setup.toml")))
    assert {label: word for label, word in panel.visibility().items() if word != "shown"} == before


def test_the_banner_tells_what_kind_of_room_it_is() -> None:
    setup = read_setup(ROOMS / "cobalt" / "neck.setup.toml")
    assert "invented room and patient" in banner_text(setup)
