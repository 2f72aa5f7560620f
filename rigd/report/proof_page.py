"""The page of a proof: every fault in every phase as a matrix, what was missed, what no sensor shows."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from jinja2 import Environment, PackageLoader, StrictUndefined

from rigd import __version__
from rigd.report.words import CAUTIONS


def write_proof_page(path: Path, told: Mapping[str, Any]) -> Path:
    """Write the page from what the proof tells."""
    environment = Environment(
        loader=PackageLoader("rigd.report"), autoescape=True, undefined=StrictUndefined, trim_blocks=True
    )
    page = environment.get_template("proof.html.j2").render(told=told, cautions=CAUTIONS, version=__version__)
    path.write_text(page, encoding="utf-8")
    return path
