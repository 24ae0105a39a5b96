"""``python -m driftline``: the same as the command ``driftline``."""

import sys

from driftline.cli import main

if __name__ == "__main__":
    sys.exit(main())
