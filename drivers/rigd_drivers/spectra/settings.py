"""Options of the two sources of spectra in the rig file."""

from __future__ import annotations

from typing import Literal

from pydantic import Field, field_validator

from rigd_drivers.options import Options, Seconds
from rigd_drivers.spectra import columns, jcamp_dx
from rigd_drivers.spectra.wire import Curve

Format = Literal["jcamp-dx", "csv"]


class SpectraOptions(Options):
    """What both have: the format and, for CSV, the column map; ``window``: the wavenumbers [1/cm] to look between."""

    format: Format = "jcamp-dx"
    x: str = Field(default="1", description="CSV: heading of the wavenumbers [1/cm], or its column counted from 1")
    y: str = Field(default="2", description="CSV: heading of the ordinate, or its column counted from 1")
    ordinate: Literal["absorbance", "transmittance", "percent transmittance"] = "absorbance"
    rows: int = Field(default=0, ge=0, description="CSV: how many rows a whole spectrum has; 0 for any")
    decimal_comma: bool = False
    window: tuple[float, float] | None = Field(
        default=None, description="two wavenumbers in 1/cm, the lower one first; only what is between them is used"
    )

    @field_validator("window")
    @classmethod
    def _rising(cls, found: tuple[float, float] | None) -> tuple[float, float] | None:
        if found is not None and not 0 < found[0] < found[1]:
            raise ValueError("two wavenumbers in 1/cm are needed, the lower one first")
        return found

    def read(self, data: bytes) -> Curve:
        """The spectrum in these bytes; ``ValueError`` says what is wrong with them."""
        text = data.decode("utf-8", "replace").lstrip("\ufeff")
        if self.format == "jcamp-dx":
            found = jcamp_dx.read(text)
        else:
            map_ = columns.Columns(self.x, self.y, self.ordinate, self.rows, self.decimal_comma)
            found = columns.read(text, map_)
        return found if self.window is None else found.within(*self.window)


class FolderOptions(SpectraOptions):
    """``files`` names those that are spectra; ``quiet``: how long a file must not have changed to be called whole."""

    files: str = Field(default="*", min_length=1, description="pattern of the names, such as '*.dx'")
    order: Literal["name", "arrival"] = Field(
        default="name", description="'name': a file whose name sorts before the last one's is late and is passed over"
    )
    quiet: Seconds = Field(default=1.0, ge=0.1, le=60, description="'0.1 s' to '1 min'")


class StreamOptions(SpectraOptions):
    """A block ends with ``##END=`` (JCAMP-DX) or an empty line (CSV)."""
