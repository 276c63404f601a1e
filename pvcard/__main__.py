"""Run the command line as ``python -m pvcard``."""

import sys

from pvcard.cli import main

if __name__ == "__main__":
    sys.exit(main())
