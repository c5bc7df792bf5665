"""``python -m relorbit``: the command line."""

import sys

from relorbit.cli.main import main

if __name__ == "__main__":
    sys.exit(main())
