"""``python -m rigd.guard plan.json``: see ``rigd.guard.supervise``."""

import sys

from rigd.guard.supervise import guard

if __name__ == "__main__":
    sys.exit(guard(sys.argv[1]))
