"""XML of CCSDS messages as a tree that knows its lines; no document type, no entities, both flavours of tag names.

Elements come unqualified (`<TIME_SYSTEM>`) or with a prefix for the namespace urn:ccsds:schema:ndmxml
(`<ndm:TIME_SYSTEM>`); the prefix is dropped.
"""

from __future__ import annotations

from dataclasses import dataclass, field

from shiftfix.api import Problem
from shiftfix_ingest.source_files import SourceFile

_DEPTH = 20


@dataclass
class Element:
    """One element: name without prefix, text, line, attributes and children."""

    name: str
    line: int
    attributes: dict[str, str] = field(default_factory=dict)
    children: list[Element] = field(default_factory=list)
    text: str = ""

    def first(self, name: str) -> Element | None:
        """Return the first child of that name."""
        return next((c for c in self.children if c.name == name), None)


class _Refused(Exception):
    pass


def parse_xml(source: SourceFile, root: str) -> tuple[Element | None, list[Problem]]:
    """Return the tree of a message whose root must be `root`; an `ndm` envelope around one message is opened.

    Document type declarations and entities are refused: a message has no use for them, and they can name other files or
    grow without bound.
    """
    from xml.parsers import expat

    parser = expat.ParserCreate()
    parser.buffer_text = True
    stack: list[Element] = [Element("", 0)]

    def start(name: str, attributes: dict[str, str]) -> None:
        if len(stack) > _DEPTH:
            raise _Refused(f"elements nested deeper than {_DEPTH}")
        element = Element(name.rpartition(":")[2], parser.CurrentLineNumber, attributes)
        stack[-1].children.append(element)
        stack.append(element)

    def end(name: str) -> None:
        element = stack.pop()
        element.text = element.text.strip()

    def text(data: str) -> None:
        stack[-1].text += data

    def refuse(*_: object) -> None:
        raise _Refused("a document type declaration or an entity")

    parser.StartElementHandler, parser.EndElementHandler, parser.CharacterDataHandler = start, end, text
    parser.StartDoctypeDeclHandler = parser.EntityDeclHandler = parser.ExternalEntityRefHandler = refuse
    try:
        parser.Parse(source.data, True)
    except _Refused as refused:
        return None, [
            Problem(
                f"{source.name}:{parser.CurrentLineNumber}",
                str(refused),
                allowed="plain elements and text (CCSDS 505.0-B)",
            )
        ]
    except expat.ExpatError as error:
        return None, [
            Problem(
                f"{source.name}:{error.lineno}",
                "not well-formed XML",
                found=expat.ErrorString(error.code),
                remedy="the file is truncated or damaged here: fetch it again",
            )
        ]
    top = stack[0].children[0]
    if top.name == "ndm":
        inside = [c for c in top.children if c.name == root]
        if len(inside) != 1:
            return None, [
                Problem(
                    f"{source.name}:{top.line}", f"envelope with {len(inside)} {root} messages", allowed="one a file"
                )
            ]
        top = inside[0]
    if top.name != root:
        return None, [
            Problem(f"{source.name}:{top.line}", "another kind of message", found=f"<{top.name}>", allowed=f"<{root}>")
        ]
    return top, []
