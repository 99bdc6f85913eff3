"""``python -m analyzer`` is the command ``faultassay``."""

import sys

from analyzer.cli import main

if __name__ == "__main__":
    sys.exit(main())
