"""``python -m rigd`` and the ``rigd`` command: where a person's Ctrl-C finds somebody from the first moment on."""

from __future__ import annotations

import sys


def main() -> None:
    """Load the command line and run it. Ctrl-C while it is loaded is a sentence too: nothing was opened yet."""
    try:
        from rigd.console.cli import main as command
    except KeyboardInterrupt:
        sys.stderr.write("rigd: interrupted before anything began: nothing was sent to a rig, nothing moved\n")
        sys.exit(1 if sys.argv[1:2] == ["run"] else 130)
    command()


if __name__ == "__main__":
    main()
