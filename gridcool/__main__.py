"""``python -m gridcool``."""

import sys

from gridcool.cli import main

if __name__ == "__main__":
    sys.exit(main())
