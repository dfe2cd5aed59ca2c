"""Run the command line as ``python -m hmmseg``."""

import sys

from hmmseg.cli import main

__all__: list[str] = []

if __name__ == "__main__":
    sys.exit(main())
