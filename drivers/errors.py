"""What can go wrong between the host and a bench.

    BenchError                 anything below; carries one sentence for the operator
    |- LinkError               the wire: unplugged, silent, garbled beyond repair
    |  `- LinkTimeout          no answer in time (also a standard TimeoutError)
    |- BenchRefused            the bench understood and said no: not armed, latched, out of range
    |- BenchMisuse             our own mistake: read before open, tap on a bench without a tapper
    `- HardwareFault           the bench reports a fault: stall trip, bridge fault, watchdog cut

A lost or corrupt frame is no exception: it is counted and recorded (see `drivers.rows`).
"""

from __future__ import annotations


class BenchError(Exception):
    """Base of all bench errors; `str(error)` is one sentence fit for the operator."""


class LinkError(BenchError):
    """The line to the bench failed. Example: the cable was pulled during a ramp."""


class LinkTimeout(LinkError, TimeoutError):
    """The bench did not answer in time. Example: a board that hangs in its boot loader."""


class BenchRefused(BenchError):
    """The bench refused a command. Example: a drive command while the enable latch is off."""


class BenchMisuse(BenchError):
    """The program broke the contract. Example: reading a bench that was never opened."""


class HardwareFault(BenchError):
    """The bench reports a fault of its own. Example: the bridge driver signals over-temperature."""
