"""`python -m gibbsmin` is the command `gibbsmin`."""

from __future__ import annotations

import sys

from gibbsmin.cli import main

if __name__ == "__main__":
    sys.exit(main())
