"""YAML text to plain data, with the line of every key and item.

The parser is PyYAML's; plain scalars are read by the core schema of YAML 1.2 (`1e-6` is a number, `no`, `on` and
`12:30` are text). Duplicate keys, tags and aliases are refused, each with its line.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Any

import yaml

from trainopt.errors import Problem

Loc = tuple[str | int, ...]
Places = dict[Loc, tuple[str, int]]
"""Where each key and item stands: (file as shown, line from 1)."""

_PARSER: Any = getattr(yaml, "CSafeLoader", yaml.SafeLoader)
_DEEPEST = 30
_NULL = {"", "~", "null", "Null", "NULL"}
_BOOL = {"true": True, "True": True, "TRUE": True, "false": False, "False": False, "FALSE": False}
_INT = re.compile(r"[-+]?[0-9]+")
_OTHER_BASE = re.compile(r"0o(?P<octal>[0-7]+)|0x(?P<hex>[0-9a-fA-F]+)")
_FLOAT = re.compile(r"[-+]?(\.[0-9]+|[0-9]+(\.[0-9]*)?)([eE][-+]?[0-9]+)?")
_SPECIAL = re.compile(r"(?P<sign>[-+]?)\.(inf|Inf|INF)|\.(nan|NaN|NAN)")
_LONGEST_NUMBER = 60


class Whole(int):
    """A whole number that remembers how it was written (`007`)."""

    text: str


class Decimal(float):
    """A number that remembers how it was written (`1.10`)."""

    text: str


@dataclass(frozen=True)
class Document:
    """What a YAML file says: `data` of dict, tuple, str, number, bool and None; the line of every part."""

    data: Any
    places: Places
    problems: tuple[Problem, ...]


def scalar(text: str) -> Any:
    """A plain scalar by the YAML 1.2 core schema."""
    if text in _NULL:
        return None
    if text in _BOOL:
        return _BOOL[text]
    if len(text) > _LONGEST_NUMBER:
        return text
    if _INT.fullmatch(text):
        return _whole(int(text), text)
    if _FLOAT.fullmatch(text):
        return _decimal(float(text), text)
    other = _OTHER_BASE.fullmatch(text)
    if other:
        return _whole(int(other["octal"], 8) if other["octal"] else int(other["hex"], 16), text)
    special = _SPECIAL.fullmatch(text)
    if special:
        return _decimal(float("nan" if special["sign"] is None else f"{special['sign']}inf"), text)
    return text


def _whole(value: int, text: str) -> Whole:
    number = Whole(value)
    number.text = text
    return number


def _decimal(value: float, text: str) -> Decimal:
    number = Decimal(value)
    number.text = text
    return number


def read_document(text: str, shown: str) -> Document:
    """Read one YAML document; problems are collected as far as the syntax allows."""
    builder = _Builder(shown)
    try:
        for event in yaml.parse(text, Loader=_PARSER):
            builder.take(event)
            if builder.stopped:
                break
    except yaml.MarkedYAMLError as error:
        builder.problems.append(_syntax_problem(error, text, shown))
        builder.stopped = True
    except yaml.reader.ReaderError:
        builder.problems.append(_character_problem(text, shown))
        builder.stopped = True
    if builder.documents == 0 and not builder.problems:
        builder.problem(0, "is empty; expected keys and values")
    data = None if builder.stopped else builder.root
    return Document(data, builder.places, tuple(builder.problems))


@dataclass
class _Frame:
    """A mapping or sequence being filled; `key` is the mapping key that waits for its value."""

    loc: Loc
    items: dict[str, Any] | list[Any]
    key: str | None = None
    duplicate: bool = False


class _Builder:
    """Builds data from parser events on an explicit stack, so that no nesting can exhaust the interpreter's."""

    def __init__(self, shown: str) -> None:
        self.shown = shown
        self.places: Places = {}
        self.problems: list[Problem] = []
        self.stack: list[_Frame] = []
        self.root: Any = None
        self.documents = 0
        self.stopped = False

    def problem(self, line: int, text: str) -> None:
        self.problems.append(Problem(self.shown, line, text))

    def stop(self, line: int, text: str) -> None:
        self.problem(line, text)
        self.stopped = True

    def take(self, event: Any) -> None:
        """Act on one parser event."""
        if isinstance(event, yaml.ScalarEvent):
            self._scalar(event)
        elif isinstance(event, yaml.MappingStartEvent | yaml.SequenceStartEvent):
            self._open(event)
        elif isinstance(event, yaml.MappingEndEvent | yaml.SequenceEndEvent):
            self._close()
        elif isinstance(event, yaml.AliasEvent):
            self.stop(_line(event), f"alias '*{event.anchor}' is not supported; expected the value written out")
        elif isinstance(event, yaml.DocumentStartEvent):
            self.documents += 1
            if self.documents > 1:
                self.stop(_line(event), "a second document starts here; expected one per file")

    def _scalar(self, event: Any) -> None:
        line = _line(event)
        self._refuse_tag(event, line)
        frame = self.stack[-1] if self.stack else None
        if frame is not None and isinstance(frame.items, dict) and frame.key is None:
            self._key(frame, event.value, line)
            return
        value = scalar(event.value) if event.implicit[0] else event.value  # plain, not quoted
        self._place(line)
        self._add(value)

    def _key(self, frame: _Frame, key: str, line: int) -> None:
        assert isinstance(frame.items, dict)
        frame.key, frame.duplicate = key, key in frame.items
        if frame.duplicate:
            first = self.places[(*frame.loc, key)][1]
            self.problem(line, f"key '{key}' stands here again; expected it once (first in line {first})")
        else:
            self.places[(*frame.loc, key)] = (self.shown, line)

    def _loc(self) -> Loc:
        """The place of the value that comes next."""
        if not self.stack:
            return ()
        frame = self.stack[-1]
        part: str | int = len(frame.items) if isinstance(frame.items, list) else frame.key or ""
        return (*frame.loc, part)

    def _place(self, line: int) -> None:
        self.places.setdefault(self._loc(), (self.shown, line))

    def _add(self, value: Any) -> None:
        if not self.stack:
            self.root = value
            return
        frame = self.stack[-1]
        if isinstance(frame.items, list):
            frame.items.append(value)
            return
        if not frame.duplicate:
            frame.items[frame.key or ""] = value
        frame.key = None

    def _open(self, event: Any) -> None:
        line = _line(event)
        self._refuse_tag(event, line)
        if self.stack and isinstance(self.stack[-1].items, dict) and self.stack[-1].key is None:
            self.stop(line, "a list or mapping stands where a key belongs; expected a name")
        elif len(self.stack) >= _DEEPEST:
            self.stop(line, f"is nested more than {_DEEPEST} levels deep; expected the layout of a trainopt file")
        else:
            self._place(line)
            mapping = isinstance(event, yaml.MappingStartEvent)
            self.stack.append(_Frame(self._loc(), {} if mapping else []))

    def _close(self) -> None:
        frame = self.stack.pop()
        self._add(frame.items if isinstance(frame.items, dict) else tuple(frame.items))

    def _refuse_tag(self, event: Any, line: int) -> None:
        if event.tag is not None:
            self.problem(line, f"tag '{event.tag}' is not supported; expected a plain value")


def _line(event: Any) -> int:
    return int(event.start_mark.line) + 1


def _syntax_problem(error: yaml.MarkedYAMLError, text: str, shown: str) -> Problem:
    mark = error.problem_mark or error.context_mark
    line = mark.line + 1 if mark is not None else 0
    lines = text.splitlines()
    for number in (line, line - 1):
        if 0 < number <= len(lines):
            indent = re.match(r"\s*", lines[number - 1])
            if indent and "\t" in indent[0]:
                return Problem(shown, number, "a tab stands in the indentation; expected spaces")
    what = " ".join(str(part) for part in (error.context, error.problem) if part)
    return Problem(shown, min(line, len(lines)), f"cannot be read as YAML: {what}; {_syntax_hint(what)}")


def _syntax_hint(what: str) -> str:
    """What to look for, in a user's words."""
    if "mapping values are not allowed" in what:
        return "expected one 'key: value' per line; text that holds ': ' needs quotes"
    if "flow mapping" in what or "flow sequence" in what:
        return "expected a closed { } or [ ] with commas between its parts"
    if "quoted scalar" in what:
        return "expected a closing quote"
    if "could not find expected ':'" in what:
        return "expected 'key: value'"
    if "cannot start any token" in what:
        return "expected quotes around text that begins with a special character"
    return "expected 'key: value' lines, indented with spaces"


def _character_problem(text: str, shown: str) -> Problem:
    bad = next((i for i, letter in enumerate(text) if _unprintable(letter)), 0)
    line = text.count("\n", 0, bad) + 1
    return Problem(shown, line, f"holds a character that YAML does not allow ({text[bad : bad + 1]!r}); expected text")


def _unprintable(letter: str) -> bool:
    return bool(yaml.reader.Reader.NON_PRINTABLE.match(letter))
