"""`python -m reach`, the same as the command `strikecheck`."""

import sys

from reach.cli import main

if __name__ == "__main__":
    sys.exit(main())
