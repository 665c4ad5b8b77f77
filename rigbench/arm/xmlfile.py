"""XML whose elements know their lines, without what a file from elsewhere could do harm with."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from xml.parsers import expat

from rigbench.errors import Fault

__all__ = ["Element", "parse_xml"]

DEEPEST = 60
"""Levels of nesting that a file may have; a URDF needs about six."""


@dataclass(eq=False)
class Element:
    """An element with the line that it starts on."""

    tag: str
    attributes: Mapping[str, str]
    line: int
    children: list[Element] = field(default_factory=list)

    def child(self, tag: str) -> Element | None:
        """Return the first child of a tag."""
        return next((child for child in self.children if child.tag == tag), None)

    def all(self, tag: str) -> Iterator[Element]:
        """Yield every element of a tag below this one (DEEPEST bounds the recursion)."""
        for child in self.children:
            if child.tag == tag:
                yield child
            yield from child.all(tag)


class _RefusedError(Exception):
    """The XML holds what no URDF needs."""


def parse_xml(file: str, text: str) -> tuple[Element | None, list[Fault]]:
    """Parse XML text; ``file`` is its name for messages.

    Returns the outermost element, or None and the fault: what is not well-formed, a document type
    (and with it entities), a template, nesting beyond DEEPEST.
    """
    top = Element("", {}, 1)
    stack = [top]
    parser = expat.ParserCreate()

    def start(tag: str, attributes: dict[str, str]) -> None:
        if len(stack) > DEEPEST:
            raise _RefusedError(f"nested more than {DEEPEST} deep")
        if tag.startswith("xacro:"):
            raise _RefusedError(f"<{tag}> belongs to a template, not to a URDF: expand it first")
        element = Element(tag, attributes, parser.CurrentLineNumber)
        stack[-1].children.append(element)
        stack.append(element)

    def end(_: str) -> None:
        stack.pop()

    def doctype(*_: object) -> None:
        raise _RefusedError("a document type (DOCTYPE) is not allowed")

    parser.StartElementHandler, parser.EndElementHandler = start, end
    parser.StartDoctypeDeclHandler = doctype
    try:
        parser.Parse(text, True)
    except expat.ExpatError as error:
        return None, [Fault(file, error.lineno, "", f"not valid XML: {expat.ErrorString(error.code)}")]
    except ValueError as error:  # lone surrogates can't be encoded
        return None, [Fault(file, None, "", f"not valid XML: {error}")]
    except _RefusedError as error:
        return None, [Fault(file, parser.CurrentLineNumber, "", str(error), "a plain URDF")]
    return top.children[0], []
