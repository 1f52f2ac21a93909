"""Run the command line as ``python -m farhold``."""

from __future__ import annotations

import sys

from farhold.interfaces.cli import main

if __name__ == "__main__":
    sys.exit(main())
