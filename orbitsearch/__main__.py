"""``python -m orbitsearch``: the same as the command ``orbitsearch``."""

import sys

from orbitsearch.cli import main

if __name__ == "__main__":
    sys.exit(main())
