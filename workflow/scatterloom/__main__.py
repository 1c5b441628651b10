"""`python -m scatterloom`, the same as the command `scatterloom`."""

import sys

from scatterloom.cli import main

if __name__ == "__main__":
    sys.exit(main())
