"""`python -m wavepack` is the command line."""

import sys

from wavepack.cli import main

if __name__ == "__main__":
    sys.exit(main())
