"""``python -m tapband``."""

from __future__ import annotations

import sys

from tapband.cli import main

if __name__ == "__main__":
    sys.exit(main())
