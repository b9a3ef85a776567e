"""Colours of the window, light and dark, in one place. All "#rrggbb".

Calm greys with a little warmth, ink for what is said, one blue for what can be touched. Nothing is told by colour
alone, and no colour means "go" or "stop".
"""

from dataclasses import dataclass
from typing import Final

from PySide6.QtCore import Qt
from PySide6.QtGui import QColor, QGuiApplication, QPalette


@dataclass(frozen=True)
class Theme:
    """The colours that widgets draw with.

    `window` lies behind everything, `panel` behind controls, `canvas` behind charts and the room; `line` parts them.
    `ink` is for text and drawing, `faint` for what can wait, `accent` for what can be touched or is chosen, with
    `on_accent` for text on it. `marked` is for what needs the eye: contact, a banner's edge. `halo` goes around ink
    that lies on the colours of clearance, whose `permitted` is the outline of permitted angles, `kept` that of a map
    kept to compare with, `required` the contour where the clearance equals what is required. The rest are materials.
    """

    dark: bool
    window: str
    panel: str
    canvas: str
    line: str
    ink: str
    faint: str
    accent: str
    on_accent: str
    marked: str
    halo: str
    permitted: str
    kept: str
    required: str
    gantry: str
    arm: str
    couch: str
    patient: str
    device: str
    room: str
    floor: str
    beam: str

    def colour(self, name: str) -> QColor:
        """Return one of the colours by its name here."""
        return QColor(str(getattr(self, name)))


LIGHT: Final = Theme(
    dark=False,
    window="#eeece8",
    panel="#f8f7f4",
    canvas="#ffffff",
    line="#d3cfc7",
    ink="#1d2a36",
    faint="#5f6b75",
    accent="#245f8f",
    on_accent="#ffffff",
    marked="#8c2f5b",
    halo="#ffffff",
    permitted="#10202e",
    kept="#8c2f5b",
    required="#1d2a36",
    gantry="#a9b4be",
    arm="#8fa0ae",
    couch="#6d7f8c",
    patient="#d9b99b",
    device="#8b86ad",
    room="#c9c6bf",
    floor="#dcd8d0",
    beam="#b8772c",
)
DARK: Final = Theme(
    dark=True,
    window="#1c2126",
    panel="#252b31",
    canvas="#15191d",
    line="#3b444c",
    ink="#e6e8e9",
    faint="#a3adb5",
    accent="#7db4dd",
    on_accent="#10202e",
    marked="#e493b8",
    halo="#10151a",
    permitted="#ffffff",
    kept="#e493b8",
    required="#ffffff",
    gantry="#8d99a4",
    arm="#758693",
    couch="#586975",
    patient="#c6a284",
    device="#7a759c",
    room="#5b6166",
    floor="#2c3238",
    beam="#e0a458",
)


def theme_for(application: QGuiApplication, choice: str) -> Theme:
    """Return the theme that a person chose, "light", "dark" or, with anything else, that of the system."""
    if choice in {"light", "dark"}:
        return DARK if choice == "dark" else LIGHT
    dark = application.styleHints().colorScheme() is Qt.ColorScheme.Dark
    return DARK if dark else LIGHT


def palette_of(theme: Theme) -> QPalette:
    """Return Qt's palette in the theme's colours."""
    palette = QPalette()
    role = QPalette.ColorRole
    for colour_role, name in (
        (role.Window, "window"),
        (role.Base, "canvas"),
        (role.AlternateBase, "panel"),
        (role.ToolTipBase, "panel"),
        (role.Button, "panel"),
        (role.WindowText, "ink"),
        (role.Text, "ink"),
        (role.ButtonText, "ink"),
        (role.ToolTipText, "ink"),
        (role.PlaceholderText, "faint"),
        (role.Highlight, "accent"),
        (role.HighlightedText, "on_accent"),
        (role.Link, "accent"),
        (role.Mid, "line"),
    ):
        palette.setColor(colour_role, theme.colour(name))
    for colour_role in (role.WindowText, role.Text, role.ButtonText):
        palette.setColor(QPalette.ColorGroup.Disabled, colour_role, theme.colour("faint"))
    return palette
