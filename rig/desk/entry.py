"""Start of the window: application, paths, sounds, and nothing that could wait until it is asked for."""

from __future__ import annotations

import os
import sys
from pathlib import Path

from platformdirs import user_config_path, user_state_path
from PySide6.QtCore import QTimer
from PySide6.QtWidgets import QApplication

from rig.desk.model.memory import Memory
from rig.desk.preloading import preload
from rig.desk.sound import Sounds
from rig.desk.window import Window

#: By then the pages stand, and nobody has read the first one to its end.
PRELOAD_MS = 1000


def application() -> QApplication:
    """The one application of this process."""
    found = QApplication.instance()
    app = found if isinstance(found, QApplication) else QApplication([sys.argv[0] if sys.argv else "haltere"])
    app.setApplicationName("haltere")
    app.setApplicationDisplayName("Haltere")
    return app


def window(config_folder: Path | None = None, state_folder: Path | None = None) -> Window:
    """The window with what it remembers; folders are those of the system unless told otherwise."""
    memory = Memory.load((config_folder or user_config_path("haltere")) / "window.json")
    sounds = Sounds(on=memory.sound)
    return Window(memory, sounds, state_folder or user_state_path("haltere"))


def run(session: Path | None = None) -> int:
    """Show the window until it is closed; the exit code."""
    app = application()
    shown = window()
    shown.show()
    if session is not None:
        QTimer.singleShot(0, lambda: shown.open_replay(str(session)))
    QTimer.singleShot(PRELOAD_MS, preload)
    # Lets Python look after signals (Ctrl-C in the terminal) while Qt waits.
    awake = QTimer()
    awake.timeout.connect(lambda: None)
    awake.start(200)
    import signal

    signal.signal(signal.SIGINT, lambda *_: shown.close())
    signal.signal(signal.SIGTERM, lambda *_: shown.close())
    code = int(app.exec())
    # All that lasts has been written when the window closed. Taking the toolkit apart object by object, in whatever
    # order the interpreter comes by them, now and then ends in a crash of its own.
    sys.stdout.flush()
    sys.stderr.flush()
    os._exit(code)
