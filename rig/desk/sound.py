"""Sounds of the window, played by whatever plays WAV files on this computer.

The first of paplay, pw-play, aplay, afplay that is found and works; winsound on Windows; else the bell of the desktop.
A player runs as a process of its own, waited for by a thread of its own: the window never waits for a sound, and no
process is left behind. A player that fails (no sound server, no card) is given up for the next one.
"""

from __future__ import annotations

import contextlib
import queue
import shutil
import subprocess
import sys
import tempfile
import threading
from collections.abc import Callable
from pathlib import Path

from PySide6.QtWidgets import QApplication

from rig.desk.model.tones import NOTES, wav_bytes

#: Programs and their words before the file.
PLAYERS: dict[str, tuple[str, ...]] = {"paplay": (), "pw-play": (), "aplay": ("-q",), "afplay": ()}
BELL, WINDOWS = "beep", "winsound"
#: A tone lasts half a second; a player that is not through after so long hangs.
PLAYED_S = 5.0
#: Tones that wait; more would be told long after what they tell of.
MOST_WAITING = 4

Start = Callable[[list[str]], "subprocess.Popen[bytes]"]
Find = Callable[[str], str | None]


def _start(words: list[str]) -> subprocess.Popen[bytes]:
    nothing = subprocess.DEVNULL
    return subprocess.Popen(words, stdin=nothing, stdout=nothing, stderr=nothing)


class Sounds:
    """Plays the tones of `rig.desk.model.tones`. `close` it at the end: it removes its folder.

    `available`: by what sounds are played ("paplay", ..., "winsound", or "beep": the bell only, the same for all).
    `on`: the switch; nothing is played while it is off.
    """

    def __init__(
        self,
        *,
        on: bool = True,
        find: Find = shutil.which,
        start: Start = _start,
        bell: Callable[[], None] = QApplication.beep,
        platform: str = sys.platform,
    ) -> None:
        self.on = on
        self._start = start
        self._bell = bell
        self._windows = platform == "win32"
        found = {} if self._windows else {name: find(name) for name in PLAYERS}
        self._players = [(name, path) for name, path in found.items() if path is not None]
        self._folder: Path | None = None
        self._waiting: queue.Queue[str | None] = queue.Queue(MOST_WAITING)
        self._thread: threading.Thread | None = None
        self._closed = False

    @property
    def available(self) -> str:
        if self._windows:
            return WINDOWS
        return self._players[0][0] if self._players else BELL

    @property
    def told(self) -> str:
        """How sounds are played, in a sentence for the operator."""
        if not self.on:
            return "sounds are switched off"
        if self.available == BELL:
            return "no player of sounds was found: the bell of the desktop stands for every tone"
        return f"sounds are played by {self.available}"

    def play(self, name: str) -> None:
        """Play a tone soon; at once if none is playing. KeyError for a name that is none of NOTES."""
        if name not in NOTES:
            raise KeyError(name)
        if not self.on or self._closed:
            return
        if self._windows:
            self._play_on_windows(name)
        elif not self._players:
            self._bell()
        else:
            self._hand_over(name)

    def close(self) -> None:
        """Wait for the tone that plays, drop those that wait, remove the folder."""
        if self._closed:
            return
        self._closed = True
        if self._thread is not None:
            with contextlib.suppress(queue.Empty):
                while True:
                    self._waiting.get_nowait()
            self._waiting.put(None)
            self._thread.join()
        if self._folder is not None:
            shutil.rmtree(self._folder, ignore_errors=True)

    def file(self, name: str) -> Path:
        """The WAV file of a tone in a private folder, written at first use."""
        if self._folder is None:
            self._folder = Path(tempfile.mkdtemp(prefix="haltere-tones-"))
            for each in NOTES:
                (self._folder / f"{each}.wav").write_bytes(wav_bytes(each))
        return self._folder / f"{name}.wav"

    # -- on a thread of its own ------------------------------------------------------------------------

    def _hand_over(self, name: str) -> None:
        try:
            self.file(name)
        except OSError:  # no room for a file of sound
            self._bell()
            return
        if self._thread is None:
            self._thread = threading.Thread(target=self._work, name="sounds", daemon=True)
            self._thread.start()
        if name == "trip":  # before everything that waits
            with contextlib.suppress(queue.Empty):
                while True:
                    self._waiting.get_nowait()
        with contextlib.suppress(queue.Full):
            self._waiting.put_nowait(name)

    def _work(self) -> None:
        while (name := self._waiting.get()) is not None:
            while self._players and not self._played(*self._players[0], name):
                self._players.pop(0)

    def _played(self, player: str, path: str, name: str) -> bool:
        """Whether a player played a tone to its end."""
        try:
            process = self._start([path, *PLAYERS[player], str(self.file(name))])
        except OSError:
            return False
        try:
            return process.wait(PLAYED_S) == 0
        except subprocess.TimeoutExpired:
            process.kill()
            process.wait()
            return False

    def _play_on_windows(self, name: str) -> None:
        if sys.platform == "win32":
            import winsound

            flags = winsound.SND_FILENAME | winsound.SND_ASYNC | winsound.SND_NODEFAULT
            with contextlib.suppress(RuntimeError, OSError):
                winsound.PlaySound(str(self.file(name)), flags)
