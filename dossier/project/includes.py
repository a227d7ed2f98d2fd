"""Files that hold further models: read from the project's own folder only, and merged into the project's table."""

from __future__ import annotations

from pathlib import Path, PurePosixPath
from typing import Final

from dossier.project.faults import Ledger, suggestion
from dossier.project.located import Items, Table, Text, Trouble, compose
from dossier.project.schema import FORMAT

LARGEST_FILE: Final = 500_000
"""Bytes of a project file, and of all files it includes together; a large one has a tenth of this."""

MOST_FILES: Final = 20
"""Files that a project may include."""

KEYS: Final = ("dossier", "models")
"""Keys of an included file."""

Included = tuple[tuple[str, bytes], ...]


def include_models(table: Table, folder: Path, own: str, ledger: Ledger) -> Included:
    """Merge the models of the files that `table` includes into it; their names and bytes in order.

    Every fault goes to `ledger`; a file with one is left out.  What stands under ``include`` in a shape that is not a
    list of names is left to the schema.
    """
    key = table.key("include")
    names = None if key is None else table[key]
    if not isinstance(names, Items):
        return ()
    found: list[tuple[str, bytes]] = []
    room = LARGEST_FILE
    for name in [n for n in names if isinstance(n, Text) and not n.is_absent]:
        if len(found) >= MOST_FILES:
            ledger.fault(name, f"more than {MOST_FILES} files are included", expected=f"at most {MOST_FILES} files",
                         hint="put several models into one file")  # fmt: skip
            break
        if str(name) in [n for n, _ in found] or str(name) == own:
            ledger.fault(name, f"{name} is included twice" if str(name) != own else "the project file includes itself",
                         expected="each file once", hint="remove the repetition")  # fmt: skip
            continue
        content = _read(name, folder, room, ledger)
        if content is None:
            continue
        room -= len(content)
        inner = _composed(name, content, ledger)
        if inner is not None:
            found.append((str(name), content))
            _merge(table, inner, name, ledger)
    if ledger.faults and table.key("models") is None:
        _models_of(table, names).is_absent = True
    return tuple(found)


def _read(name: Text, folder: Path, room: int, ledger: Ledger) -> bytes | None:
    expected = "a file in the folder of the project, or in a folder below it"
    path = PurePosixPath(str(name))
    if path.is_absolute() or ".." in path.parts or "\\" in name or ":" in name or not path.parts:
        ledger.fault(name, f"{name} does not lie in the folder of the project", expected=expected,
                     hint="write the path from the project file on, with / between folders and without ..")  # fmt: skip
        return None
    try:
        root, target = folder.resolve(), (folder / path).resolve()
    except (OSError, RuntimeError, ValueError):
        ledger.fault(name, "this path leads nowhere", expected=expected, hint="check links and spelling")
        return None
    if root not in target.parents:
        ledger.fault(name, f"{name} is a link out of the folder of the project", expected=expected,
                     hint="copy the file into the folder, so that it is kept with the project")  # fmt: skip
        return None
    content = read_limited(target, room)
    if isinstance(content, int):
        ledger.fault(name, f"the included files have more than {LARGEST_FILE} bytes together",
                     expected=f"at most {LARGEST_FILE} bytes", hint="include only what the project uses")  # fmt: skip
    elif isinstance(content, str):
        hint = suggestion(str(name), _neighbours(target), "check the path and the rights of the file")
        ledger.fault(name, f"the file cannot be read: {content}", expected=expected, hint=hint)
    return content if isinstance(content, bytes) else None


def _neighbours(target: Path) -> list[str]:
    try:
        return [p.name for p in target.parent.iterdir() if p.suffix in (".yaml", ".yml")]
    except OSError:
        return []


def read_limited(path: Path, limit: int) -> bytes | int | str:
    """The bytes of a file; its size where that is above `limit`; why it cannot be read."""
    try:
        if not path.is_file():
            return "no such file" if not path.exists() else "it is not a file"
        size = path.stat().st_size
        return size if size > limit else path.read_bytes()
    except (OSError, ValueError) as error:
        return (getattr(error, "strerror", None) or "not readable").lower()


def decoded(content: bytes) -> str | Trouble:
    """The text of a file, or where it is no UTF-8."""
    try:
        return content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        before = content[: error.start].decode("utf-8", "replace")
        column = len(before) - (before.rfind("\n") + 1) + 1
        offending = content[error.start : error.end].hex(" ")
        return Trouble(
            before.count("\n") + 1, column, f"byte {offending}", "the file is not UTF-8 text", "UTF-8 text",
            "save the file as UTF-8",
        )  # fmt: skip


def _composed(name: Text, content: bytes, ledger: Ledger) -> Table | None:
    text = decoded(content)
    table, troubles = compose(text, str(name)) if isinstance(text, str) else (None, (text,))
    for t in troubles:
        ledger.add(t.line, t.column, t.message, t.text, t.expected, t.hint, str(name))
    if table is None or troubles:
        return None
    before = len(ledger.faults)
    for key in table:
        if key not in KEYS:
            why = "an included file includes no other" if key == "include" else f"{key} does not belong here"
            ledger.fault(key, why, expected="models only", hint="move it into the project file")
    stated = table.key("dossier")
    if stated is None:
        ledger.add(1, 1, "the field dossier is missing", "", f"dossier: {FORMAT}", "state the format of the file",
                   str(name))  # fmt: skip
    elif table[stated] != FORMAT:
        ledger.fault(stated, "this format is not known", text=str(table[stated]), expected=f"dossier: {FORMAT}")
    models = table.key("models")
    if models is None or not isinstance(table[models], Table):
        ledger.fault(models or table, "the file holds no table of models", text=str(models or ""),
                     expected="models: {name: {title: ...}}", hint="models are all that can be included")  # fmt: skip
    return None if len(ledger.faults) > before else table


def _models_of(table: Table, where: Text | Items) -> Table:
    """An empty table of models, put into `table` as if it stood at `where`."""
    key, models = Text("models"), Table()
    key.source, key.start, key.end, key.style = "", 0, 0, ""
    key.line, key.column = models.line, models.column = where.line, where.column
    table[key] = models
    return models


def _merge(table: Table, inner: Table, name: Text, ledger: Ledger) -> None:
    """The models of `inner` after those of the project; a name that is taken is a fault."""
    key = table.key("models")
    models = _models_of(table, name) if key is None else table[key]
    if not isinstance(models, Table):
        return
    added = next(v for k, v in inner.items() if k == "models")
    for model, entry in added.items():
        first = models.key(model)
        if first is not None:
            place = f"{first.file or 'the project file'}, line {first.line}"
            ledger.fault(model, f"the model {model} is defined twice", expected="each model once",
                         hint=f"the first is in {place}")  # fmt: skip
        else:
            models[model] = entry
