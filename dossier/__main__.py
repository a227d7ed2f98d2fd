"""Run the command line as ``python -m dossier``."""

import sys

from dossier.cli import main

if __name__ == "__main__":
    sys.exit(main())
