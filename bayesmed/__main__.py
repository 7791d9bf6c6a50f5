"""``python -m bayesmed`` is the command ``bayesmed``."""

import sys

from bayesmed.cli import main

if __name__ == "__main__":
    sys.exit(main())
