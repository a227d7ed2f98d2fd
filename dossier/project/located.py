"""YAML text as tables, lists and texts that know where they stand; every scalar stays text.

Only the composition of nodes is used, never the construction of objects, so no scalar is turned into a
binary float, a truth value or a date, and no tag can run code.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Any, Final

import yaml

NESTING_LIMIT: Final = 20
"""Depth of nested tables and lists; the format needs eight."""

NODE_LIMIT: Final = 50_000
"""Tables, lists and texts after alias expansion; a large project has a few thousand."""

_BREAK: Final = re.compile("\r\n|[\n\r\x85\u2028\u2029]")
_ABSENT: Final = "\0"


class Text(str):
    """A scalar or key as text, with its place in the file."""

    source: str
    start: int
    end: int
    line: int
    column: int
    style: str
    file: str = ""
    """The file it stands in, empty for the project file itself."""

    @classmethod
    def of(cls, node: yaml.ScalarNode, source: str, file: str = "") -> Text:
        """The text of a scalar node of `source`."""
        text = cls(node.value)
        text.file = file
        text.source, text.start, text.end = source, node.start_mark.index, node.end_mark.index
        text.line, text.column, text.style = node.start_mark.line + 1, node.start_mark.column + 1, node.style or ""
        return text

    @classmethod
    def absent(cls, line: int, column: int) -> Text:
        """Stands for a value that is missing or unusable and already reported (YAML allows no NUL)."""
        text = cls(_ABSENT)
        text.source, text.start, text.end, text.line, text.column, text.style = "", 0, 0, line, column, ""
        return text

    @property
    def is_absent(self) -> bool:
        """It stands for something already reported."""
        return self == _ABSENT

    def place(self, offset: int = 0) -> tuple[int, int]:
        """Line and column, from 1, of character `offset`.

        YAML folds and quotes change only white space, so the place is found by counting the other
        characters; in double quotes with a backslash the start of the text is returned.
        """
        body = self.source[self.start : self.end]
        if offset == 0 and not self.style:
            return self.line, self.column
        if self.style == '"' and "\\" in body:
            return self.line, self.column
        position = self._body_start(body)
        before = sum(not c.isspace() for c in self[:offset])
        while position < len(body) and (body[position].isspace() or before > 0):
            before -= not body[position].isspace()
            position += 1
        breaks = list(_BREAK.finditer(body, 0, min(position, len(body))))
        if not breaks:
            return self.line, self.column + position
        return self.line + len(breaks), position - breaks[-1].end() + 1

    def _body_start(self, body: str) -> int:
        if self.style in ("|", ">"):
            header = _BREAK.search(body)
            return header.end() if header else 0
        return 1 if self.style else 0


class Table(dict[Text, Any]):
    """A mapping whose keys are `Text`; remembers where it begins.

    `is_absent` says that it stands for something missing or unusable and already reported.
    """

    line: int = 1
    column: int = 1
    is_absent: bool = False
    file: str = ""

    def key(self, name: str) -> Text | None:
        """The key equal to `name` as it stands in the file."""
        return next((k for k in self if k == name), None)


class Items(list[Any]):
    """A sequence; remembers where it begins."""

    line: int = 1
    column: int = 1
    is_absent: bool = False
    file: str = ""


@dataclass(frozen=True, slots=True)
class Trouble:
    """Something YAML itself, or this reader's limits, do not allow."""

    line: int
    column: int
    text: str
    message: str
    expected: str
    hint: str


class _TroubleError(Exception):
    def __init__(self, trouble: Trouble) -> None:
        super().__init__(trouble.message)
        self.trouble = trouble


class _Composer(yaml.BaseLoader):
    """Composes nodes with a bound on nesting."""

    depth = 0

    def compose_node(self, parent: yaml.Node | None, index: Any) -> yaml.Node | None:
        self.depth += 1
        if self.depth > NESTING_LIMIT:
            mark = self.peek_event().start_mark
            raise _TroubleError(
                Trouble(
                    mark.line + 1, mark.column + 1, "", "tables and lists are nested too deeply",
                    f"at most {NESTING_LIMIT} levels", "the format needs no more than eight levels",
                )
            )  # fmt: skip
        try:
            return super().compose_node(parent, index)
        finally:
            self.depth -= 1


def compose(source: str, file: str = "") -> tuple[Table | None, tuple[Trouble, ...]]:
    """The top table of one YAML document, with every trouble found; `file` is noted in everything it holds.

    A trouble of the YAML syntax ends the reading: the table is then None.
    """
    try:
        root = yaml.compose(source, _Composer)
    except _TroubleError as error:
        return None, (error.trouble,)
    except yaml.MarkedYAMLError as error:
        return None, (_syntax_trouble(error, source),)
    except yaml.YAMLError as error:
        return None, (_character_trouble(error, source),)
    if not isinstance(root, yaml.MappingNode):
        return None, (
            Trouble(1, 1, "", "the file holds no table", "keys such as dossier, document, models", "see the format"),
        )
    builder = _Builder(source, file)
    try:
        return builder.table(root), tuple(builder.troubles)
    except _TroubleError as error:
        return None, (*builder.troubles, error.trouble)


def _syntax_trouble(error: yaml.MarkedYAMLError, source: str) -> Trouble:
    mark = error.problem_mark or error.context_mark
    line, column, text, hint = 1, 1, "", "check indentation, colons, brackets and quotes here and on the line above"
    if mark is not None:
        line, column = mark.line + 1, mark.column + 1
        lines = source.splitlines()
        text = lines[mark.line].strip() if mark.line < len(lines) else ""
    problem = str(error.problem or error.context or "not readable")
    if "'%'" in problem:
        hint = 'put the percent sign in quotes: "%"'
    elif "'\\t'" in problem:
        hint = "indent with spaces, not with tabs"
    elif "alias" in problem:
        hint = "an alias *name needs an anchor &name above it"
    return Trouble(line, column, text, f"not YAML: {problem}", "YAML 1.1 text", hint)


def _character_trouble(error: yaml.YAMLError, source: str) -> Trouble:
    position = getattr(error, "position", 0)
    before = source[: position if isinstance(position, int) else 0]
    breaks = list(_BREAK.finditer(before))
    column = len(before) - (breaks[-1].end() if breaks else 0) + 1
    return Trouble(
        len(breaks) + 1, column, repr(source[len(before) : len(before) + 1]), "a character that YAML does not allow",
        "printable text", "delete the control character",
    )  # fmt: skip


class _Builder:
    """Turns nodes into tables, lists and texts; refuses tags, repeated keys and runaway aliases."""

    def __init__(self, source: str, file: str) -> None:
        self.source, self.file = source, file
        self.troubles: list[Trouble] = []
        self.count = 0
        self.open: set[int] = set()

    def table(self, node: yaml.MappingNode) -> Table:
        """The mapping `node`."""
        result = Table()
        result.file = self.file
        result.line, result.column = node.start_mark.line + 1, node.start_mark.column + 1
        for key_node, value_node in node.value:
            if not isinstance(key_node, yaml.ScalarNode):
                self._trouble(key_node, "", "a key must be one word", "a name", "quote it, or use a list of values")
                continue
            key, value = self._text(key_node), self._value(value_node)
            first = result.key(key)
            if first is not None:
                self._trouble(
                    key_node, key, f"key {key} is given twice", "each key once", f"the first is on line {first.line}"
                )
                continue
            result[key] = value
        return result

    def _value(self, node: yaml.Node) -> Any:
        self.count += 1
        if self.count > NODE_LIMIT or id(node) in self.open:
            mark = node.start_mark
            raise _TroubleError(
                Trouble(
                    mark.line + 1, mark.column + 1, "", "aliases expand without bound",
                    f"at most {NODE_LIMIT} values after expansion", "write the repeated part out, or use fewer aliases",
                )
            )  # fmt: skip
        if isinstance(node, yaml.ScalarNode):
            return self._text(node)
        self.open.add(id(node))
        try:
            self._refuse_tag(node)
            return self.table(node) if isinstance(node, yaml.MappingNode) else self._items(node)
        finally:
            self.open.discard(id(node))

    def _items(self, node: yaml.Node) -> Items:
        result = Items(self._value(v) for v in node.value)
        result.file = self.file
        result.line, result.column = node.start_mark.line + 1, node.start_mark.column + 1
        return result

    def _text(self, node: yaml.ScalarNode) -> Text:
        self._refuse_tag(node)
        return Text.of(node, self.source, self.file)

    def _refuse_tag(self, node: yaml.Node) -> None:
        usual = {
            yaml.ScalarNode: yaml.BaseLoader.DEFAULT_SCALAR_TAG,
            yaml.MappingNode: yaml.BaseLoader.DEFAULT_MAPPING_TAG,
            yaml.SequenceNode: yaml.BaseLoader.DEFAULT_SEQUENCE_TAG,
        }
        if node.tag != usual[type(node)]:
            self._trouble(node, node.tag, "tags are not allowed", "plain values", "remove the tag")

    def _trouble(self, node: yaml.Node, text: str, message: str, expected: str, hint: str) -> None:
        mark = node.start_mark
        self.troubles.append(Trouble(mark.line + 1, mark.column + 1, text, message, expected, hint))
