"""Every exception that crosses a room.

    RigError
      ConfigError        a file is wrong; carries all problems found (``rigd.model.problems``)
      PluginError        a driver or plant package is missing or broken; names it
      LinkError          the way to a device failed
        LinkTimeout        no (whole) reply in time
        LinkClosed         the port is gone
        LinkBusy           the port belongs to another process
      ProtocolError      bytes against the device's manual
        LocalProtocolError   we were about to send nonsense
        DeviceProtocolError  the device sent nonsense
      DeviceRefused      the device understood and said no; carries its words
      WrongDevice        another device answers than the rig file names
      JournalError       the journal cannot be opened, read or written
      DoorError          the daemon's door cannot be reached or said no

Expected process conditions (a bad sample, a refused request) are values, not exceptions. ``CancelledError`` is never
converted.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from rigd.model.problems import Problem


class RigError(Exception):
    """Base of all; its text is one sentence for a person."""


class ConfigError(RigError):
    """One or more problems in files that people write."""

    def __init__(self, problems: tuple[Problem, ...]) -> None:
        super().__init__("; ".join(str(problem) for problem in problems))
        self.problems = problems


class PluginError(RigError):
    """A plug-in is missing or breaks its contract."""


class LinkError(RigError):
    """The way to a device failed."""


class LinkTimeout(LinkError):
    """No whole reply within the deadline."""


class LinkClosed(LinkError):
    """The port vanished or was closed."""


class LinkBusy(LinkError):
    """Another process holds the port."""


class ProtocolError(RigError):
    """Bytes against the manual; raise one of the two below."""


class LocalProtocolError(ProtocolError):
    """A request that the device's manual does not allow."""


class DeviceProtocolError(ProtocolError):
    """A reply that the device's manual does not allow."""


class DeviceRefused(RigError):
    """The device understood the request and refused it."""


class WrongDevice(RigError):
    """Another device answers than the one the rig file names."""


class JournalError(RigError):
    """The journal cannot be opened, read or written."""


class DoorError(RigError):
    """The daemon's door cannot be reached, or refused."""
