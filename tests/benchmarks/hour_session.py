"""A session of an hour at 10 kHz x 8 channels as a run leaves it: levels, taps, verdicts, results, and rows to match.

The simulated boom carries out a protocol of an hour at 1 kHz, so that events, verdicts and results are a run's own.
Its rows are then drawn out to 10 kHz between theirs, with a converter's noise, get two channels more that no rig file
describes, go into a journal in frames of 20, and are sealed as any run is. Takes some minutes and 2 GB of disk.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import asdict
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from drivers.channels import Channel
from drivers.clock import VirtualClock
from drivers.rows import RowFrame
from rig.command.sessions import run_session
from rig.files.protocol import protocol_from_text
from rig.files.rig import read_rig
from rig.record.journal import JournalWriter
from rig.record.sealing import seal
from rig.session import Session, open_session
from rig.shipped import find

SAMPLE_HZ, FRAME_ROWS, NOISE_COUNTS = 10_000, 20, 2.0
AT_ONCE = 4000 * FRAME_ROWS  # rows made at once
#: What the board sends beyond the rig file.
MORE = (
    Channel("motor_case", "temperature", "degC", 0.01, offset=20.0),
    Channel("room", "temperature", "degC", 0.01, offset=20.0),
)
PROTOCOL = """haltere_protocol = 1

[protocol]
name = "hour"
title = "An hour on the boom: up through capture, down again through the boundary"

[[step]]
do = "zero"
for = "2 s"

[[step]]
do = "staircase"
label = "up to where the body may be captured"
order = "rising"
levels = ["4 V", "5 V", "6 V", "6.5 V", "7 V"]
taps = ["0.1 mN m s"]
settle = "2 s"
settle_at_most = "2 s"

[[step]]
do = "staircase"
label = "capture"
order = "rising"
from = "7.5 V"
to = "7.9 V"
step = "0.1 V"
taps = ["0.1 mN m s", "-0.1 mN m s", "0.05 mN m s", "-0.05 mN m s"]
settle = "3 s"
settle_at_most = "5 s"

[[step]]
do = "staircase"
label = "well above the boundary"
order = "rising"
from = "8 V"
to = "12 V"
step = "0.2 V"
taps = [
  "0.1 mN m s", "-0.1 mN m s", "0.05 mN m s", "-0.05 mN m s", "0.1 mN m s", "-0.1 mN m s",
  "0.1 mN m s", "-0.1 mN m s", "0.05 mN m s", "-0.05 mN m s", "0.1 mN m s", "-0.1 mN m s",
]
quiet = "28.5 s"

[[step]]
do = "staircase"
label = "down again"
order = "falling"
from = "11.8 V"
to = "8 V"
step = "0.2 V"
taps = [
  "0.1 mN m s", "-0.1 mN m s", "0.05 mN m s", "-0.05 mN m s", "0.1 mN m s", "-0.1 mN m s",
  "0.1 mN m s", "-0.1 mN m s", "0.05 mN m s", "-0.05 mN m s", "0.1 mN m s", "-0.1 mN m s",
]
quiet = "28.5 s"

[[step]]
do = "staircase"
label = "through the boundary, gently"
order = "falling"
from = "7.8 V"
to = "7.0 V"
step = "0.1 V"
taps = ["0.05 mN m s", "-0.05 mN m s", "0.02 mN m s", "-0.02 mN m s"]
settle = "4 s"
stop_after_lost = 2
"""


def build(folder: Path, tell: Callable[[str], None] = print, slow: Path | None = None) -> Path:
    """Make `folder`/hour.h5 and give its path; `slow` is a session of the protocol at 1 kHz that is there already."""
    if slow is None:
        tell("an hour on the simulated boom ...")
        slow = folder / "slow.h5"
        rig = read_rig(find("boom"))
        protocol = protocol_from_text(PROTOCOL, "hour.toml", rig)
        run_session(rig, protocol, slow, VirtualClock(), pace="fast")
    tell("its rows at 10 kHz ...")
    journal = folder / "hour.journal"
    with open_session(slow) as session:
        _write(session, journal)
    tell("sealing ...")
    seal(journal, folder / "hour.h5")
    return folder / "hour.h5"


def _write(session: Session, path: Path) -> None:
    board = session.streams["board"]
    period = board.tick_hz // SAMPLE_HZ
    text = session.rig_text.replace('sample_rate = "1 kHz"', f'sample_rate = "{SAMPLE_HZ // 1000} kHz"')
    channels = [*board.channels, *MORE]
    header = {
        **session.header,
        "row_period_ticks": period,
        "frame_rows": FRAME_ROWS,
        "rig_text": text,
        "channels": [asdict(channel) for channel in channels],
    }
    writer = JournalWriter(path, header, backlog_bytes=1 << 30)
    tick, status = board.tick.astype(np.int64), board.status
    columns = [board.raw(channel.name).astype(np.float64) for channel in board.channels]
    encoders = [channel.measures in ("body angle", "crank angle") for channel in board.channels]
    rows = int(tick[-1] - tick[0]) // period // FRAME_ROWS * FRAME_ROWS
    random = np.random.default_rng(7)
    for first in range(0, rows, AT_ONCE):
        fine = tick[0] + period * np.arange(first, min(first + AT_ONCE, rows))
        _write_frames(
            writer,
            first,
            fine,
            _drawn_out(fine, tick, columns, encoders, random),
            status[np.searchsorted(tick, fine, side="right") - 1],
        )
    for event in session.events:
        writer.event(event)
    for told in session.results["live"]:
        writer.result({"which": "live", **told})
    writer.result({"which": "final", **session.results["final"]})
    writer.close()


def _drawn_out(
    fine: NDArray[np.int64],
    tick: NDArray[np.int64],
    columns: list[NDArray[np.float64]],
    encoders: list[bool],
    random: np.random.Generator,
) -> NDArray[np.int32]:
    """Raw rows at the ticks `fine`, shape (n, channels): on the lines between the slow ones, with noise."""
    part = slice(*np.searchsorted(tick, (fine[0] - (tick[1] - tick[0]), fine[-1] + 2 * (tick[1] - tick[0]))))
    made = [np.interp(fine, tick[part], column[part]) for column in columns]
    noise = random.normal(0.0, NOISE_COUNTS, (len(fine), len(columns)))
    noise[:, encoders] = 0.0  # they count
    warming = 1500.0 * (1.0 - np.exp(-1e-9 * (fine - tick[0])))
    slow = np.column_stack((warming, np.full(len(fine), 300.0))) + random.normal(0.0, 3.0, (len(fine), 2))
    return np.round(np.column_stack((np.column_stack(made) + noise, slow))).astype(np.int32)


def _write_frames(
    writer: JournalWriter,
    first: int,
    tick: NDArray[np.int64],
    raw: NDArray[np.int32],
    status: NDArray[np.uint16],
) -> None:
    period = int(tick[1] - tick[0])
    for at in range(0, len(tick), FRAME_ROWS):
        row = first + at
        writer.frame(
            RowFrame(
                row // FRAME_ROWS,
                int(tick[at]) & 0xFFFFFFFF,
                period,
                row,
                int(status[at]),
                0,
                raw[at : at + FRAME_ROWS],
            )
        )
