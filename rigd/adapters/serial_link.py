"""Opens a port through pyserial, exclusively, and tells why it cannot.

Everything here blocks (a USB adapter may take 0.3 s to open) and is called in a thread by ``open_link``.
"""

from __future__ import annotations

import contextlib
import errno
import os
import sys
from dataclasses import replace
from typing import Any

import serial

from rigd.adapters.descriptor_link import DescriptorLink
from rigd.adapters.thread_link import ThreadLink
from rigd.model.devices import LinkSpec
from rigd.model.errors import LinkBusy, LinkClosed, LinkError

_PARITY = {"none": "N", "even": "E", "odd": "O", "mark": "M", "space": "S"}
_BUSY = (errno.EAGAIN, errno.EWOULDBLOCK, errno.EBUSY)
_REMEDY = {
    errno.ENOENT: "there is no such port; check the cable, or the name with: ls -l /dev/serial/by-id",
    errno.EACCES: "no permission; add the user to the group that owns the port (often 'dialout') and log in again",
    errno.ENOTTY: "this is not a serial port",
}
THREAD_POLL_S = 0.1

try:
    import termios

    _NOT_SET: tuple[type[Exception], ...] = (ValueError, termios.error)
except ImportError:  # not a POSIX system
    _NOT_SET = (ValueError,)


def open_port(spec: LinkSpec) -> serial.Serial:
    """Open and set up the port; raises ``LinkBusy`` for one in use, else ``LinkClosed``, each with one sentence."""
    spec = as_the_port_can(spec)
    settings: dict[str, Any] = {
        "baudrate": spec.baud,
        "bytesize": spec.data_bits,
        "parity": _PARITY.get(spec.parity, spec.parity),
        "stopbits": spec.stop_bits,
        "timeout": THREAD_POLL_S,
        "exclusive": True,
    }
    if not spec.port.startswith(("rfc2217://", "loop://")):
        settings["inter_byte_timeout"] = 0.0  # VMIN 1: on POSIX, reading nothing then never looks like an end of file
    try:
        port = serial.serial_for_url(spec.port, **settings)
    except (serial.SerialException, OSError) as error:
        raise _explain(spec.port, error) from error
    except _NOT_SET as error:
        raise LinkError(f"port {spec.port!r} cannot be set up: {error}") from error
    _low_latency(port)
    return port


def as_the_port_can(spec: LinkSpec) -> LinkSpec:
    """A pseudo-terminal has neither data bits nor parity, and asking for them fails: there they are left out."""
    if not os.path.realpath(spec.port).startswith("/dev/pts/"):
        return spec
    return replace(spec, data_bits=8, parity="none", stop_bits=1.0)


def make_link(spec: LinkSpec, port: serial.Serial) -> DescriptorLink | ThreadLink:
    """The link for an open port: watched by the loop where it has a descriptor of its own, else a thread."""
    if _watchable(port):
        return DescriptorLink(spec.port, port.fileno(), port.close, port.reset_output_buffer)
    return ThreadLink(spec.port, port)


def _watchable(port: serial.Serial) -> bool:
    return sys.platform != "win32" and type(port) is serial.Serial


def _explain(name: str, error: OSError) -> LinkError:
    number = error.errno
    if number in _BUSY or "exclusively lock" in str(error):
        return LinkBusy(f"port {name} is in use by another process; end that one, or name another port")
    remedy = _REMEDY.get(number or 0)
    return LinkClosed(f"cannot open port {name}: {remedy or error}")


def _low_latency(port: serial.Serial) -> None:
    """Ask USB adapters not to hold bytes back for 16 ms; ports that know no such thing say so, and that is fine."""
    ask = getattr(port, "set_low_latency_mode", None)
    if ask is not None:
        with contextlib.suppress(ValueError, OSError, NotImplementedError, AttributeError):
            ask(True)
