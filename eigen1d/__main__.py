"""``python -m eigen1d`` is the command ``eigen1d``."""

import sys

from .cli import main

if __name__ == "__main__":
    sys.exit(main())
