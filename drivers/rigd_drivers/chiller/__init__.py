"""Circulating chiller, plain protocol (manual, 2). Nothing here knows another family."""

from rigd_drivers.chiller.driver import FAMILY

__all__ = ["FAMILY"]
