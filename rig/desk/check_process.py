"""The process that checks files while they are typed: one question at a time, the answer pickled.

    question   {"number": 3, "texts": [rig text, rig name, protocol text, protocol name]}      a line of JSON
    answer     number and length (8 bytes each, big endian), then a pickled `Checked` or a sentence

A process of its own, because a check can take minutes (a long protocol) and can only be given up by ending it, and
because the window gives the bench its sign of life: nothing in its process may hold it up. Ends with its input.
"""

from __future__ import annotations

import json
import os
import pickle
import queue
import struct
import sys
import threading
from contextlib import suppress

HEAD = struct.Struct(">QQ")
#: Answered once everything is loaded, before any question.
READY = 0


def _hear(questions: queue.SimpleQueue[str]) -> None:
    for line in sys.stdin:
        questions.put(line)
    os._exit(0)  # the window has gone; a check under way is of no use to anybody


def _tell(descriptor: int, number: int, answer: object) -> None:
    data = pickle.dumps(answer)
    data = HEAD.pack(number, len(data)) + data
    while data:
        data = data[os.write(descriptor, data) :]


def main() -> None:
    """Entry of the process."""
    out = os.dup(sys.stdout.fileno())
    os.dup2(sys.stderr.fileno(), sys.stdout.fileno())  # a stray print must not break an answer
    with suppress(OSError, AttributeError):
        os.nice(5)  # a run that is on comes first
    questions: queue.SimpleQueue[str] = queue.SimpleQueue()
    threading.Thread(target=_hear, args=(questions,), name="questions", daemon=True).start()
    from rig.desk.model.checked import check

    with suppress(OSError):  # the window closed meanwhile
        _tell(out, READY, "")
        while True:
            question = json.loads(questions.get())
            answer: object
            try:
                answer = check(*question["texts"])
            except Exception as error:  # a sentence for whatever the numerics may do with odd constants
                answer = f"The dry run cannot be worked out ({type(error).__name__}: {error})."
            _tell(out, int(question["number"]), answer)


if __name__ == "__main__":
    main()
