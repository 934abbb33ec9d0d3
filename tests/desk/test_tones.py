"""Tones that can be told apart, and a player that never holds anything up or leaves anything behind."""

from __future__ import annotations

import io
import subprocess
import sys
import threading
import wave
from collections.abc import Iterator
from itertools import combinations
from pathlib import Path

import numpy as np
import pytest
import told_runs

from rig.desk.model.run_model import OUTCOME, RunModel
from rig.desk.model.tones import LOUDEST, NOTES, RATE_HZ, samples, wav_bytes
from rig.desk.sound import BELL, MOST_WAITING, WINDOWS, Sounds


def read(name: str) -> np.ndarray:
    with wave.open(io.BytesIO(wav_bytes(name))) as file:
        assert (file.getnchannels(), file.getsampwidth(), file.getframerate()) == (1, 2, RATE_HZ)
        return np.frombuffer(file.readframes(file.getnframes()), dtype="<i2") / 32768.0


def rhythm(tone: np.ndarray) -> list[tuple[float, float]]:
    """Beats of a tone: length in s and frequency in Hz of each stretch of sound."""
    window = RATE_HZ // 200
    loud = np.array([np.abs(tone[at : at + window]).max() > 0.05 for at in range(0, len(tone), window)])
    edges = np.flatnonzero(np.diff(np.concatenate(([0], loud.astype(int), [0]))))
    beats = []
    for begin, end in zip(edges[::2], edges[1::2], strict=True):
        part = tone[begin * window : end * window]
        spectrum = np.abs(np.fft.rfft(part * np.hanning(len(part)), 1 << 17))
        beats.append((len(part) / RATE_HZ, float(np.argmax(spectrum)) * RATE_HZ / (1 << 17)))
    return beats


@pytest.mark.parametrize("name", NOTES)
def test_each_is_short_soft_and_faded(name: str) -> None:
    tone = read(name)
    assert 0.12 <= len(tone) / RATE_HZ <= 0.5
    assert 0.2 < np.abs(tone).max() <= LOUDEST
    assert np.abs(tone[[0, -1]]).max() < 0.001
    # No click: no step between samples larger than the steepest harmonic of the highest note can give.
    steepest = 2.0 * np.pi * 1200.0 * LOUDEST / RATE_HZ * 1.6
    assert np.abs(np.diff(tone)).max() < steepest
    spectrum = np.abs(np.fft.rfft(tone)) ** 2
    above = np.fft.rfftfreq(len(tone), 1.0 / RATE_HZ) > 4000.0
    assert spectrum[above].sum() < 1e-3 * spectrum.sum()


def test_beats_are_those_that_are_documented() -> None:
    # Equal temperament, a' = 440 Hz: e'' 659.3, g'' 784.0, d''' 1174.7, c'' 523.3, e' 329.6, b 246.9, a# 233.1
    # (440 * 2 ** (n / 12)).
    expected = {
        "tap": [659.3],
        "accepted": [784.0, 1174.7],
        "double": [440.0] * 3,
        "lost": [523.3, 329.6],
        "trip": [246.9, 233.1, 246.9, 233.1],
    }
    for name, pitches in expected.items():
        assert [pitch for _, pitch in rhythm(read(name))] == pytest.approx(pitches, rel=0.02), name


def test_any_two_differ_in_rhythm_or_in_direction() -> None:
    """Not in pitch alone: the numbers of beats differ, or the beats go the other way."""
    told = {}
    for name in NOTES:
        beats = rhythm(read(name))
        told[name] = (len(beats), np.sign(beats[-1][1] - beats[0][1]), round(sum(b[0] for b in beats), 2))
    for one, other in combinations(NOTES, 2):
        assert told[one][:2] != told[other][:2], (one, other)


def test_every_sound_of_the_model_has_a_tone() -> None:
    """Whatever a run puts among its sounds can be played."""
    run = told_runs.ToldRun()
    run.level("rising", 8.0)
    run.model.take({"prompt": "tap now, upward"})
    for outcome in ("accepted", "double", "lost", "left_out"):
        run.tap(outcome)
    run.trip()
    assert set(run.model.sounds) == set(NOTES)
    assert OUTCOME not in RunModel().sounds
    with pytest.raises(KeyError):
        samples("fanfare")


# -- players -------------------------------------------------------------------------------------------


class Players:
    """Stands in for programs that play; remembers what they were given."""

    def __init__(self, *present: str, ends: dict[str, int] | None = None) -> None:
        self.present = present
        self.ends = ends or {}
        self.played: list[list[str]] = []
        self.processes: list[subprocess.Popen[bytes]] = []
        self.bells = 0
        self.go = threading.Event()
        self.go.set()

    def find(self, name: str) -> str | None:
        return f"/somewhere/{name}" if name in self.present else None

    def start(self, words: list[str]) -> subprocess.Popen[bytes]:
        self.go.wait(60.0)
        self.played.append(words)
        code = self.ends.get(Path(words[0]).name, 0)
        process = subprocess.Popen([sys.executable, "-c", f"raise SystemExit({code})"])
        self.processes.append(process)
        return process

    def bell(self) -> None:
        self.bells += 1

    def sounds(self, platform: str = "linux", **more: bool) -> Sounds:
        return Sounds(find=self.find, start=self.start, bell=self.bell, platform=platform, **more)

    def names(self) -> list[str]:
        return [Path(words[-1]).stem for words in self.played]


@pytest.fixture
def waited() -> Iterator[list[Sounds]]:
    made: list[Sounds] = []
    yield made
    for sounds in made:
        sounds.close()


def wait_for(players: Players, count: int) -> None:
    """Until so many have been played; a minute is no limit on a healthy machine."""
    pause = threading.Event()
    for _ in range(6000):
        if len(players.processes) >= count and all(p.returncode is not None for p in players.processes):
            return
        pause.wait(0.01)
    raise AssertionError(f"only {players.names()} were played")


def test_the_first_player_found_plays_a_wav_file(waited: list[Sounds]) -> None:
    players = Players("pw-play", "aplay")
    sounds = players.sounds()
    waited.append(sounds)
    assert sounds.available == "pw-play"
    assert "pw-play" in sounds.told
    sounds.play("tap")
    wait_for(players, 1)
    assert players.played[0][0] == "/somewhere/pw-play"
    file = Path(players.played[0][-1])
    assert file.read_bytes() == wav_bytes("tap")
    if sys.platform != "win32":
        assert file.parent.stat().st_mode & 0o077 == 0  # private
    sounds.close()
    assert not file.parent.exists()


def test_no_process_is_left_behind(waited: list[Sounds]) -> None:
    players = Players("paplay")
    sounds = players.sounds()
    waited.append(sounds)
    for count, name in enumerate(NOTES, start=1):
        sounds.play(name)
        wait_for(players, count)
    assert players.names() == list(NOTES)
    assert all(process.returncode == 0 for process in players.processes)  # waited for: no zombie


def test_a_player_that_fails_is_given_up_for_the_next(waited: list[Sounds]) -> None:
    players = Players("paplay", "aplay", ends={"paplay": 1})
    sounds = players.sounds()
    waited.append(sounds)
    sounds.play("lost")
    wait_for(players, 2)
    assert [words[0] for words in players.played] == ["/somewhere/paplay", "/somewhere/aplay"]
    assert players.played[1][1] == "-q"
    sounds.play("lost")
    wait_for(players, 3)
    assert sounds.available == "aplay"
    assert players.played[2][0] == "/somewhere/aplay"


def test_without_a_player_the_bell_rings_and_it_says_so() -> None:
    players = Players()
    sounds = players.sounds()
    assert sounds.available == BELL
    assert "bell" in sounds.told
    sounds.play("trip")
    assert (players.bells, players.played) == (1, [])
    sounds.close()


def test_a_player_that_cannot_be_started_is_none(waited: list[Sounds]) -> None:
    bells: list[int] = []
    tried = threading.Event()

    def start(words: list[str]) -> subprocess.Popen[bytes]:
        tried.set()
        raise FileNotFoundError(words[0])

    sounds = Sounds(
        find=lambda name: name if name == "aplay" else None,
        start=start,
        bell=lambda: bells.append(1),
        platform="linux",
    )
    waited.append(sounds)
    sounds.play("tap")
    assert tried.wait(60.0)
    pause = threading.Event()
    while sounds.available != BELL:
        pause.wait(0.01)
    sounds.play("tap")
    assert bells == [1]


def test_the_switch(waited: list[Sounds]) -> None:
    players = Players("paplay")
    sounds = players.sounds(on=False)
    waited.append(sounds)
    sounds.play("tap")
    assert "off" in sounds.told
    sounds.on = True
    sounds.play("double")
    wait_for(players, 1)
    assert players.names() == ["double"]


def test_a_slow_player_holds_nothing_up_and_a_trip_comes_before_what_waits(waited: list[Sounds]) -> None:
    players = Players("paplay")
    players.go.clear()  # the first tone hangs
    sounds = players.sounds()
    waited.append(sounds)
    for _ in range(MOST_WAITING + 10):
        sounds.play("accepted")
    sounds.play("trip")
    players.go.set()
    sounds.play("lost")
    pause = threading.Event()
    for _ in range(6000):
        if "lost" in players.names():
            break
        pause.wait(0.01)
    names = players.names()
    assert names[-2:] == ["trip", "lost"]
    assert set(names[:-2]) <= {"accepted"} and len(names) <= 3


def test_windows_has_a_player_of_its_own() -> None:
    assert Players("paplay").sounds(platform="win32").available == WINDOWS


def test_an_unknown_sound_is_a_mistake_of_the_caller() -> None:
    with pytest.raises(KeyError):
        Players("paplay").sounds().play("fanfare")
