"""Where a run goes to: simulated or a board's port, and the file of its session."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path

from PySide6.QtCore import Qt, Signal
from PySide6.QtWidgets import (
    QFileDialog,
    QGridLayout,
    QHBoxLayout,
    QLabel,
    QLineEdit,
    QPushButton,
    QWidget,
)

from drivers.ports import Port
from rig.description import RigDescription
from rig.desk.theme import Theme
from rig.desk.widgets.fresh_list import FreshList
from rig.desk.widgets.shapes import ElidedLabel
from rig.desk.widgets.style import set_kind, set_shown

AS_WRITTEN, TYPED = "", "typed"
UNKNOWN = "As the rig file says"


def as_written(rig: RigDescription | None) -> str:
    """Where the rig file says it is to run."""
    if rig is None:
        return UNKNOWN
    if rig.simulated:
        return "Simulated, in real time"
    if rig.driver == "board":
        return f"{rig.port} (as the rig file says)"
    return "No bench in the rig file: choose a port"


class RunPlace(QWidget):
    """`changed` when somebody has chosen another place or session, `folder_chosen(path)` another folder."""

    changed = Signal()
    folder_chosen = Signal(str)

    def __init__(
        self,
        theme: Theme,
        ports: Callable[[], Sequence[Port]],
        parent: QWidget | None = None,
    ) -> None:
        super().__init__(parent)
        self._ports = ports
        self._found: tuple[Port, ...] = ()
        self._rig: RigDescription | None = None
        self.folder = Path.home()
        self.session_typed = ""
        self.where = FreshList()
        self.where.setAccessibleDescription("simulated, a serial port of this computer, or an address")
        self.where_label = QLabel("&Where")
        self.where_label.setBuddy(self.where)
        self.address = QLineEdit()
        self.address.setPlaceholderText("/dev/ttyACM0 or socket://HOST:PORT")
        self.address.setAccessibleName("address of the board")
        self.session = QLineEdit()
        self.session.setAccessibleName("file name of the session")
        self.session_label = QLabel("Se&ssion")
        self.session_label.setBuddy(self.session)
        self.folder_label = ElidedLabel()
        set_kind(self.folder_label, "faint")
        self.folder_button = QPushButton("Folder …")
        self.folder_button.setToolTip("choose the folder of the session")
        self.folder_button.setStyleSheet("padding: 0.1em 0.5em; min-height: 1.3em;")
        grid = QGridLayout(self)
        grid.setContentsMargins(0, 0, 0, 0)
        grid.setVerticalSpacing(6)
        grid.setHorizontalSpacing(8)
        grid.setColumnStretch(1, 1)
        grid.addWidget(self.where_label, 0, 0)
        grid.addWidget(self.where, 0, 1)
        grid.addWidget(self.address, 1, 1)
        row = QHBoxLayout()
        row.setSpacing(8)
        row.addWidget(self.session_label)
        row.addWidget(self.folder_label, 1)
        row.addWidget(self.folder_button)
        grid.addLayout(row, 2, 0, 1, 2)
        grid.addWidget(self.session, 3, 0, 1, 2)
        self.where.opening.connect(self.look_for_ports)
        self.where.activated.connect(self._chosen)
        self.address.textEdited.connect(lambda _: self.changed.emit())
        self.session.textEdited.connect(self._session_edited)
        self.folder_button.clicked.connect(lambda: self.ask_folder())
        self._fill(AS_WRITTEN)
        set_shown(self.address, False)

    # -- where -----------------------------------------------------------------------------------------

    @property
    def by_port(self) -> bool:
        """Whether a port is given here, whatever the rig file says."""
        return self.where.currentData() not in (AS_WRITTEN, None)

    @property
    def port(self) -> str:
        """The port given here; "" if none is, or not yet."""
        chosen = self.where.currentData()
        if chosen == TYPED:
            return self.address.text().strip()
        return str(chosen[1]) if isinstance(chosen, tuple) else ""

    def show_rig(self, rig: RigDescription | None) -> None:
        """The rig as checked; None while its file is not good."""
        self._rig = rig
        self._fill(self.where.currentData())

    def look_for_ports(self) -> None:
        """Ask the system again; a port that is chosen stays in the list, if only to be told that it is gone."""
        try:
            self._found = tuple(self._ports())
        except OSError:
            self._found = ()
        self._fill(self.where.currentData())

    def _fill(self, chosen: object) -> None:
        entries: list[tuple[str, object]] = [(as_written(self._rig), AS_WRITTEN)]
        for port in self._found:
            about = "" if port.description in ("", "n/a") else f", {port.description}"
            entries.append((f"{port.device}{about}", ("port", port.device)))
        if isinstance(chosen, tuple) and chosen not in [data for _, data in entries]:
            entries.append((f"{chosen[1]}, not there", chosen))
        entries.append(("Another address", TYPED))
        self.where.fill(entries, chosen if chosen is not None else AS_WRITTEN)

    def choose_place(self, data: object) -> None:
        """Choose an entry by its data: AS_WRITTEN, TYPED, or ("port", DEVICE)."""
        self._fill(data)
        self._chosen()

    def _chosen(self) -> None:
        typed = self.where.currentData() == TYPED
        set_shown(self.address, typed)
        if typed:
            self.address.setFocus(Qt.FocusReason.OtherFocusReason)
        self.changed.emit()

    # -- session ---------------------------------------------------------------------------------------

    def show_session(self, folder: Path, made: str) -> None:
        """The folder, and the name a session gets unless somebody types another."""
        self.folder = folder
        if not self.session_typed and self.session.text() != made and not self._emptied():
            self.session.setText(made)
            self.session.setCursorPosition(0)
        self.session.setPlaceholderText(made)
        self.session.setToolTip(f"{self.session.text() or made}\nempty it to have a name made again")
        self.folder_label.tell(f"in {self.folder}", str(self.folder))

    def _emptied(self) -> bool:
        """Somebody is about to type another name."""
        return self.session.hasFocus() and not self.session.text()

    def forget_session(self) -> None:
        """The next run gets a name of its own."""
        self.session_typed = ""

    def _session_edited(self, text: str) -> None:
        self.session_typed = text.strip()
        self.changed.emit()

    def ask_folder(self) -> None:
        dialog = QFileDialog(self, "Folder of the session", str(self.folder))
        dialog.setOption(QFileDialog.Option.DontUseNativeDialog)
        dialog.setAttribute(Qt.WidgetAttribute.WA_DeleteOnClose)
        dialog.setFileMode(QFileDialog.FileMode.Directory)
        dialog.setOption(QFileDialog.Option.ShowDirsOnly)
        dialog.fileSelected.connect(self.folder_chosen)
        dialog.open()

    def set_theme(self, theme: Theme) -> None:
        """The style sheet of the window colours it."""
