"""``python -m rigd``: the same as the ``rigd`` command."""

from rigd.console.cli import main

if __name__ == "__main__":
    main()
