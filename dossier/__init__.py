"""Build stability dossiers: proved equilibria, regions, rates and margins from one project file.

This package initialiser imports nothing, so that the trusted checker can be loaded without
dragging in any search, solver or rendering library.
"""

__version__ = "0.1.0"
