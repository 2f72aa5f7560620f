"""Options of a syringe pump in the rig file."""

from __future__ import annotations

from pydantic import Field

from rigd_drivers.options import Options, Seconds


class PumpOptions(Options):
    """``silence``: the pump stops by itself when it hears nothing for so long; "0 s" for never."""

    silence: Seconds = Field(
        default=10.0, ge=0, le=3600, description="time without a request after which the pump stops; '0 s' to '1 h'"
    )
