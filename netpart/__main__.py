"""``python -m netpart``: the same as the `netpart` command."""

import sys

from netpart.cli import main

__all__: list[str] = []

if __name__ == "__main__":
    sys.exit(main())
