"""Protocol cards: a TOML file declares a device, one engine speaks with it. No knowledge of any single device here."""

from rigd_drivers.card.driver import FAMILY

__all__ = ["FAMILY"]
