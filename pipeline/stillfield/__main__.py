"""`python -m stillfield`."""

import sys

from stillfield.cli import main

if __name__ == "__main__":
    sys.exit(main())
