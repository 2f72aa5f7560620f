"""``make bench``: the numbers to hold, each beside an honest floor measured in the same run.

Options: ``--json PATH``, ``--only GROUP``, ``--quick``, ``--full``. One file per group of figures; the floor program
stands beside its figure.
"""

from __future__ import annotations

import sys
from pathlib import Path

if __name__ == "__main__":
    sys.path[0] = str(Path(__file__).resolve().parents[1])
    from bench.board import main

    sys.exit(main())
