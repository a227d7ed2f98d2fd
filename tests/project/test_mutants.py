"""Damaged project files: whatever is done to a sound file, reading ends in a project or in faults with a place."""

import random
import time
from pathlib import Path

import pytest

from dossier.project.reader import Faults, Project, read_project

TESTS = Path(__file__).parent.parent
FILES = (TESTS / "data" / "machines" / "press-slide.yaml", TESTS / "reference" / "projects" / "given.yaml")
MUTANTS = 300
MOST_SECONDS = 1.0
"""Reading time of one file, for which a person would wait."""
SEED = 1901
SNIPPETS = (
    "{", "}", "[", "]", ":", ": ", ",", '"', "'", "&a ", "*a", "!x ", "- ", "#", "\n", "\t", "%", "^", "(", ")", "-",
    "/0", "1e999", "9" * 500, "µ", "\u2028", "\x07", "deg", "dB", "degC", "null", "true", "x", "(" * 60, "<<", "|", ">",
)  # fmt: skip


def mutant(source: str, dice: random.Random) -> str:
    text = source
    for _ in range(dice.randint(1, 4)):
        start = dice.randrange(len(text))
        end = min(len(text), start + dice.choice((0, 0, 1, 1, 3, 10, 40)))
        kind = dice.randrange(4)
        if kind == 0:
            text = text[:start] + text[end:]
        elif kind == 1:
            text = text[:start] + dice.choice(SNIPPETS) + text[end:]
        elif kind == 2:
            place = dice.randrange(len(text))
            text = text[:place] + text[start:end] + text[place:]
        else:
            lines = text.splitlines(keepends=True)
            one, other = dice.randrange(len(lines)), dice.randrange(len(lines))
            lines[one], lines[other] = lines[other], lines[one]
            text = "".join(lines)
    return text


@pytest.mark.parametrize(
    ("source", "count"),
    [*((f, MUTANTS) for f in FILES), *(pytest.param(f, 5_000, marks=pytest.mark.slow) for f in FILES)],
    ids=["machine", "candidates", "machine, many", "candidates, many"],
)
def test_no_damage_raises_an_exception(source: Path, count: int, tmp_path: Path) -> None:
    text, dice = source.read_text(), random.Random(SEED + count)
    path = tmp_path / "project.yaml"
    faulty = 0
    for _ in range(count):
        path.write_text(mutant(text, dice))
        began = time.monotonic()
        result = read_project(path)
        assert time.monotonic() - began < MOST_SECONDS
        if isinstance(result, Faults):
            faulty += 1
            lines = path.read_text().count("\n") + 1
            assert all(1 <= f.line <= lines + 1 and f.column >= 1 and f.message for f in result.faults)
        else:
            assert isinstance(result, Project)
    assert faulty > count // 2
