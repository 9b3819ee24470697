"""``python -m fieldmap``: the command line."""

import sys

from fieldmap.cli import main

if __name__ == "__main__":
    sys.exit(main())
