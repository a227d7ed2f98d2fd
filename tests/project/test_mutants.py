"""Damaged project files: whatever is done to a sound file, reading ends in a project or in faults with a place."""

import random
from pathlib import Path

from dossier.project.reader import Faults, Project, read_project

MACHINE = Path(__file__).parent.parent / "data" / "machines" / "press-slide.yaml"
MUTANTS = 300
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


def test_no_damage_raises_an_exception(tmp_path: Path) -> None:
    source, dice = MACHINE.read_text(), random.Random(SEED)
    path = tmp_path / "project.yaml"
    faulty = 0
    for _ in range(MUTANTS):
        path.write_text(mutant(source, dice))
        result = read_project(path)
        if isinstance(result, Faults):
            faulty += 1
            lines = path.read_text().count("\n") + 1
            assert all(1 <= f.line <= lines + 1 and f.column >= 1 and f.message for f in result.faults)
        else:
            assert isinstance(result, Project)
    assert faulty > MUTANTS // 2
