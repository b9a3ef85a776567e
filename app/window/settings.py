"""What the window remembers between starts: layout, colours, whether the cautions were read."""

from PySide6.QtCore import QByteArray, QSettings


class WindowSettings:
    """A few values in the user's settings; what is damaged there counts as never set."""

    def __init__(self, settings: QSettings | None = None) -> None:
        kind, scope = QSettings.Format.IniFormat, QSettings.Scope.UserScope
        self._settings = settings or QSettings(kind, scope, "wideberth", "window")

    def state(self, name: str) -> QByteArray | None:
        """Return a layout that was kept under a name."""
        value = self._settings.value(f"layout/{name}")
        return value if isinstance(value, QByteArray) else None

    def keep_state(self, name: str, state: QByteArray) -> None:
        """Keep a layout."""
        self._settings.setValue(f"layout/{name}", state)

    @property
    def theme(self) -> str:
        """The colours that were chosen: "system", "light" or "dark"."""
        value = self._settings.value("theme", "system")
        return value if value in {"light", "dark"} else "system"

    @theme.setter
    def theme(self, choice: str) -> None:
        self._settings.setValue("theme", choice)

    @property
    def cautions_read(self) -> bool:
        """Whether the cautions were shown to this user and acknowledged."""
        return str(self._settings.value("cautions_read", "no")) == "yes"

    def note_cautions_read(self) -> None:
        """Remember that they were."""
        self._settings.setValue("cautions_read", "yes")
        self._settings.sync()
