"""Wires of the operating system: pseudo-terminals and TCP on loopback, as they are and as they fail."""

from __future__ import annotations

import os
import select
import socket
import struct
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import pytest
import serial

from drivers import ports
from drivers.errors import LinkError, LinkTimeout
from drivers.ports import SerialWire, open_wire, serial_ports

pty_only = pytest.mark.skipif(not hasattr(os, "openpty"), reason="this system has no pseudo-terminals")
ALL_BYTES = bytes(range(256))


class Pty:
    """A pseudo-terminal that changes no byte; the test holds the master."""

    def __init__(self) -> None:
        import tty

        self.master, self.slave = os.openpty()
        tty.setraw(self.slave)
        self.name = os.ttyname(self.slave)

    def hang_up(self) -> None:
        for descriptor in (self.master, self.slave):
            if descriptor >= 0:
                os.close(descriptor)
        self.master = self.slave = -1


@pytest.fixture
def pty() -> Iterator[Pty]:
    pty = Pty()
    yield pty
    pty.hang_up()


class Server:
    """One TCP connection on a free port of loopback."""

    def __init__(self) -> None:
        self.listener = socket.create_server(("127.0.0.1", 0))
        self.address = f"socket://127.0.0.1:{self.listener.getsockname()[1]}"
        self.wire = SerialWire(self.address, 115_200)
        self.line, _ = self.listener.accept()

    def close(self) -> None:
        self.wire.close()
        self.line.close()
        self.listener.close()


@pytest.fixture
def server() -> Iterator[Server]:
    server = Server()
    yield server
    server.close()


def read(wire: SerialWire, count: int) -> bytes:
    data = b""
    for _ in range(200):
        data += wire.read(0.05)
        if len(data) >= count:
            return data
    raise AssertionError(f"{len(data)} of {count} bytes came")


def sentence(address: str) -> str:
    with pytest.raises(LinkError) as error:
        SerialWire(address, 115_200)
    words = str(error.value)
    assert words.startswith(f"{address} cannot be opened: ") and "\n" not in words
    return words.removeprefix(f"{address} cannot be opened: ")


def in_another_process(address: str) -> str:
    """What opening the port there brings: a sentence, or "open"."""
    script = (
        "import sys; from drivers.errors import LinkError; from drivers.ports import SerialWire\n"
        "try: SerialWire(sys.argv[1], 115200); print('open')\n"
        "except LinkError as error: print(error)"
    )
    done = subprocess.run(
        [sys.executable, "-B", "-c", script, address],
        cwd=Path(ports.__file__).parents[1],
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    return done.stdout.strip()


# Pseudo-terminals


@pty_only
def test_every_byte_passes_both_ways(pty: Pty) -> None:
    wire = open_wire(pty.name)
    os.write(pty.master, ALL_BYTES * 4)
    assert read(wire, 1024) == ALL_BYTES * 4
    wire.write(ALL_BYTES)
    assert os.read(pty.master, 1000) == ALL_BYTES
    wire.close()


@pty_only
def test_bytes_come_in_blocks_not_one_by_one(pty: Pty) -> None:
    wire = SerialWire(pty.name, 115_200)
    for _ in range(50):
        os.write(pty.master, b"x" * 40)
    count = reads = 0
    while count < 2000:
        count += len(wire.read(1.0))
        reads += 1
        assert reads <= 60  # one for each piece written, should each be carried alone
    wire.close()


@pty_only
@pytest.mark.parametrize("wait_s", [-1.0, 0.0, 0.02])
def test_silence_is_no_bytes(pty: Pty, wait_s: float) -> None:
    wire = SerialWire(pty.name, 115_200)
    begun_s = time.monotonic()
    assert wire.read(wait_s) == b""
    assert time.monotonic() - begun_s >= 0.9 * wait_s
    wire.close()


@pty_only
def test_what_was_said_before_the_port_was_opened_is_not_read(pty: Pty) -> None:
    """Bytes of an earlier conversation wait in the system's buffer."""
    os.write(pty.master, b"old")
    assert select.select([pty.slave], [], [], 10.0)[0]
    wire = SerialWire(pty.name, 115_200)
    os.write(pty.master, b"new")
    assert read(wire, 3) == b"new"
    wire.close()


@pty_only
def test_a_port_is_for_one_program(pty: Pty) -> None:
    wire = SerialWire(pty.name, 115_200)
    refused = f"{pty.name} cannot be opened: another program has it open"
    assert in_another_process(pty.name) == refused
    assert sentence(pty.name) == "another program has it open"
    os.write(pty.master, b"still here")
    assert read(wire, 10) == b"still here"
    wire.close()
    assert in_another_process(pty.name) == "open"
    SerialWire(pty.name, 115_200).close()


@pty_only
@pytest.mark.parametrize("wait_s", [0.0, 0.5])
def test_a_line_that_was_hung_up_is_an_error(pty: Pty, wait_s: float) -> None:
    wire = SerialWire(pty.name, 115_200)
    pty.hang_up()
    with pytest.raises(LinkError) as error:
        wire.read(wait_s)
    assert not isinstance(error.value, LinkTimeout)
    assert str(error.value) == f"the line to the bench is down ({pty.name}): unplugged, or the board has gone"
    with pytest.raises(LinkError, match="is down"):
        wire.write(b"anyone?")
    wire.close()
    wire.close()


@pty_only
def test_a_full_line_is_a_timeout_and_goes_on_when_it_is_read(pty: Pty) -> None:
    wire = SerialWire(pty.name, 115_200)
    sent = 0
    with pytest.raises(LinkTimeout, match="takes no more bytes: the board does not read"):
        for _ in range(1000):
            wire.write(b"y" * 1000)
            sent += 1000
    assert 0 < sent < 1_000_000
    os.set_blocking(pty.master, False)
    for _ in range(1000):
        try:
            taken = os.read(pty.master, 1 << 16)
        except BlockingIOError:
            break
        assert set(taken) == {ord("y")}
    wire.write(b"again")
    os.set_blocking(pty.master, True)
    assert os.read(pty.master, 1000).endswith(b"again")
    wire.close()


@pty_only
def test_a_closed_wire_is_down(pty: Pty) -> None:
    wire = SerialWire(pty.name, 115_200)
    wire.close()
    with pytest.raises(LinkError, match="is down"):
        wire.read(0.0)
    with pytest.raises(LinkError, match="is down"):
        wire.write(b"x")


# Ports that cannot be opened


def test_an_absent_port(tmp_path: Path) -> None:
    assert sentence(str(tmp_path / "ttyLOCK0")) == "there is no such port"
    dangling = tmp_path / "bench"
    dangling.symlink_to(tmp_path / "unplugged")
    assert sentence(str(dangling)) == "there is no such port"
    assert sentence("") == "there is no such port"


@pytest.mark.skipif(os.name != "posix", reason="devices are files on POSIX systems only")
def test_what_is_no_serial_port(tmp_path: Path) -> None:
    file = tmp_path / "permission denied, locked"  # words in a name mean nothing
    file.write_text("text")
    for address in (str(file), str(tmp_path), "/dev/null"):
        assert sentence(address) == "it is no serial port"


@pytest.mark.skipif(os.name != "posix", reason="permissions of files on POSIX systems only")
def test_a_port_without_permission(tmp_path: Path) -> None:
    tmp_path.chmod(0o755)
    port = tmp_path / "ttyX"
    port.touch()
    port.chmod(0)
    wanted = "permission denied; the user must belong to the group that owns serial ports"
    root = os.geteuid() == 0
    if root:  # it may open anything: be another user for a moment
        os.seteuid(65_534)
    try:
        assert sentence(str(port)) == wanted
    finally:
        if root:
            os.seteuid(0)


@pytest.mark.parametrize(
    ("words", "reason"),
    [
        ("could not open port 'COM9': FileNotFoundError(2, 'not found', None, 2)", "there is no such port"),
        ("could not open port 'COM3': PermissionError(13, 'denied', None, 5)", "another program has it open"),
        ("something else\nand more", "something else"),
    ],
)
def test_windows_tells_its_reasons_in_words(monkeypatch: pytest.MonkeyPatch, words: str, reason: str) -> None:
    """The sentences of pyserial's Windows part, value from memory: it cannot run here."""

    def refuse(*arguments: object, **settings: object) -> None:
        raise serial.SerialException(words)

    monkeypatch.setattr(ports.serial, "serial_for_url", refuse)
    assert sentence("COM3") == reason


def test_an_impossible_baud_rate(tmp_path: Path) -> None:
    with pytest.raises(LinkError, match="cannot be opened"):
        SerialWire(str(tmp_path), -5)


def test_ports_are_listed_without_being_opened(monkeypatch: pytest.MonkeyPatch) -> None:
    class Found:
        def __init__(self, device: str, description: str | None) -> None:
            self.device, self.description = device, description

        def __lt__(self, other: Found) -> bool:
            return self.device < other.device

    monkeypatch.setattr(
        ports.list_ports, "comports", lambda: [Found("/dev/b", None), Found("/dev/a", "board")]
    )
    monkeypatch.setattr(ports.serial, "serial_for_url", None)
    assert serial_ports() == (ports.Port("/dev/a", "board"), ports.Port("/dev/b", ""))


# TCP


def test_every_byte_passes_over_tcp(server: Server) -> None:
    server.line.sendall(ALL_BYTES * 40)
    assert read(server.wire, 10_240) == ALL_BYTES * 40
    server.wire.write(ALL_BYTES)
    assert server.line.recv(1000) == ALL_BYTES
    assert server.wire.read(0.0) == b""


def test_a_command_does_not_wait_for_the_answer_to_a_heartbeat(server: Server) -> None:
    line = socket.socket(fileno=os.dup(server.wire._port.fileno()))
    with line:
        assert line.getsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY) != 0


def test_nobody_listens() -> None:
    with socket.socket() as taken:  # bound but not listening: surely nobody else does
        taken.bind(("127.0.0.1", 0))
        assert sentence(f"socket://127.0.0.1:{taken.getsockname()[1]}") == "nobody listens there"


@pytest.mark.parametrize(
    "address", ["socket://127.0.0.1", "socket://", "socket://:5", "socket://127.0.0.1:99999", "socket://a:b"]
)
def test_an_address_that_is_not_complete(address: str) -> None:
    assert sentence(address) == "expected socket://HOST:PORT"


def test_an_unknown_kind_of_address() -> None:
    assert sentence("foo://x") == "expected a serial device or socket://HOST:PORT"


def test_the_last_bytes_of_a_peer_that_closes_are_read_first(server: Server) -> None:
    server.line.sendall(b"last words")
    server.line.close()
    assert read(server.wire, 10) == b"last words"
    for wait_s in (0.5, 0.0):  # a port that serves one program hangs up on the next
        with pytest.raises(LinkError, match=r"is down .*, or another program has it") as error:
            server.wire.read(wait_s)
        assert not isinstance(error.value, LinkTimeout)


def test_a_peer_that_closes_while_it_is_written_to(server: Server) -> None:
    """Abruptly, as when its program is killed: the first write may still be taken."""
    server.line.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, struct.pack("ii", 1, 0))
    server.line.close()
    with pytest.raises(LinkError, match="is down"):
        for _ in range(100):
            server.wire.write(b"x" * 100)
            time.sleep(0.01)
    with pytest.raises(LinkError, match="is down"):
        server.wire.read(0.1)
    server.wire.close()


def test_a_peer_that_does_not_read_is_a_timeout(server: Server) -> None:
    with pytest.raises(LinkTimeout, match="takes no more bytes"):
        for _ in range(1000):
            server.wire.write(b"y" * 65_536)
    taken = 0
    server.line.settimeout(5.0)
    while taken < 100_000:
        taken += len(server.line.recv(65_536))
    server.wire.close()


def test_a_closed_tcp_wire_is_down(server: Server) -> None:
    server.wire.close()
    with pytest.raises(LinkError, match="is down"):
        server.wire.read(0.0)
    with pytest.raises(LinkError, match="is down"):
        server.wire.write(b"x")
