"""Options of a chiller in the rig file."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from rigd_drivers.options import Options


class ChillerOptions(Options):
    """``when_lost``: what the last will does when control has died."""

    when_lost: Literal["keep", "off"] = Field(
        default="keep",
        description="'keep' (go on cooling or heating at the set-point) or 'off' (circulation and thermostat off)",
    )
