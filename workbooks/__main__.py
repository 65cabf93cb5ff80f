"""Run the command line as ``python -m steelyard.workbooks``."""

import sys

from steelyard.workbooks.cli import main

if __name__ == "__main__":
    sys.exit(main())
