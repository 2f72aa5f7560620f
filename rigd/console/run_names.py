"""Which run a person means: a run folder, the name of one, or the word ``last``."""

from __future__ import annotations

from difflib import get_close_matches
from pathlib import Path

from rigd.adapters.places import run_folders
from rigd.model.errors import JournalError

RUNS = Path("runs")
"""Where runs are written and looked for when nothing else is said."""
LAST = "last"


def find_run(name: Path | str, runs: Path = RUNS) -> Path:
    """The folder of a run; ``JournalError`` names what there is when it cannot be found."""
    given = Path(name)
    for folder in (given, runs / given):
        if (folder / "run.sqlite").is_file():
            return folder
    if given.name == "run.sqlite" and given.is_file():
        return given.parent
    known = [folder.name for folder in run_folders(runs)]
    if str(name) == LAST and known:
        return runs / known[-1]
    near = get_close_matches(given.name, known, n=1, cutoff=0.4)
    hint = f"; did you mean {runs / near[0]}?" if near else f"; runs are listed by: rigd runs --runs {runs}"
    raise JournalError(f"there is no run {str(name)!r} (a run is a folder with run.sqlite in it){hint}")
