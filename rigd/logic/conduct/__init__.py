"""The half that runs the recipe: run states, phases, syringes, points. Reads the view, the program and its own state.

It says what it wants as a demand and never orders; it follows stops and never decides one.
"""

from __future__ import annotations

from rigd.logic.conduct.core import advance, initial
from rigd.logic.conduct.progress import outcome, points, summary
from rigd.logic.conduct.state import ConductState, ConductStep
from rigd.logic.conduct.wants import PointResult

__all__ = ["ConductState", "ConductStep", "PointResult", "advance", "initial", "outcome", "points", "summary"]
