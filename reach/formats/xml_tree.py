"""XML to a plain tree in which every element knows its line; nothing is expanded, fetched or included."""

from __future__ import annotations

from dataclasses import dataclass, field
from xml.parsers import expat

from reach.errors import FaultList

MAX_DEPTH = 100  # a URDF nests 5 deep
MAX_ELEMENTS = 20_000  # a humanoid with sensors has about 2,000

_EXPAND = "is xacro source, not a finished URDF; expand it first: xacro FILE.xacro > FILE.urdf"


@dataclass
class Element:
    """One element: tag, attributes, line in the file, and the elements inside it."""

    tag: str
    attributes: dict[str, str]
    line: int
    children: list[Element] = field(default_factory=list)

    def all(self, tag: str) -> list[Element]:
        """Direct children of that tag."""
        return [child for child in self.children if child.tag == tag]


class _Refused(Exception):
    """The document was given up at a line."""

    def __init__(self, line: int, what: str):
        self.line, self.what = line, what
        super().__init__(what)


class _Builder:
    """Handlers of one parse."""

    def __init__(self) -> None:
        self.parser = expat.ParserCreate()
        self.parser.StartElementHandler = self._start
        self.parser.EndElementHandler = self._end
        self.parser.StartDoctypeDeclHandler = self._declared
        self.parser.EntityDeclHandler = self._declared
        self.parser.ExternalEntityRefHandler = self._declared
        self.parser.SkippedEntityHandler = self._declared
        self.root: Element | None = None
        self.open: list[Element] = []
        self.count = 0

    def _start(self, tag: str, attributes: dict[str, str]) -> None:
        line = self.parser.CurrentLineNumber
        self.count += 1
        if len(self.open) >= MAX_DEPTH:
            raise _Refused(line, f"elements nest deeper than {MAX_DEPTH}; this is no URDF")
        if self.count > MAX_ELEMENTS:
            raise _Refused(line, f"holds more than {MAX_ELEMENTS} elements; cut it down to the arm")
        if tag.startswith("xacro:"):
            raise _Refused(line, f"<{tag}> {_EXPAND}")
        for name, value in attributes.items():
            if "${" in value or "$(" in value:
                raise _Refused(line, f'{name}="{value[:60]}" {_EXPAND}')
        element = Element(tag, attributes, line)
        if self.open:
            self.open[-1].children.append(element)
        else:
            self.root = element
        self.open.append(element)

    def _end(self, tag: str) -> None:
        self.open.pop()

    def _declared(self, *_: object) -> int:
        line = self.parser.CurrentLineNumber
        raise _Refused(line, "declares a document type or entities, which are not read here; remove them")


def parse(content: bytes, faults: FaultList) -> Element | None:
    """Return the root element, or None after noting why there is none.

    Refused are document types and entities, deep or huge documents, and unexpanded xacro.
    """
    builder = _Builder()
    try:
        builder.parser.Parse(content, True)
    except _Refused as refused:
        faults.add(f"line {refused.line}", refused.what)
        return None
    except expat.ExpatError as error:
        reason = expat.errors.messages.get(error.code, "unreadable")
        faults.add(f"line {error.lineno}", f"is not well-formed XML ({reason}); correct it there")
        return None
    except (ValueError, LookupError) as error:
        faults.add("file", f"its XML can't be decoded ({error}); save it as UTF-8")
        return None
    return builder.root
