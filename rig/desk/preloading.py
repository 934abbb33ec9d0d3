"""Reads the modules a first run needs while its operator still looks at the start page."""

from __future__ import annotations

import contextlib
import importlib
import threading

#: What the first press of a button would otherwise wait for. None of it has to do with Qt.
WANTED = ("analysis.planning", "rig.files.forecast", "rig.command.sessions", "rig.bench.client")


def preload() -> threading.Thread:
    """Import `WANTED` in a thread of its own; whoever needs one meanwhile waits for the rest of it.

    What cannot be imported is left to that import to tell.
    """
    thread = threading.Thread(target=_read, name="preloading", daemon=True)
    thread.start()
    return thread


def _read() -> None:
    for name in WANTED:
        with contextlib.suppress(Exception):
            importlib.import_module(name)
