"""``python -m seqfault``."""

import sys

from seqfault.cli import main

if __name__ == "__main__":
    sys.exit(main())
