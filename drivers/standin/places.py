"""Where a stand-in can be reached: a pseudo-terminal or a TCP port of this machine."""

from __future__ import annotations

import errno
import os
import socket
from contextlib import suppress
from pathlib import Path
from typing import Protocol

from drivers.errors import LinkError


class Place(Protocol):
    """One line to one host. Nothing here waits; `descriptors` are to be waited on."""

    address: str

    def descriptors(self) -> list[int]: ...

    def read(self) -> bytes:
        """What has come, b"" if nothing; takes up a waiting connection."""

    def write(self, data: bytes) -> int:
        """Bytes taken, 0 if the line is full or nobody is there."""

    def unplug(self) -> None: ...

    def plug_in(self) -> None: ...

    def close(self) -> None: ...


class PtyPlace:
    """A pseudo-terminal; `link` is a name that stays the same when it is unplugged and plugged in again.

    LinkError where the system has none, or if the link's name is taken by something else.
    """

    def __init__(self, link: Path | None = None) -> None:
        self._link = link
        if link is not None and link.exists() and not link.is_symlink():
            raise LinkError(f"{link} is there already and is no link")
        self._master = self._slave = -1
        self.address = ""
        self.plug_in()

    def plug_in(self) -> None:
        if self._master >= 0:
            return
        try:
            import tty

            self._master, self._slave = os.openpty()
            tty.setraw(self._slave)
        except (ImportError, AttributeError, OSError):
            raise LinkError(
                "this system has no pseudo-terminals; serve the stand-in on TCP instead"
            ) from None
        os.set_blocking(self._master, False)
        self.address = os.ttyname(self._slave)
        if self._link is not None:
            aside = self._link.with_name(f".{self._link.name}.new")
            aside.unlink(missing_ok=True)
            aside.symlink_to(self.address)
            aside.replace(self._link)
            self.address = str(self._link)

    def descriptors(self) -> list[int]:
        return [self._master] if self._master >= 0 else []

    def read(self) -> bytes:
        if self._master < 0:
            return b""
        try:
            return os.read(self._master, 1 << 16)
        except OSError:
            return b""

    def write(self, data: bytes) -> int:
        if self._master < 0:
            return 0
        try:
            return os.write(self._master, data)
        except OSError:  # full
            return 0

    def unplug(self) -> None:
        for descriptor in (self._master, self._slave):
            with suppress(OSError):
                os.close(descriptor)
        self._master = self._slave = -1

    def close(self) -> None:
        self.unplug()
        if self._link is not None and self._link.is_symlink():
            self._link.unlink()


class TcpPlace:
    """A TCP port, on loopback unless told otherwise; port 0 takes a free one. LinkError if it is in use."""

    def __init__(self, port: int = 0, host: str = "127.0.0.1") -> None:
        self._host = host
        self._port = port
        self._listener: socket.socket | None = None
        self._line: socket.socket | None = None
        self.connections = 0
        self.plug_in()

    def plug_in(self) -> None:
        if self._listener is not None:
            return
        listener = socket.socket(socket.AF_INET, socket.SOCK_STREAM)
        listener.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        try:
            listener.bind((self._host, self._port))
        except OSError as error:
            listener.close()
            why = (error.strerror or str(error)).lower()
            if error.errno == errno.EADDRINUSE:
                why = "another program has it"
            raise LinkError(f"TCP port {self._port} of {self._host} cannot be used: {why}") from None
        listener.listen(1)
        listener.setblocking(False)
        self._listener = listener
        self._port = listener.getsockname()[1]
        self.address = f"socket://{self._host}:{self._port}"

    def descriptors(self) -> list[int]:
        return [one.fileno() for one in (self._listener, self._line) if one is not None]

    def read(self) -> bytes:
        if self._listener is not None:
            with suppress(OSError):
                line, _ = self._listener.accept()
                if self._line is not None:
                    line.close()  # one host at a time
                else:
                    line.setblocking(False)
                    line.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
                    # A small buffer, like a board's: rows that nobody reads must not pile up for seconds.
                    line.setsockopt(socket.SOL_SOCKET, socket.SO_SNDBUF, 1 << 16)
                    self._line = line
                    self.connections += 1
        if self._line is None:
            return b""
        try:
            data = self._line.recv(1 << 16)
        except BlockingIOError:
            return b""
        except OSError:
            data = b""
        if not data:
            self._hang_up()
        return data

    def write(self, data: bytes) -> int:
        if self._line is None:
            return 0
        try:
            return self._line.send(data)
        except BlockingIOError:
            return 0
        except OSError:
            self._hang_up()
            return 0

    def unplug(self) -> None:
        self._hang_up()
        if self._listener is not None:
            self._listener.close()
        self._listener = None

    def close(self) -> None:
        self.unplug()

    def _hang_up(self) -> None:
        if self._line is not None:
            self._line.close()
        self._line = None
