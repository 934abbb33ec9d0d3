"""Samplers of text lines beside the board: a thread each reads, the loop writes down what has come.

A sampler that fails is told and left out; nothing of the run rests on it.
"""

from __future__ import annotations

import queue
import threading
from collections.abc import Sequence
from contextlib import suppress

from drivers.clock import Clock
from drivers.errors import LinkError
from drivers.ports import open_wire
from drivers.text_lines import TextReading, TextSampler, TextSource
from rig.record.journal import JournalWriter
from rig.record.samples import Samples

READ_S = 0.1


class SamplerThread:
    """Reads one sampler; `take` gives what has come, with the host time of its arrival."""

    def __init__(self, sampler: TextSampler, clock: Clock) -> None:
        self.sampler = sampler
        self._clock = clock
        self._came: queue.SimpleQueue[tuple[float, TextReading]] = queue.SimpleQueue()
        self._ending = threading.Event()
        self.failure = ""
        wire = open_wire(sampler.port, sampler.baud, end="the sampler", device="its device")
        self._source = TextSource(sampler, wire)
        self._thread = threading.Thread(target=self._run, name=f"sampler {sampler.name}", daemon=True)
        self._thread.start()

    def take(self) -> list[tuple[float, TextReading]]:
        taken = []
        with suppress(queue.Empty):
            while True:
                taken.append(self._came.get_nowait())
        return taken

    def close(self) -> None:
        self._ending.set()
        self._thread.join()
        self._source.close()

    def _run(self) -> None:
        try:
            while not self._ending.is_set():
                reading = self._source.read(READ_S)
                if reading.rows or reading.damaged:
                    self._came.put((self._clock.now_s(), reading))
        except LinkError as error:
            self.failure = str(error)


class Samplers:
    """All samplers of a rig. LinkError if one cannot be opened: better told before power than missed after."""

    def __init__(self, described: Sequence[TextSampler], clock: Clock, tick_hz: int) -> None:
        self._clock = clock
        self._tick_hz = tick_hz
        self._threads: list[SamplerThread] = []
        self._told: set[str] = set()
        try:
            for sampler in described:
                self._threads.append(SamplerThread(sampler, clock))
        except LinkError:
            self.close()
            raise

    def write(self, journal: JournalWriter, tick: int, running: bool) -> list[str]:
        """Write down what has come; `tick` is the newest row's. Sentences of samplers that have failed since.

        `running`: nothing has ended the run yet, so that it can be said to go on.
        """
        now_s = self._clock.now_s()
        for thread in self._threads:
            for arrival_s, reading in thread.take():
                arrival_tick = max(tick - round((now_s - arrival_s) * self._tick_hz), 0)
                journal.samples(Samples.of(thread.sampler.name, arrival_tick, reading))
        failed = [one for one in self._threads if one.failure and one.sampler.name not in self._told]
        self._told.update(one.sampler.name for one in failed)
        end = "; the run goes on without it" if running else ""
        return [f"sampler {one.sampler.name} has failed: {one.failure}{end}" for one in failed]

    def close(self) -> None:
        for thread in self._threads:
            thread.close()
        self._threads.clear()
