"""A window without a screen, that remembers nothing of whoever tests; and no thread or process may be left behind."""

from __future__ import annotations

import gc
import os
import sys
import threading
import time
from collections.abc import Iterator
from pathlib import Path

import pytest

os.environ.setdefault("QT_QPA_PLATFORM", "offscreen")

from PySide6.QtCore import QEvent
from PySide6.QtWidgets import QApplication

for folder in (Path(__file__).parent, Path(__file__).parents[1] / "bench"):
    sys.path.insert(0, str(folder))


@pytest.fixture(autouse=True, scope="session")
def _own_folders(tmp_path_factory: pytest.TempPathFactory) -> Iterator[None]:
    names = ("XDG_STATE_HOME", "XDG_CONFIG_HOME")
    before = {name: os.environ.get(name) for name in names}
    for name in names:
        os.environ[name] = str(tmp_path_factory.mktemp(name.lower()))
    yield
    for name, value in before.items():
        if value is None:
            del os.environ[name]
        else:
            os.environ[name] = value


@pytest.fixture(autouse=True)
def _taken_apart_in_order() -> Iterator[None]:
    """What a test asked the toolkit to delete is deleted after it, not when the collector happens to come by.

    Nothing here runs an event loop from outside, and without one `deleteLater` waits for ever.
    """
    yield
    app = QApplication.instance()
    if app is not None:
        app.sendPostedEvents(None, QEvent.Type.DeferredDelete)
        gc.collect(1)


def own_children() -> set[int]:
    """Processes of this one (Linux)."""
    found: set[int] = set()
    for task in Path("/proc/self/task").iterdir():
        try:
            found |= {int(pid) for pid in (task / "children").read_text(encoding="ascii").split()}
        except OSError:  # the thread has just ended
            continue
    return found


@pytest.fixture
def nothing_left() -> Iterator[None]:
    """Fails a test that leaves a thread or a process; some seconds are given to end."""
    threads, processes = set(threading.enumerate()), own_children()
    yield
    end = time.monotonic() + 20.0
    left: tuple[list[str], set[int]] = ([], set())
    while time.monotonic() < end:
        # Qt's own pool threads rest for a while before they end; Python sees them as dummies.
        more = [
            one for one in set(threading.enumerate()) - threads if not isinstance(one, threading._DummyThread)
        ]
        left = ([one.name for one in more], own_children() - processes)
        if not left[0] and not left[1]:
            return
        time.sleep(0.1)
    raise AssertionError(f"left behind: threads {left[0]}, processes {left[1]}")
