"""Serial ports of this machine. The only module that imports pyserial."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Port:
    """A serial port as the operating system names it."""

    device: str
    description: str


def serial_ports() -> tuple[Port, ...]:
    """The serial ports present, in order of name; opens none of them (opening resets many boards)."""
    from serial.tools import list_ports

    return tuple(Port(port.device, port.description or "") for port in sorted(list_ports.comports()))
