"""Tones of the window, told apart by pitch and by rhythm, so that a deaf ear for pitch still has the rhythm.

    tap        one long note, 660 Hz            "now": the operator is to tap
    accepted   two notes rising, 784 -> 1175 Hz
    double     three even beats, 440 Hz         struck twice: not used
    lost       two long notes falling, 523 -> 330 Hz
    trip       four low beats, 247 and 233 Hz in turn, the roughest of all

Notes of equal temperament at a' = 440 Hz. Each is a sine with a little of its second and third harmonic, faded in and
out with a raised cosine: no clicks, nothing shrill, nothing above 4 kHz where hearing goes first with age.
"""

from __future__ import annotations

import io
import wave

import numpy as np
from numpy.typing import NDArray

RATE_HZ = 44_100
FADE_S = 0.012
LOUDEST = 0.5  # of full scale
HARMONICS = (1.0, 0.22, 0.06)
#: For each tone its parts: frequency in Hz (0: silence) and length in s.
NOTES: dict[str, tuple[tuple[float, float], ...]] = {
    "tap": ((659.26, 0.38),),
    "accepted": ((783.99, 0.09), (0.0, 0.02), (1174.66, 0.14)),
    "double": ((440.0, 0.07), (0.0, 0.06), (440.0, 0.07), (0.0, 0.06), (440.0, 0.07)),
    "lost": ((523.25, 0.20), (0.0, 0.02), (329.63, 0.26)),
    "trip": (
        (246.94, 0.09),
        (0.0, 0.04),
        (233.08, 0.09),
        (0.0, 0.04),
        (246.94, 0.09),
        (0.0, 0.04),
        (233.08, 0.09),
    ),
}


def samples(name: str) -> NDArray[np.float64]:
    """A tone as samples of -1 to 1 at RATE_HZ. KeyError for a name that is none of NOTES."""
    return np.concatenate([_note(pitch_hz, length_s) for pitch_hz, length_s in NOTES[name]])


def _note(pitch_hz: float, length_s: float) -> NDArray[np.float64]:
    count = round(length_s * RATE_HZ)
    if pitch_hz == 0.0:
        return np.zeros(count)
    time_s = np.arange(count) / RATE_HZ
    made = np.zeros(count)
    for number, share in enumerate(HARMONICS, start=1):
        made += share * np.sin(2.0 * np.pi * number * pitch_hz * time_s)
    made *= LOUDEST / sum(HARMONICS)
    fade = round(FADE_S * RATE_HZ)
    rise = 0.5 - 0.5 * np.cos(np.pi * np.arange(fade) / fade)
    made[:fade] *= rise
    made[-fade:] *= rise[::-1]
    return made


def wav_bytes(name: str) -> bytes:
    """A tone as a WAV file: one channel, 16 bits."""
    whole = np.round(32767.0 * samples(name)).astype("<i2")
    file = io.BytesIO()
    with wave.open(file, "wb") as writer:
        writer.setnchannels(1)
        writer.setsampwidth(2)
        writer.setframerate(RATE_HZ)
        writer.writeframes(whole.tobytes())
    return file.getvalue()
