"""JSON lines over pipes, read and written by threads of their own, so that no reader can hold up a bench."""

from __future__ import annotations

import json
import os
import queue
import threading
from collections import deque
from collections.abc import Callable
from contextlib import suppress
from typing import Any

Fields = dict[str, Any]
#: A reader so far behind is frozen or gone; what it did not read is in the journal.
MOST_WAITING = 20_000


class LineReader:
    """Lines from a descriptor as they come."""

    def __init__(
        self, descriptor: int, heard: Callable[[], None] | None = None, passed_on: bytes = b""
    ) -> None:
        """`heard` is called for every piece that comes. Lines that begin with `passed_on` are not read but given as
        they are, {"line": bytes}: for whoever only hands them on."""
        self._closed = False
        self._passed_on = passed_on
        self._descriptor = descriptor
        self._heard = heard or (lambda: None)
        self._lines: queue.SimpleQueue[Fields] = queue.SimpleQueue()
        self._thread = threading.Thread(target=self._run, name="line reader", daemon=True)
        self._thread.start()

    @property
    def ended(self) -> bool:
        """Whether the other side has closed or died, and all it had written was taken."""
        # In this order: what came last is in the queue before the end is known.
        return self._closed and self._lines.empty()

    def take(self) -> list[Fields]:
        """What has come since the last call."""
        taken = []
        with suppress(queue.Empty):
            while True:
                taken.append(self._lines.get_nowait())
        return taken

    def wait(self, timeout_s: float) -> Fields | None:
        """The next line, or None if none came in time."""
        try:
            return self._lines.get(timeout=timeout_s)
        except queue.Empty:
            return None

    def join(self, timeout_s: float = 5.0) -> None:
        """Wait for the thread, once the other side has closed: only then may the descriptor be closed."""
        self._thread.join(timeout_s)

    def _run(self) -> None:
        rest = b""
        while True:
            try:
                data = os.read(self._descriptor, 1 << 16)
            except OSError:
                data = b""
            if not data:
                self._closed = True
                return
            self._heard()
            *whole, rest = (rest + data).split(b"\n")
            for line in whole:
                if self._passed_on and line.startswith(self._passed_on):
                    self._lines.put({"line": line})
                    continue
                with suppress(ValueError, RecursionError):
                    fields = json.loads(line)
                    if isinstance(fields, dict):
                        self._lines.put(fields)


class LineWriter:
    """Lines to a descriptor. `send` never waits and never fails: a reader that has gone misses them."""

    def __init__(self, descriptor: int) -> None:
        self._descriptor = descriptor
        self._waiting: deque[bytes] = deque()
        self._change = threading.Condition()
        self._closing = False
        self.gone = False
        self._thread = threading.Thread(target=self._run, name="line writer", daemon=True)
        self._thread.start()

    def send(self, fields: Fields, *, droppable: bool = False) -> None:
        """`droppable` lines are left out while the reader is behind: newer ones will tell more."""
        self.send_line(json.dumps(fields, separators=(",", ":"), default=str).encode(), droppable=droppable)

    def send_line(self, line: bytes, *, droppable: bool = False) -> None:
        """A line of JSON as it is."""
        if self.gone:
            return
        with self._change:
            if len(self._waiting) >= (50 if droppable else MOST_WAITING):
                return
            self._waiting.append(line + b"\n")
            self._change.notify()

    def close(self, patience_s: float = 2.0) -> None:
        """Send what waits, as far as it is taken in time."""
        with self._change:
            self._closing = True
            self._change.notify()
        self._thread.join(patience_s)

    def _run(self) -> None:
        while True:
            with self._change:
                while not self._waiting and not self._closing:
                    self._change.wait()
                if not self._waiting:
                    return
                data = b"".join(self._waiting)
                self._waiting.clear()
            view = memoryview(data)
            while view:
                try:
                    view = view[os.write(self._descriptor, view) :]
                except OSError:
                    self.gone = True
                    return
