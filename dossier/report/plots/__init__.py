"""One module per kind of figure, and what they share; `dossier.report.figures` is the way in."""
