"""``python -m generator`` is the command ``hullbook``."""

import sys

from generator.cli import main

# Worker processes import this module again, and must not start a command of their own.
if __name__ == "__main__":
    sys.exit(main())
