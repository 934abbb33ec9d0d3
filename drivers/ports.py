"""Serial ports and TCP links of this machine. The only module that imports pyserial.

An address is a device ("/dev/ttyACM0", "COM3") or "socket://HOST:PORT".
"""

from __future__ import annotations

import errno
import os
import select
import socket
from contextlib import suppress
from dataclasses import dataclass
from typing import Protocol
from urllib.parse import urlsplit

import serial
from serial.tools import list_ports

from drivers.errors import LinkError, LinkTimeout

#: Far above what a link brings between two reads; one read takes all there is.
BLOCK_BYTES = 1 << 16
#: A line that takes nothing for so long is blocked; the board's watchdog acts after the same time.
WRITE_S = 0.2


@dataclass(frozen=True)
class Port:
    """A serial port as the operating system names it."""

    device: str
    description: str


def serial_ports() -> tuple[Port, ...]:
    """The serial ports present, in order of name; opens none of them (opening resets many boards)."""
    return tuple(Port(port.device, port.description or "") for port in sorted(list_ports.comports()))


class Wire(Protocol):
    """Bytes to and from a board."""

    def read(self, max_wait_s: float) -> bytes:
        """All bytes there are, after waiting up to `max_wait_s` for the first; b"" is silence.

        LinkError when the other end is gone, which silence is not.
        """

    def write(self, data: bytes) -> None:
        """LinkTimeout if the line does not take the bytes, LinkError when the other end is gone."""

    def close(self) -> None: ...


class SerialWire:
    """A serial port or TCP link, for this process alone; what is at its end is named in sentences.

    LinkError if it cannot be opened: malformed, absent, in use, not permitted.
    """

    def __init__(self, address: str, baud: int, end: str = "the bench", device: str = "the board") -> None:
        self._address, self._end, self._device = address, end, device
        if wrong := malformed(address):
            raise LinkError(wrong)
        self._tcp = tcp = address.startswith("socket://")
        settings = {} if tcp else {"exclusive": True}
        try:
            self._port = serial.serial_for_url(
                address, baudrate=baud, timeout=0, write_timeout=WRITE_S, **settings
            )
        except (serial.SerialException, OSError, ValueError) as error:
            raise LinkError(f"{address} cannot be opened: {_reason(error)}") from None
        try:
            # Elsewhere only sockets can be waited on.
            self._descriptor: int | None = self._port.fileno() if tcp or os.name == "posix" else None
        except (OSError, AttributeError):
            self._descriptor = None
        if tcp and self._descriptor is not None:
            # Else a command right behind a heartbeat waits for the answer to it: measured, 43 ms of 120.
            line = socket.socket(fileno=self._descriptor)
            line.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
            line.detach()

    def read(self, max_wait_s: float) -> bytes:
        try:
            if self._descriptor is not None:
                # One wait for the first byte, then everything at once: reads byte by byte lose rows.
                if not select.select([self._descriptor], [], [], max(max_wait_s, 0.0))[0]:
                    return b""
                return bytes(self._port.read(BLOCK_BYTES))
            self._port.timeout = max(max_wait_s, 0.0)
            first = bytes(self._port.read(1))
            return first + bytes(self._port.read(self._port.in_waiting)) if first else b""
        except (serial.SerialException, OSError, ValueError, TypeError) as error:
            raise self._gone(error) from None

    def write(self, data: bytes) -> None:
        try:
            if self._descriptor is not None and os.name == "posix":
                self._send(self._descriptor, data)
            else:
                self._port.write(data)
        except serial.SerialTimeoutException:
            raise LinkTimeout(f"{self._address} takes no more bytes: {self._device} does not read") from None
        except (serial.SerialException, OSError, ValueError, TypeError) as error:
            raise self._gone(error) from None

    def _send(self, descriptor: int, data: bytes) -> None:
        """Write until all is taken. Only a line that stays full for WRITE_S is one that does not take it: a program
        that was kept from running for so long has lost nothing."""
        os.set_blocking(descriptor, False)
        rest = memoryview(data)
        while rest:
            with suppress(BlockingIOError):
                rest = rest[os.write(descriptor, rest) :]
            if rest and not select.select([], [descriptor], [], WRITE_S)[1]:
                raise serial.SerialTimeoutException("full")

    def close(self) -> None:
        line = getattr(self._port, "_socket", None)
        with suppress(serial.SerialException, OSError):
            self._port.close()
        if line is not None:
            line.close()  # pyserial leaves one open whose peer has reset it

    def _gone(self, error: Exception) -> LinkError:
        # A serial port that another program has is not opened at all; a TCP port takes up its next caller and hangs up.
        why = f"unplugged, or {self._device} has gone"
        if self._tcp:
            why = f"unplugged, {self._device} has gone, or another program has it"
        return LinkError(f"the line to {self._end} is down ({self._address}): {why}")


def open_wire(
    address: str, baud: int = 1_000_000, *, end: str = "the bench", device: str = "the board"
) -> SerialWire:
    """Open a serial port or TCP link exclusively. LinkError, with the reason, if that cannot be done.

    `end` and `device` are what its sentences call the far end and what is plugged in there.
    """
    return SerialWire(address, baud, end, device)


def malformed(address: str) -> str:
    """A sentence about an address that cannot be one, "" if it may be: that needs no line to be tried."""
    if address.startswith("socket://"):
        return "" if _complete(address) else f"{address} cannot be opened: expected socket://HOST:PORT"
    if "://" in address:
        return f"{address} cannot be opened: expected a serial device or socket://HOST:PORT"
    return ""


NO_PORT, IN_USE, NO_TTY = "there is no such port", "another program has it open", "it is no serial port"
NOT_PERMITTED = "permission denied; the user must belong to the group that owns serial ports"
#: Error numbers of the operating system -> what they mean for a port.
REASONS = {
    errno.ENOENT: NO_PORT,
    errno.EAGAIN: IN_USE,  # it holds the lock
    errno.EBUSY: IN_USE,
    errno.EACCES: NOT_PERMITTED,
    errno.EPERM: NOT_PERMITTED,
    errno.ENOTTY: NO_TTY,
    errno.EISDIR: NO_TTY,
    errno.ECONNREFUSED: "nobody listens there",
    socket.EAI_NONAME: "there is no such host",
}
#: On Windows pyserial tells the system's error in words only, and an open port as one not permitted.
WORDS = {"FileNotFoundError": NO_PORT, "PermissionError": IN_USE}


def _reason(error: BaseException) -> str:
    """In words of ours where the cause is known; an address may hold any word, so numbers are asked first."""
    cause: BaseException | None = error
    while cause is not None:  # pyserial puts an error of its own, without a number, around the system's
        number = getattr(cause, "errno", None) or (cause.args[0] if cause.args else None)
        if number in REASONS:
            return REASONS[number]
        cause = cause.__cause__ or cause.__context__
    words = str(error)
    return next((reason for word, reason in WORDS.items() if word in words), words.split("\n")[0])


def _complete(address: str) -> bool:
    """Whether a TCP address names a host and a port."""
    try:
        parts = urlsplit(address)
        return bool(parts.hostname) and parts.port is not None
    except ValueError:  # a port that is no number, or beyond 65535
        return False
