"""Options of an IR flow cell in the rig file: it needs none; an unknown key is still refused."""

from __future__ import annotations

from rigd_drivers.options import Options


class CellOptions(Options):
    """None."""
