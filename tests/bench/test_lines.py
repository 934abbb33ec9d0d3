"""JSON lines over pipes: the end of a pipe is told after all that came through it."""

from __future__ import annotations

import os

from rig.bench.lines import LineReader


def test_a_pipe_has_not_ended_while_something_that_came_is_unread() -> None:
    """Its writer wrote and went while nobody looked: what it wrote is not to be passed over for its absence."""
    out, into = os.pipe()
    os.write(into, b'{"number":1}\n{"number":2}\n')
    os.close(into)
    reader = LineReader(out)
    reader.join()  # it has read to the end by now
    assert not reader.ended
    assert reader.wait(5.0) == {"number": 1}
    assert not reader.ended
    assert reader.take() == [{"number": 2}]
    assert reader.ended and reader.wait(0.0) is None
    os.close(out)


def test_a_pipe_that_brought_nothing_has_ended_with_its_writer() -> None:
    out, into = os.pipe()
    reader = LineReader(out)
    assert not reader.ended
    os.close(into)
    reader.join()
    assert reader.ended and reader.take() == []
    os.close(out)
