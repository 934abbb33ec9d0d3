"""Serving a stand-in at a place in real time: bytes in, the bench's present moment, bytes out."""

from __future__ import annotations

import queue
import select
from collections.abc import Callable, Sequence

from drivers.clock import Clock
from drivers.standin.board_end import BoardEnd
from drivers.standin.mishaps import Mishap
from drivers.standin.pace import SlippingClock
from drivers.standin.places import Place

#: Longest wait of a turn; a frame of the fastest bench is 2 ms.
TURN_S = 0.001


class Server:
    """One stand-in at one place. `asked` brings faults asked for while it runs."""

    def __init__(
        self,
        board: BoardEnd,
        place: Place,
        clock: Clock,
        pace: SlippingClock,
        bench_faults: object = None,
        planned: Sequence[Mishap] = (),
        tell: Callable[[dict[str, object]], None] | None = None,
    ) -> None:
        self.board = board
        self.place = place
        self.asked: queue.SimpleQueue[Mishap] = queue.SimpleQueue()
        self._clock = clock
        self._pace = pace
        self._bench_faults = bench_faults
        self._planned = sorted(planned, key=lambda mishap: mishap.at_s or 0.0)
        self._began_s = pace.now_s()
        self._tell = tell or (lambda fields: None)

    def serve(self, going: Callable[[], bool], turn_s: float = TURN_S) -> None:
        """Go on while `going()`; one turn is at most `turn_s` of waiting."""
        self._pace.begin()
        while going():
            descriptors = self.place.descriptors()
            blocked = self.board.pending > 0
            before_s = self._clock.now_s()
            if descriptors:
                # A full line says when it takes more; otherwise only what comes ends the wait early.
                select.select(descriptors, descriptors[-1:] if blocked else [], [], turn_s)
            else:
                self._clock.sleep_s(turn_s)
            waited_s = min(self._clock.now_s() - before_s, turn_s)
            pauses, slipped_s = self._pace.pauses, self._pace.slipped_s
            self._pace.turn(waited_s)
            if self._pace.pauses > pauses:
                self._tell({"event": "paused", "for_s": round(self._pace.slipped_s - slipped_s, 3)})
            self.turn()

    def turn(self) -> None:
        self._strike()
        while data := self.place.read():
            self.board.take(data)
        self.board.turn()
        while self.board.pending:
            taken = self.place.write(self.board.outgoing())
            if taken == 0:
                break
            self.board.sent(taken)

    def _strike(self) -> None:
        now_s = self._pace.now_s() - self._began_s
        due = []
        while self._planned and (self._planned[0].at_s or 0.0) <= now_s:
            due.append(self._planned.pop(0))
        while not self.asked.empty():
            mishap = self.asked.get()
            if mishap.at_s is None:
                due.append(mishap)
            else:
                self._planned.append(mishap)
                self._planned.sort(key=lambda one: one.at_s or 0.0)
        for mishap in due:
            self._tell({"event": "fault", "name": mishap.name, "number": mishap.number})
            mishap.happen(self.board, self._bench_faults, self.place)
