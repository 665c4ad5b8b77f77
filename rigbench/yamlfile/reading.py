"""Reading YAML: the 1.2 core scalars, the line of every key, and every odd file a fault."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import yaml

from rigbench.errors import Fault, InputFaults
from rigbench.yamlfile.document import Document, KeyPath, key_text

__all__ = ["DEEPEST", "LARGEST", "load"]

DEEPEST = 40
"""Levels of nesting that a file may have; a declaration needs about six."""

LARGEST = 100_000
"""Values that a file may hold once its aliases are written out."""

LONGEST_INTEGER = 40
"""Digits of a whole number; more are a slip, and Python refuses thousands."""

MERGE = "<<"
"""What YAML 1.1 takes other mappings' keys in with; YAML 1.2 has no such key."""

_ODD = re.compile("[^\t\n\r -~\xa0-\u2027\u202a-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]")
"""What no declaration needs: controls, lone surrogates, and line ends that editors don't count."""

_INTEGER = re.compile(r"[-+]?[0-9]+")
_OCTAL_OR_HEXADECIMAL = re.compile(r"0o[0-7]+|0x[0-9a-fA-F]+")
_FLOAT = re.compile(r"[-+]?(\.[0-9]+|[0-9]+(\.[0-9]*)?)([eE][-+]?[0-9]+)?")
_WORDS: Mapping[str, Any] = {
    **dict.fromkeys(("", "~", "null", "Null", "NULL")),
    **dict.fromkeys(("true", "True", "TRUE"), True),
    **dict.fromkeys(("false", "False", "FALSE"), False),
    **{sign + word: float(sign + "inf") for sign in ("", "+", "-") for word in (".inf", ".Inf", ".INF")},
    **dict.fromkeys((".nan", ".NaN", ".NAN"), float("nan")),
}
_PLAIN_TAGS = (None, "!", "tag:yaml.org,2002:str", "tag:yaml.org,2002:map", "tag:yaml.org,2002:seq")


def load(file: str, text: str) -> Document:
    """Read YAML text (1.2 core scalars) into a Document; ``file`` is its name for messages.

    Raises InputFaults: syntax, duplicate keys, keys that are not text, odd control characters,
    aliases that grow without bound, nesting beyond DEEPEST, an empty file, a second document.
    """
    odd = _ODD.search(text)
    if odd:
        line = text.count("\n", 0, odd.start()) + 1
        raise InputFaults.one(file, "", _not_allowed(odd), "plain text", line)
    reader = _Reader(file)
    try:
        for event in yaml.parse(text, Loader=yaml.SafeLoader):
            reader.take(event)
    except yaml.MarkedYAMLError as error:
        mark = error.problem_mark or error.context_mark
        said = " ".join(part for part in (error.context, error.problem) if part)
        reader.fault(mark, (), f"not valid YAML: {said}")
    except (yaml.YAMLError, ValueError, OverflowError, IndexError) as error:
        # the parser lets slips of its own out, such as chr() of an escape that names no character
        reader.fault(None, (), f"not valid YAML: {error}")
    except _GiveUpError:
        pass
    if not reader.root and not reader.faults:
        reader.fault(None, (), "the file is empty", "a declaration")
    if reader.faults:
        raise InputFaults(reader.faults)
    lines: dict[KeyPath, int] = {}
    data = _plain(reader.root[0], (), reader.root[0].line, lines)
    return Document(file, data, lines)


def _resolve(text: str) -> Any:
    """Return the value of a plain scalar in the YAML 1.2 core schema."""
    if text in _WORDS:
        return _WORDS[text]
    if _INTEGER.fullmatch(text):
        return int(text)
    if _OCTAL_OR_HEXADECIMAL.fullmatch(text):
        return int(text, 0)
    return float(text) if _FLOAT.fullmatch(text) else text


def _not_allowed(odd: re.Match[str]) -> str:
    return f"the character U+{ord(odd.group()):04X} is not allowed"


def _line(event: Any) -> int:
    line: int = event.start_mark.line
    return line + 1


class _GiveUpError(Exception):
    """Reading on makes no sense; the fault is noted already."""


@dataclass(eq=False)
class _Node:
    """A value with its line: a scalar, a list of nodes or a mapping of keys to (line of key, node)."""

    line: int
    value: Any
    size: int = 1
    closed: bool = True


@dataclass(eq=False)
class _Open:
    """A list or mapping being read; a mapping ``has_key`` while its value is awaited (None: a bad key)."""

    node: _Node
    path: KeyPath
    has_key: bool = False
    key: str | None = None
    key_line: int = 0


@dataclass
class _Reader:
    """Builds nodes from the parser's events, without recursion."""

    file: str
    faults: list[Fault] = field(default_factory=list)
    root: list[_Node] = field(default_factory=list)
    _stack: list[_Open] = field(default_factory=list)
    _anchors: dict[str, _Node] = field(default_factory=dict)

    def fault(self, mark: Any, path: KeyPath, problem: str, expected: str = "") -> None:
        line = None if mark is None else mark.line + 1
        self.faults.append(Fault(self.file, line, key_text(path), problem, expected))

    def take(self, event: Any) -> None:
        """Take the parser's next event."""
        if isinstance(event, yaml.ScalarEvent):
            node = _Node(_line(event), self._scalar(event))
            self._name(event, node)
            self._place(node, event)
        elif isinstance(event, yaml.AliasEvent):
            self._place(self._aliased(event), event)
        elif isinstance(event, yaml.CollectionStartEvent):
            self._start(event)
        elif isinstance(event, yaml.CollectionEndEvent):
            top = self._stack.pop()
            top.node.closed = True
            self._place(top.node, event)
        elif isinstance(event, yaml.DocumentStartEvent) and self.root:
            self.fault(event.start_mark, (), "a second document starts here", "one document in a file")
            raise _GiveUpError

    def _path(self) -> KeyPath:
        """Path of the value that comes next; of the mapping itself where that is a key."""
        if not self._stack:
            return ()
        top = self._stack[-1]
        if isinstance(top.node.value, list):
            return (*top.path, len(top.node.value))
        return top.path if top.key is None else (*top.path, top.key)

    def _name(self, event: Any, node: _Node) -> None:
        if event.tag not in _PLAIN_TAGS:
            self.fault(event.start_mark, self._path(), f"the tag {event.tag} is not known", "a plain value")
        if event.anchor is not None:
            self._anchors[event.anchor] = node

    def _scalar(self, event: Any) -> Any:
        text: str = event.value
        odd = _ODD.search(text)  # by way of an escape
        if odd:
            self.fault(event.start_mark, self._path(), _not_allowed(odd), "plain text")
            return ""
        if event.tag is not None or event.style is not None:
            return text
        if _INTEGER.fullmatch(text) and len(text) > LONGEST_INTEGER:
            problem = f"a whole number of {len(text)} digits is not allowed"
            self.fault(event.start_mark, self._path(), problem, f"at most {LONGEST_INTEGER} digits")
            return 0
        return _resolve(text)

    def _aliased(self, event: Any) -> _Node:
        node = self._anchors.get(event.anchor)
        if node is not None and node.closed:
            return node
        problem = f"*{event.anchor} " + ("is not defined" if node is None else "contains itself")
        self.fault(event.start_mark, self._path(), problem, "an anchor defined further up")
        return _Node(_line(event), None)

    def _start(self, event: Any) -> None:
        top = self._stack[-1] if self._stack else None
        if len(self._stack) >= DEEPEST:
            self.fault(event.start_mark, (), f"nested more than {DEEPEST} deep", "fewer levels")
            raise _GiveUpError
        if top and isinstance(top.node.value, dict) and not top.has_key:
            self.fault(event.start_mark, top.path, "a key can't be a list or mapping", "a name")
            raise _GiveUpError
        empty: Any = [] if isinstance(event, yaml.SequenceStartEvent) else {}
        node = _Node(_line(event), empty, closed=False)
        self._name(event, node)
        self._stack.append(_Open(node, self._path()))

    def _place(self, node: _Node, event: Any) -> None:
        """Put a finished value (or a key) where it belongs."""
        if not self._stack:
            self.root.append(node)
            return
        top = self._stack[-1]
        if isinstance(top.node.value, dict) and not top.has_key:
            self._place_key(top, node, event)
            return
        top.node.size += node.size
        if top.node.size > LARGEST:
            self.fault(event.start_mark, (), f"more than {LARGEST} values", "fewer, or fewer aliases")
            raise _GiveUpError
        if isinstance(top.node.value, list):
            top.node.value.append(node)
            return
        if top.key is not None:
            top.node.value[top.key] = (top.key_line, node)
        top.has_key, top.key = False, None

    def _place_key(self, top: _Open, node: _Node, event: Any) -> None:
        top.has_key = True
        key = node.value
        if not isinstance(key, str):
            shown = f"the key {event.value}" if getattr(event, "value", "") else "an empty key"
            self.fault(event.start_mark, top.path, f"{shown} is not text", "a name (in quotes, if need be)")
        elif key == MERGE and getattr(event, "style", None) is None:
            self.fault(event.start_mark, top.path, f"merge keys ({MERGE}) aren't read", "the keys themselves")
        elif key in top.node.value:
            problem = f"declared twice, first on line {top.node.value[key][0]}"
            self.fault(event.start_mark, (*top.path, key), problem, "each key once")
        else:
            top.key, top.key_line = key, _line(event)


def _plain(node: _Node, path: KeyPath, line: int, lines: dict[KeyPath, int]) -> Any:
    """Return a node's value in plain types and note the lines of what is in it (DEEPEST bounds the depth)."""
    lines[path] = line
    if isinstance(node.value, list):
        return [_plain(item, (*path, i), item.line, lines) for i, item in enumerate(node.value)]
    if isinstance(node.value, dict):
        return {key: _plain(item, (*path, key), at, lines) for key, (at, item) in node.value.items()}
    return node.value
