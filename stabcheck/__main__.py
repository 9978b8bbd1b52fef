"""``python -m stabcheck`` is the command line."""

import sys

from stabcheck.cli import main

if __name__ == "__main__":
    sys.exit(main())
