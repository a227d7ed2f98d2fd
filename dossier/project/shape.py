"""Tables as composed to the entries of the schema, with every misfit reported and replaced by an absent value.

The schema is asked again after each repair, so that one fault never hides another.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, Final

from pydantic import BaseModel, ValidationError
from pydantic_core import ErrorDetails

from dossier.project.faults import Ledger, listed, suggestion
from dossier.project.located import Items, Table, Text
from dossier.project.schema import FORMAT, EquilibriumEntry, ProjectEntry

MOST_ROUNDS: Final = 20
"""Repairs go one level deeper per round; the format has eight levels."""

_TABLE_ERRORS: Final = ("table_expected", "dict_type", "model_type", "model_attributes_type")
_UNION_TAGS: Final = ("plain", "table")


def shape(table: Table, ledger: Ledger) -> ProjectEntry | None:
    """The project in `table`; None only where repair does not come to an end."""
    for _ in range(MOST_ROUNDS):
        try:
            return ProjectEntry.model_validate(table)
        except ValidationError as error:
            _Repair(table, ledger, error.errors(include_url=False)).run()
    return None


def _misplaced(line: int, column: int, word: str, file: str = "") -> Text:
    text = Text(word)
    text.file = file
    text.source, text.start, text.end, text.style = "", 0, 0, ""
    text.line, text.column = line, column
    return text


class _Repair:
    """One round of repairs."""

    def __init__(self, root: Table, ledger: Ledger, errors: Sequence[ErrorDetails]) -> None:
        self.root, self.ledger, self.errors = root, ledger, errors
        self.missing = {e["loc"] for e in errors if e["type"] == "missing"}

    def run(self) -> None:
        """Repair everything told in this round; unknown keys first, since one may be a missing key misspelt."""
        for error in sorted(self.errors, key=lambda e: e["type"] != "extra_forbidden"):
            *path, last = error["loc"] or ("",)
            holder = self._walk(path)
            if error["type"] == "extra_forbidden":
                self._unknown(holder, str(last), error["loc"])
            elif error["type"] == "missing":
                self._absent(holder, str(last), error["loc"])
            else:
                self._misfit(error)

    def _walk(self, path: Sequence[int | str]) -> Any:
        value: Any = self.root
        for part in path:
            if isinstance(value, Items) and isinstance(part, int) and part < len(value):
                value = value[part]
            elif isinstance(value, Table) and part in value:
                value = value[part]  # type: ignore[index] - texts equal plain strings
            elif part not in _UNION_TAGS:
                return None
        return value

    def _unknown(self, holder: Any, name: str, place: tuple[int | str, ...]) -> None:
        key = holder.key(name)
        fields = sorted(_fields_at(place[:-1]))
        hint = suggestion(name, fields)
        self.ledger.fault(key, f"{name} is not a field here", expected="one of " + listed(fields), hint=hint)
        value = holder.pop(key)
        for field in fields:
            if hint == f"did you mean {field}?" and field not in holder:
                holder[_misplaced(key.line, key.column, field, key.file)] = value
                self.missing.discard((*place[:-1], field))

    def _absent(self, holder: Any, name: str, place: tuple[int | str, ...]) -> None:
        if place not in self.missing or holder is None:
            return
        if not holder.is_absent:
            where = self._key_of(place[:-1]) or holder
            self.ledger.fault(
                where, f"the field {name} is missing", text=str(where) if isinstance(where, Text) else "",
                expected=f"{name}: {_description(place)}", hint=f"add {name}",
            )  # fmt: skip
        holder[_misplaced(holder.line, holder.column, name, holder.file)] = Text.absent(holder.line, holder.column)

    def _key_of(self, path: Sequence[int | str]) -> Text | None:
        parts = [p for p in path if p not in _UNION_TAGS]
        holder = self._walk(parts[:-1]) if parts else None
        return holder.key(str(parts[-1])) if isinstance(holder, Table) else None

    def _misfit(self, error: ErrorDetails) -> None:
        parts: list[int | str] = list(error["loc"])
        while parts and parts[-1] in _UNION_TAGS:
            parts.pop()
        holder, last = self._walk(parts[:-1]), parts[-1]
        value = holder[last]
        expected, hint = _wanted(error, value)
        if not value.is_absent:
            key = self._key_of(parts)
            shown = str(value) if isinstance(value, Text) else str(key or "")
            self.ledger.fault(
                value, _MESSAGES.get(error["type"], error["msg"]), text=shown, expected=expected, hint=hint
            )
        holder[last] = self._stand_in(error["type"], value)
        if isinstance(holder[last], Table) and _entry_at(parts) is EquilibriumEntry:
            nothing = Text.absent(value.line, value.column)
            holder[last][_misplaced(value.line, value.column, "none_expected")] = nothing

    def _stand_in(self, kind: str, value: Any) -> Any:
        nothing = Text.absent(value.line, value.column)
        if kind in _TABLE_ERRORS:
            result: Table | Items = Table()
        elif kind in ("items_expected", "list_type", "pair_expected"):
            result = Items([nothing, nothing])
        else:
            return nothing
        result.line, result.column, result.is_absent = value.line, value.column, True
        result.file = value.file
        return result


_MESSAGES: Final = {
    "choice": "this word is not allowed here",
    "text_expected": "a table or list stands where one value is expected",
    "table_expected": "a table is expected here",
    "items_expected": "a list is expected here",
    "pair_expected": "two bounds are expected here",
    "dict_type": "a table is expected here",
    "model_type": "a table is expected here",
}


def _wanted(error: ErrorDetails, value: Any) -> tuple[str, str]:
    kind = error["type"]
    if kind == "choice":
        values = error.get("ctx", {})["choices"]
        if values == (FORMAT,):
            return f"dossier: {FORMAT}", "this version reads this format only; a later format needs a later version"
        return "one of " + ", ".join(values), suggestion(str(value), values)
    if kind == "text_expected":
        return "one value", "write it on one line, in quotes where it holds a colon or bracket"
    if kind in ("items_expected", "pair_expected", "list_type"):
        two = kind == "pair_expected" or _description(error["loc"]) == ""
        return ("[lower, upper]", "write two values in brackets") if two else ("a list", "write values in brackets")
    return "a table of names and values", "write {name: value} or indented lines"


def _entry_at(path: Sequence[int | str]) -> type[BaseModel] | None:
    """The schema of the table at `path`, None where keys are the user's own."""
    current: Any = ProjectEntry
    for part in path:
        if isinstance(current, type) and issubclass(current, BaseModel):
            field = _field(current, str(part))
            if field is None and part in _UNION_TAGS:
                continue
            current = None if field is None else _inner(field.annotation)
        elif isinstance(current, tuple):
            current = current[0]
        else:
            return None
    return current if isinstance(current, type) and issubclass(current, BaseModel) else None


def _field(entry: type[BaseModel], name: str) -> Any:
    return next((f for n, f in entry.model_fields.items() if (f.alias or n) == name), None)


def _inner(annotation: Any) -> Any:
    """The entry an annotation holds: itself, or in a tuple where it is the value of a table."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    found = None
    for argument in getattr(annotation, "__args__", ()):
        inner = _inner(argument)
        if inner is not None:
            found = inner
    if found is not None and getattr(annotation, "__origin__", None) is dict and not isinstance(found, tuple):
        return (found,)
    return found


def _fields_at(path: Sequence[int | str]) -> list[str]:
    entry = _entry_at(path)
    return [] if entry is None else [f.alias or n for n, f in entry.model_fields.items()]


def _description(place: Sequence[int | str]) -> str:
    entry = _entry_at(place[:-1])
    field = None if entry is None else _field(entry, str(place[-1]))
    return "" if field is None else field.description or ""
