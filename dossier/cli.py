"""Commands, progress and exit codes; no mathematics.

Exit codes: 0 every selected criterion proved (``not applicable`` does not count); 1 at least one is not;
2 faulty input, nothing written; 3 fault of the program, missing PDF library or internal contradiction;
4 recheck refused something.
"""

from __future__ import annotations

import argparse
import os
import signal
import sys
import traceback
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from types import ModuleType
from typing import Final, cast

from dossier import __version__
from dossier.exits import FAULTY_INPUT, PROGRAM_FAULT, PROVED, REFUSED

STARTER_NAMES: Final = ("axis", "equilibria", "linear", "regions", "margins")
"""As in `dossier.report.locate`, which is not loaded for the help."""

EFFORT_NAMES: Final = ("quick", "standard", "thorough")
SEARCHING: Final = ("dossier.search", "cvxpy", "clarabel", "scs", "scipy", "sympy", "weasyprint")
"""What a recheck must work without: searches, solvers and the PDF library."""


def main(arguments: Sequence[str] | None = None) -> int:
    """Entry point of the ``dossier`` command; returns the exit code."""
    one_thread()
    options = _parser().parse_args(arguments)
    signal.signal(signal.SIGTERM, _interrupted)
    try:
        return options.run(options)
    except BrokenPipeError:  # whoever read the output has stopped reading; what is written is written
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return PROGRAM_FAULT
    except KeyboardInterrupt:
        print("\ninterrupted; no half-written output is left", file=sys.stderr)
        return PROGRAM_FAULT
    except Exception as error:  # a bug of the program: say so plainly, keep the trace for the report
        traceback.print_exc()
        print(
            f"\nThis is a fault of the program, not of your project ({type(error).__name__}). Nothing was concluded.",
            file=sys.stderr,
        )
        return PROGRAM_FAULT


def _interrupted(number: int, frame: object) -> None:
    """A request to end, from a scheduler or a terminal that closes, is met like one from the keyboard."""
    raise KeyboardInterrupt


def one_thread() -> None:
    """One BLAS thread, set before numpy is imported: the same work gives the same bits."""
    for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
        os.environ[name] = "1"


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="dossier",
        description="Build, inspect and recheck stability dossiers of machine control loops.",
        epilog="A dossier concerns mathematical models; it does not certify a machine.",
    )
    parser.add_argument("--version", action="version", version=f"dossier {__version__}")
    commands = parser.add_subparsers(required=True, metavar="COMMAND")
    build = commands.add_parser("build", help="prove or refute every criterion and write the dossier")
    build.add_argument(
        "project", type=Path, metavar="PROJECT", help="project file, or the folder that holds project.yaml"
    )
    build.add_argument("--out", type=Path, metavar="DIR", help="output folder (default: out beside the project file)")
    build.add_argument("--only", nargs="+", default=(), metavar="POINT", help="only these operating points")
    build.add_argument("--effort", choices=EFFORT_NAMES, default="standard", help="how much work to spend")
    build.set_defaults(run=_build)
    inspect = commands.add_parser("inspect", help="show the model as understood, in SI, with warnings")
    inspect.add_argument("project", type=Path, metavar="PROJECT")
    inspect.set_defaults(run=_inspect)
    new = commands.add_parser("new", help="write a commented project file to start from")
    new.add_argument("folder", type=Path, metavar="DIR", help="folder of the new project")
    new.add_argument(
        "--about", choices=STARTER_NAMES, default="axis",
        help="what the example in it asks: axis (some of everything, the default), or one family of claims",
    )  # fmt: skip
    new.set_defaults(run=_new)
    schema = commands.add_parser("schema", help="print the format as a JSON Schema, for editors")
    schema.set_defaults(run=_schema)
    recheck = commands.add_parser("recheck", help="verify a written dossier again without any search")
    recheck.add_argument("folder", type=Path, metavar="OUT", help="folder written by build")
    recheck.set_defaults(run=_recheck)
    return parser


def project_file(path: Path) -> Path:
    """The project file meant by `path`: itself, or project.yaml in the folder."""
    return path / "project.yaml" if path.is_dir() else path


def _build(options: argparse.Namespace) -> int:
    from dossier.evidence.store import NotADossierError
    from dossier.pipeline import build
    from dossier.project.reader import Faults
    from dossier.terminal import Terminal

    terminal = Terminal()
    try:
        with terminal.progress() as progress:
            result = build(project_file(options.project), options.out, tuple(options.only), options.effort, progress)
    except NotADossierError as error:
        terminal.error(str(error))
        return FAULTY_INPUT
    except BrokenPipeError:
        raise
    except OSError as error:
        terminal.error(f"the dossier could not be written: {error}")
        return PROGRAM_FAULT
    if isinstance(result, Faults):
        terminal.faults(result.faults)
        return FAULTY_INPUT
    if isinstance(result, str):
        terminal.error(result)
        return FAULTY_INPUT
    return terminal.report(result)


def _inspect(options: argparse.Namespace) -> int:
    from dossier.project.reader import Faults, read_project
    from dossier.terminal import Terminal

    terminal = Terminal()
    project = read_project(project_file(options.project))
    if isinstance(project, Faults):
        terminal.faults(project.faults)
        return FAULTY_INPUT
    terminal.model(project)
    return PROVED


def _new(options: argparse.Namespace) -> int:
    from dossier.evidence.store import NotADossierError, write_new_project
    from dossier.report.locate import starter
    from dossier.terminal import Terminal

    terminal = Terminal()
    try:
        written = write_new_project(options.folder, starter(options.about))
    except FileExistsError as error:
        terminal.error(f"{error.filename} exists already; nothing was written")
        return FAULTY_INPUT
    except (NotADossierError, OSError) as error:
        terminal.error(str(error))
        return FAULTY_INPUT
    terminal.say(f"written: {written}", f"next: dossier inspect {written}", f"then: dossier build {written}")
    return PROVED


def _schema(options: argparse.Namespace) -> int:
    import json

    from dossier.project.schema import json_schema

    print(json.dumps(json_schema(), indent=1, sort_keys=True, ensure_ascii=False))
    return PROVED


def _recheck(options: argparse.Namespace) -> int:
    with out_of_reach(SEARCHING):
        from dossier.recheck import recheck
        from dossier.terminal import Terminal

        terminal = Terminal()
        result = recheck(options.folder)
    terminal.recheck(result)
    return REFUSED if result.refusals else PROVED


@contextmanager
def out_of_reach(names: Sequence[str]) -> Iterator[None]:
    """Inside, an import of `names` fails, even by a library that would use them if it could (pint would load scipy).

    What is loaded already stays.
    """
    blocked = [n for n in names if n not in sys.modules]
    loaded = cast("dict[str, ModuleType | None]", sys.modules)  # None: Python raises ModuleNotFoundError
    loaded.update(dict.fromkeys(blocked))
    try:
        yield
    finally:
        for name in blocked:
            if loaded.get(name) is None:
                loaded.pop(name, None)
