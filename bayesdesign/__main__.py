"""`python -m bayesdesign` is the command `bayesdesign`."""

import sys

from bayesdesign.cli import main

if __name__ == "__main__":
    sys.exit(main())
