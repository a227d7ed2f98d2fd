"""What the terminal shows: progress, faults, the verdict table, the model as understood.

Rich output on a terminal, plain lines elsewhere.  No verdict is shown by colour alone.
"""

from __future__ import annotations

import sys
from collections import Counter
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from typing import TYPE_CHECKING, Final

from rich.console import Console
from rich.table import Table
from rich.text import Text

from dossier.exits import NOT_PROVED, PROGRAM_FAULT, PROVED
from dossier.inspection import inspection_lines
from dossier.model.dossier import PointEvidence
from dossier.model.outcome import VERDICTS, Outcome, Verdict
from dossier.report import numbers
from dossier.report.content import quantities

if TYPE_CHECKING:  # recheck must not load the searches that the pipeline imports
    from dossier.pipeline import Build
    from dossier.project.reader import Fault, Project
    from dossier.recheck import Recheck

STYLES: Final[dict[Verdict, str]] = {
    "proved": "green",
    "refuted": "bold red",
    "contradicted": "red",
    "no operating point": "bold red",
    "supported": "cyan",
    "not established": "yellow",
    "not applicable": "dim",
    "not attempted": "magenta",
}


PLAIN_WIDTH: Final = 200
"""Columns where the output is no terminal: wide enough that no row of the table is folded."""


def _console(is_terminal: bool, *, stderr: bool) -> Console:
    return Console(
        stderr=stderr, highlight=False, soft_wrap=not is_terminal, width=None if is_terminal else PLAIN_WIDTH
    )


class Terminal:
    """Writes results to standard output, faults and progress to standard error."""

    def __init__(self) -> None:
        self.out = _console(sys.stdout.isatty(), stderr=False)
        self.err = _console(sys.stderr.isatty(), stderr=True)

    @contextmanager
    def progress(self) -> Iterator[Callable[[str, str], None]]:
        """A callback for the pipeline: a moving line on a terminal, one plain line per step elsewhere."""
        if self.err.is_terminal:
            with self.err.status("starting") as status:
                yield lambda point, stage: status.update(f"{point or 'project'}: {stage}")
        else:
            yield lambda point, stage: self.err.print(f"{point or 'project'}: {stage}", markup=False)

    def error(self, message: str) -> None:
        """One sentence about a request that cannot be carried out."""
        self.err.print(f"dossier: {message}", style="bold", markup=False)

    def say(self, *lines: str) -> None:
        """Plain lines of an answer."""
        for line in lines:
            self.out.print(Text(line))

    def faults(self, faults: Sequence[Fault]) -> None:
        """Every fault with its place, the offending text, what was expected and what to do."""
        for fault in faults:
            self.err.print(Text(f"{fault.file}:{fault.line}:{fault.column}: {fault.message}", style="bold"))
            if fault.text:
                self.err.print(Text(f"    found     {fault.text}"))
            if fault.expected:
                self.err.print(Text(f"    expected  {fault.expected}"))
            if fault.hint:
                self.err.print(Text(f"    hint      {fault.hint}"))
        count = len(faults)
        self.err.print(Text(f"{count} fault{'' if count == 1 else 's'}; nothing was written."))

    def report(self, build: Build) -> int:
        """The closing table, the paths written and the exit code of the build."""
        outcomes = [o for p in build.evidence.points for o in p.outcomes]
        self.out.print(self._table(build.evidence.points))
        counts = Counter(o.verdict for o in outcomes)
        self.out.print(Text("   ".join(f"{counts[v]} {v}" for v in VERDICTS if counts[v])))
        for warning in (*build.warnings, *(f"{p.case.name}: {w}" for p in build.evidence.points for w in p.warnings)):
            self.out.print(Text(f"warning: {warning}"))
        for outcome in outcomes:
            if outcome.verdict != "proved" or outcome.contradiction:
                self.out.print(Text(f"{outcome.identifier}: {outcome.because}"))
        self._written(build)
        return self._exit_code(build, outcomes)

    def _table(self, points: Sequence[PointEvidence]) -> Table:
        table = Table(box=None, pad_edge=False, header_style="bold", padding=(0, 2, 0, 0))
        for heading in ("criterion", "claim", "over", "verdict", "checked by", "obtained", "required", "reserve"):
            table.add_column(heading, overflow="fold", no_wrap=heading in ("criterion", "verdict"))
        for point in points:
            for outcome, criterion in zip(point.outcomes, point.case.criteria, strict=True):
                table.add_row(
                    outcome.identifier, outcome.claim, outcome.over,
                    Text(outcome.verdict, style=STYLES[outcome.verdict]), outcome.strength or quantities.NOTHING,
                    quantities.obtained(outcome, criterion, point.case) or quantities.NOTHING,
                    quantities.required(criterion) or quantities.NOTHING, self._reserve(outcome),
                )  # fmt: skip
        return table

    @staticmethod
    def _reserve(outcome: Outcome) -> str:
        if outcome.reserve is None or outcome.reserve.lower is None:
            return quantities.NOTHING
        return numbers.percent_below(outcome.reserve.lower)

    def _written(self, build: Build) -> None:
        seconds = build.stopwatch.seconds
        self.out.print(Text("time: " + ", ".join(f"{k} {v:.1f} s" for k, v in seconds.items())))
        self.out.print(Text(f"written: {build.folder}/ ({len(build.written)} files)"))
        for name in ("dossier.html", "dossier.pdf", "record.json"):
            if build.folder / name in build.written:
                self.out.print(Text(f"  {build.folder / name}"))
        if not isinstance(build.rendered.pdf, bytes):
            self.err.print(Text(f"dossier: no PDF was written. {build.rendered.pdf.message}", style="bold"))

    @staticmethod
    def _exit_code(build: Build, outcomes: Sequence[Outcome]) -> int:
        lost = any(a.ending == "internal fault" for p in build.evidence.points for a in p.attempts)
        if lost or any(o.contradiction for o in outcomes) or not isinstance(build.rendered.pdf, bytes):
            return PROGRAM_FAULT
        return PROVED if all(o.verdict in ("proved", "not applicable") for o in outcomes) else NOT_PROVED

    def model(self, project: Project) -> None:
        """The project as understood, in SI."""
        for line in inspection_lines(project.document, project.assumptions, project.cases):
            self.out.print(Text(line))
        for warning in project.warnings:
            self.out.print(Text(f"warning: {warning}"))

    def recheck(self, result: Recheck) -> None:
        """What was verified again and what was refused."""
        for line in result.verified:
            self.out.print(Text(f"verified  {line}"))
        for line in result.refusals:
            self.out.print(Text(f"refused   {line}", style="bold"))
        for line in result.remarks:
            self.out.print(Text(f"remark    {line}"))
        closing = (
            "Recheck refused this dossier." if result.refusals else "Every certificate and verdict was verified again."
        )
        self.out.print(Text(closing))
