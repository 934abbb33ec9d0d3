"""`haltere stand-in`: a simulated rig as a board on a real line."""

from __future__ import annotations

import argparse
import json
import os
import signal
import sys
import threading
from contextlib import ExitStack, suppress
from dataclasses import replace
from pathlib import Path
from typing import Any

from drivers.clock import HostClock
from drivers.errors import BenchError, LinkError
from drivers.standin.board_end import BoardEnd
from drivers.standin.mishaps import Mishap
from drivers.standin.pace import SlippingClock
from drivers.standin.places import Place, PtyPlace, TcpPlace
from drivers.standin.serving import Server
from rig.bench_source import bench_for
from rig.command.exits import CommandError, Exit
from rig.command.sessions import with_seed
from rig.files.rig import read_rig
from rig.shipped import find


def main(words: argparse.Namespace) -> Exit:
    rig = with_seed(read_rig(find(words.rig)), words.seed)
    if rig.mechanism is None or rig.unknown:
        raise CommandError(f"{words.rig}: expected constants of the mechanism, so that it can be simulated")
    if not 0.05 <= words.watchdog <= 10.0:
        raise CommandError(f"--watchdog {words.watchdog:g}: expected seconds from 0.05 to 10")
    mishaps = _mishaps(words.fault)
    # Kernels are compiled when a machine simulates for the first time: that takes seconds, and nobody can connect yet.
    print(f"preparing the simulated {rig.name} ...", file=sys.stderr, flush=True)
    clock = HostClock()
    pace = SlippingClock(clock)
    with ExitStack() as stack:
        tell = None
        if words.log:
            log = stack.enter_context(Path(words.log).open("w", encoding="utf-8"))

            def tell(fields: dict[str, Any]) -> None:
                log.write(json.dumps(fields) + "\n")
                log.flush()

        try:
            bench = bench_for(replace(rig, driver="simulated"), pace, watchdog_s=words.watchdog)
            board = BoardEnd(bench, pace, tell=tell)
            place: Place = (
                TcpPlace(words.tcp)
                if words.tcp is not None
                else PtyPlace(Path(words.link) if words.link else None)
            )
        except LinkError as error:
            raise CommandError(str(error), Exit.HARDWARE) from None
        except BenchError as error:
            raise CommandError(str(error)) from None
        stack.callback(place.close)
        server = Server(board, place, clock, pace, getattr(bench, "faults", None), mishaps, tell)
        print(f"{rig.name} stands in at {place.address}", flush=True)
        print("End it with Ctrl-C. Nothing is powered: this is a simulation.", file=sys.stderr, flush=True)
        ended = threading.Event()
        for number in (signal.SIGINT, signal.SIGTERM):
            signal.signal(number, lambda *_: ended.set())
        threading.Thread(target=_listen, args=(server,), daemon=True).start()
        with suppress(OSError, AttributeError):
            os.setpriority(os.PRIO_PROCESS, 0, -10)  # a board has a processor of its own
        server.serve(lambda: not ended.is_set())
    _tell_counts(board, pace)
    return Exit.DONE


def _mishaps(texts: list[str]) -> list[Mishap]:
    try:
        return [Mishap.parse(text) for text in texts]
    except ValueError as error:
        raise CommandError(f"--fault {error}") from None


def _listen(server: Server) -> None:
    """Faults asked for on standard input, one a line."""
    with suppress(OSError, ValueError):
        for line in sys.stdin:
            try:
                if line.strip():
                    server.asked.put(Mishap.parse(line))
            except ValueError as error:
                print(f"haltere: {error}", file=sys.stderr, flush=True)


def _tell_counts(board: BoardEnd, pace: SlippingClock) -> None:
    counts = json.loads(board.summary())
    counts["pauses"] = pace.pauses
    counts["paused_s"] = round(pace.slipped_s, 3)
    print(json.dumps(counts), flush=True)
