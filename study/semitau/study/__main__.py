"""`python -m semitau.study` is the command `semitau`."""

from __future__ import annotations

import sys

from .command_line import main

if __name__ == "__main__":
    sys.exit(main())
