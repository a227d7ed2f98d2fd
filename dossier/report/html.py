"""The dossier as one HTML file that asks nothing of anybody: fonts, figures and formulas are inside it."""

from __future__ import annotations

from dossier.report import fonts, locate
from dossier.report.blocks import Paper
from dossier.report.equations import ScreenMath
from dossier.report.layout import lay_out


def html_of(paper: Paper) -> str:
    """The whole page as text."""
    folder = locate.templates()
    sheets = "".join((folder / name).read_text(encoding="utf-8") for name in ("base.css", "screen.css"))
    style = fonts.face_rules(embed=True) + sheets
    script = (folder / "page.js").read_text(encoding="utf-8")
    return lay_out(paper, ScreenMath(), "screen", style, script)
