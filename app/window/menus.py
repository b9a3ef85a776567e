"""The menus: every command with its keys, and when it makes sense."""

from collections.abc import Callable
from dataclasses import dataclass

from PySide6.QtGui import QAction, QActionGroup, QKeySequence
from PySide6.QtWidgets import QMainWindow, QMenu

from app.document.session import Session
from app.saving.recent import recent_files
from app.window.desk import Desk
from app.window.export_desk import ExportDesk
from app.window.file_desk import FileDesk
from app.window.room.scene_view import VIEWS
from app.window.shading_desk import Shading
from app.window.workspace import Workspace

_KEYS = QKeySequence.StandardKey
_THEMES = {"system": "As the system", "light": "Light", "dark": "Dark"}


@dataclass(frozen=True)
class Commands:
    """What the menus can ask for: of the desks and of the window itself."""

    desk: Desk
    files: FileDesk
    exports: ExportDesk
    workspace: Workspace
    choose_shading: Callable[[Shading], None]
    browse_plan: Callable[[], None]
    go_to_start: Callable[[], None]
    show_cautions: Callable[[], None]
    set_theme: Callable[[str], None]


class Menus:
    """The window's menu bar. Actions that need a document are off without one."""

    def __init__(self, window: QMainWindow, commands: Commands) -> None:
        self._window = window
        self._commands = commands
        self._with_document: list[QAction] = []
        self._file()
        self._edit()
        self._view()
        self._pose()
        help_menu = self._menu("&Help")
        self._add(help_menu, "&Before you rely on it …", commands.show_cautions, "F1")

    def show_document(self, session: Session | None) -> None:
        """Take over what can be undone, and whether there is a document at all."""
        for action in self._with_document:
            action.setEnabled(session is not None)
        self.undo.setText((session.undo_text if session is not None else "") or "Undo")
        self.undo.setEnabled(session is not None and bool(session.undo_text))
        self.redo.setText((session.redo_text if session is not None else "") or "Redo")
        self.redo.setEnabled(session is not None and bool(session.redo_text))

    def show_theme(self, choice: str) -> None:
        """Tick the colours in use."""
        self._themes[choice].setChecked(True)

    def _file(self) -> None:
        commands, files, exports = self._commands, self._commands.files, self._commands.exports
        menu = self._menu("&File")
        self._add(menu, "&Open …", files.browse, _KEYS.Open)
        self._recent = menu.addMenu("Open &recent")
        self._recent.aboutToShow.connect(self._fill_recent)
        self._add(menu, "&New set-up in a room …", files.new, _KEYS.New)
        self._add(menu, "Open a &plan …", commands.browse_plan, "Ctrl+Shift+O", needs_document=True)
        self._add(menu, "S&tart screen", commands.go_to_start, needs_document=True)
        menu.addSeparator()
        self._add(menu, "&Save", files.save, _KEYS.Save, needs_document=True)
        self._add(menu, "Save &as …", files.save_as, "Ctrl+Shift+S", needs_document=True)
        menu.addSeparator()
        self._add(menu, "&Export the permitted angles …", exports.export_map, "Ctrl+E", needs_document=True)
        self._add(menu, "Export e&very pair of angles …", exports.export_grid, needs_document=True)
        self._add(menu, "Export the room in this &pose …", exports.export_pose, needs_document=True)
        self._add(
            menu,
            "Export a picture of the roo&m …",
            lambda: exports.export_picture(commands.workspace.scene_view.picture),
            needs_document=True,
        )
        self._add(menu, "Prin&t the angle chart …", exports.print_chart, _KEYS.Print, needs_document=True)
        menu.addSeparator()
        self._add(menu, "&Quit", self._window.close, _KEYS.Quit)

    def _edit(self) -> None:
        desk = self._commands.desk
        menu = self._menu("&Edit")
        self.undo = self._add(menu, "Undo", desk.undo, _KEYS.Undo)
        self.redo = self._add(menu, "Redo", desk.redo, _KEYS.Redo)
        menu.addSeparator()
        self._add(menu, "&Keep this map to compare with", desk.keep_this, "Ctrl+K", needs_document=True)
        self._add(menu, "&Let the kept map go", lambda: desk.keep(None), needs_document=True)

    def _view(self) -> None:
        commands, workspace = self._commands, self._commands.workspace
        view = workspace.scene_view
        menu = self._menu("&View")
        for place, name in enumerate(VIEWS, start=1):
            keys = f"Ctrl+{place}" if place < 10 else ""
            self._add(
                menu,
                name[:1].upper() + name[1:],
                lambda name=name: view.set_view(name),
                keys,
                needs_document=True,
            )
        self._add(menu, "&Fit the room", view.fit, "Ctrl+0", needs_document=True)
        menu.addSeparator()
        beam = self._add(
            menu, "&Beam axis and field", lambda: workspace.show_beam(beam.isChecked()), needs_document=True
        )
        beam.setCheckable(True)
        beam.setChecked(True)
        shading = menu.addMenu("&Nearest approach")
        group = QActionGroup(shading)
        for kind in Shading:
            action = self._add(
                shading, kind.value, lambda kind=kind: commands.choose_shading(kind), needs_document=True
            )
            action.setCheckable(True)
            action.setChecked(kind is Shading.NONE)
            group.addAction(action)
        menu.addSeparator()
        colours = menu.addMenu("&Colours")
        self._themes = {}
        group = QActionGroup(colours)
        for choice, name in _THEMES.items():
            action = self._add(colours, name, lambda choice=choice: commands.set_theme(choice))
            action.setCheckable(True)
            group.addAction(action)
            self._themes[choice] = action

    def _pose(self) -> None:
        desk = self._commands.desk
        menu = self._menu("&Pose")
        for name, keys, gantry_deg, couch_deg in (
            ("Gantry clockwise by 1°", "Ctrl+Right", 1.0, 0.0),
            ("Gantry counter-clockwise by 1°", "Ctrl+Left", -1.0, 0.0),
            ("Couch up by 1°", "Ctrl+Up", 0.0, 1.0),
            ("Couch down by 1°", "Ctrl+Down", 0.0, -1.0),
        ):
            self._add(
                menu,
                name,
                lambda g=gantry_deg, c=couch_deg: desk.go_to(desk.gantry_deg + g, desk.couch_deg + c),
                keys,
                needs_document=True,
            )
        self._add(menu, "Gantry 0°, couch 0°", lambda: desk.go_to(0.0, 0.0), "Ctrl+Home", needs_document=True)

    def _menu(self, name: str) -> QMenu:
        return self._window.menuBar().addMenu(name)

    def _add(
        self,
        menu: QMenu,
        text: str,
        run: Callable[..., object],
        keys: "QKeySequence.StandardKey | str" = "",
        *,
        needs_document: bool = False,
    ) -> QAction:
        action = QAction(text, self._window)
        if keys:
            action.setShortcut(QKeySequence(keys))
        action.triggered.connect(lambda _=False: run())
        menu.addAction(action)
        if needs_document:
            self._with_document.append(action)
        return action

    def _fill_recent(self) -> None:
        self._recent.clear()
        paths = recent_files()
        for path in paths:
            name = f"{path.name}  ({path.parent.name})"
            self._add(self._recent, name, lambda path=path: self._commands.files.open(path))
        self._recent.setToolTipsVisible(True)
        if not paths:
            self._recent.addAction("Nothing yet").setEnabled(False)
