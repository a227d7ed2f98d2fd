"""Where two records differ: every place, with what each of them says."""

from __future__ import annotations

import json
from collections.abc import Iterator
from typing import Any, Final

LONGEST: Final = 60
"""Characters of a value that are quoted; enough to recognise it."""


def differences(stated: Any, derived: Any, place: str) -> Iterator[str]:
    """One sentence per place below `place` where plain data `stated` is not `derived`."""
    if isinstance(stated, dict) and isinstance(derived, dict):
        for key in sorted({*stated, *derived}):
            if key not in derived:
                yield f"{place}.{key}: nothing of that name can be derived"
            elif key not in stated:
                yield f"{place}.{key}: missing, derived is {quoted(derived[key])}"
            else:
                yield from differences(stated[key], derived[key], f"{place}.{key}")
    elif isinstance(stated, list) and isinstance(derived, list):
        if len(stated) != len(derived):
            yield f"{place}: {len(stated)} entries, derived are {len(derived)}"
        for i, (a, b) in enumerate(zip(stated, derived, strict=False)):
            yield from differences(a, b, f"{place}[{i}]")
    elif type(stated) is not type(derived) or stated != derived:
        yield f"{place}: says {quoted(stated)}, derived is {quoted(derived)}"


def quoted(value: Any) -> str:
    """The beginning of `value` as text in quotes."""
    text = json.dumps(value, sort_keys=True)
    return text if len(text) <= LONGEST else f"{text[: LONGEST - 1]}…"
