"""Exit codes of the command line."""

from typing import Final

PROVED: Final = 0
"""Every selected criterion is proved (``not applicable`` does not count)."""
NOT_PROVED: Final = 1
"""At least one criterion is not proved."""
FAULTY_INPUT: Final = 2
"""The input is faulty; nothing was written."""
PROGRAM_FAULT: Final = 3
"""A fault of the program, its installation or the disk, an interruption, or an internal contradiction."""
REFUSED: Final = 4
"""Recheck refused something."""
