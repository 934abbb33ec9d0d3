"""The process that fits taps of a session in replay: `python -m rig.desk.tap_process SESSION`.

    question   12                                  number of a tap, a line
    answer     {"tap": 12, "picture": {...}}       a line of JSON; null where none can be made

A process of its own, because a fit at 10 kHz takes a second and the window would draw late meanwhile. Ends with its
input.
"""

from __future__ import annotations

import json
import os
import sys
import threading
from contextlib import suppress
from queue import SimpleQueue


def _hear(questions: SimpleQueue[str]) -> None:
    for line in sys.stdin:
        questions.put(line)
    os._exit(0)  # the replay was left; a fit under way is of no use to anybody


def main() -> None:
    """Entry of the process."""
    out = os.fdopen(os.dup(sys.stdout.fileno()), "w", encoding="utf-8")
    os.dup2(sys.stderr.fileno(), sys.stdout.fileno())  # a stray print must not break an answer
    with suppress(OSError, AttributeError):
        os.nice(5)  # drawing comes first
    questions: SimpleQueue[str] = SimpleQueue()
    threading.Thread(target=_hear, args=(questions,), name="questions", daemon=True).start()
    # What takes a second to load; it is there by the time of the first question.
    from rig.desk.model.replay_model import ReplayModel
    from rig.evaluation import pictures  # noqa: F401
    from rig.record.errors import Damaged
    from rig.session import open_session

    with open_session(sys.argv[1]) as session, suppress(OSError):  # the window closed meanwhile
        player = ReplayModel(session)
        while True:
            number = int(questions.get())
            try:
                picture = player.picture(number)
            except (Damaged, ValueError):  # what can be seen of the rows is in the traces
                picture = None
            out.write(json.dumps({"tap": number, "picture": picture}) + "\n")
            out.flush()


if __name__ == "__main__":
    main()
