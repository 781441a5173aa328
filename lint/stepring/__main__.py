"""``python -m stepring`` is the command ``stepring``."""

import sys

from stepring.cli import main

if __name__ == "__main__":
    sys.exit(main())
