"""Spectra that an instrument's own program writes into a folder, or an instrument sends unasked. Nothing here knows
another family; the files themselves are opened by the link (``folder://``), never here."""

from rigd_drivers.spectra.driver import FOLDER, STREAM

__all__ = ["FOLDER", "STREAM"]
