"""YAML text -> plain data that remembers the line of every key and list item.

Plain scalars follow the core schema of YAML 1.2 (section 10.3.2), not that of YAML 1.1: `1e5` is a
number, `on` and `2031-05-01` are words. Keys are always text. Tags, merge keys and second documents
are refused, and aliases are counted as if written out, so that a small file can't unfold to a huge one.
"""

import re
from typing import NamedTuple

import yaml

LARGEST_TEXT = 16_000_000
MOST_NODES = 1_000_000
DEEPEST = 24

LOADER = getattr(yaml, "CSafeLoader", yaml.SafeLoader)
UNPRINTABLE = yaml.reader.Reader.NON_PRINTABLE

WORDS = {
    **dict.fromkeys(("", "~", "null", "Null", "NULL"), None),
    **dict.fromkeys(("true", "True", "TRUE"), True),
    **dict.fromkeys(("false", "False", "FALSE"), False),
}
INTEGER = re.compile(r"[-+]?[0-9]{1,300}|0o[0-7]{1,100}|0x[0-9a-fA-F]{1,100}")
FLOAT = re.compile(r"[-+]?(\.[0-9]+|[0-9]+(\.[0-9]*)?)([eE][-+]?[0-9]+)?")
NOT_FINITE = re.compile(r"[-+]?\.(inf|Inf|INF)|\.(nan|NaN|NAN)")


class Problem(NamedTuple):
    """One mistake: its line, the path of keys and indices that leads to it, and what is wrong."""

    line: int
    path: tuple
    text: str


class LinedData:
    """Data of a YAML text, the lines of its keys, and the mistakes that reading could go past."""

    def __init__(self):
        self.data = None
        self.problems: list[Problem] = []
        self._lines: dict[int, dict] = {}  # id of a container -> key or index -> line

    def note_line(self, container, key, line):
        self._lines.setdefault(id(container), {})[key] = line

    def line_of(self, path):
        """Line of the last part of `path` that exists in the data; an alias leads to its anchor."""
        line, node = 1, self.data
        for key in path:
            lines = self._lines.get(id(node), {})
            if key not in lines:
                break
            line, node = lines[key], node[key]
        return line


def read_lined_yaml(text: str) -> LinedData:
    """Read a YAML text.

    Returns: LinedData; its `problems` hold what could be read past (a key twice, a tag).
    Raises:  yaml.MarkedYAMLError with a `problem_mark` where nothing more can be read.
    """
    found = UNPRINTABLE.search(text)
    if found:
        line = text.count("\n", 0, found.start())
        _stop(f"unprintable character {found.group()!r}", yaml.Mark("", 0, line, 0, None, 0))
    composer = _Composer(text)
    composer.document()
    return composer.lined


class _Composer:
    """Builds data from PyYAML's event stream, which is lazy: a limit stops the reading itself."""

    def __init__(self, text):
        self.events = yaml.parse(text, Loader=LOADER)
        self.lined = LinedData()
        self.anchors = {}  # name -> (data, number of nodes when written out)
        self.nodes = 0

    def document(self):
        next(self.events)  # start of the stream
        first = next(self.events)
        if isinstance(first, yaml.StreamEndEvent):
            return
        self.lined.data = self._node(next(self.events), ())
        next(self.events)  # end of the document
        after = next(self.events)
        if not isinstance(after, yaml.StreamEndEvent):
            _stop("a second document starts; only one is read", after.start_mark)

    def _node(self, event, path):
        if isinstance(event, yaml.AliasEvent):
            return self._aliased(event)
        before = self.nodes
        self._count(1, event)
        if event.tag is not None:
            self._problem(event, path, f"tag {event.tag!r}; tags are not read, write the plain value")
        data = self._content(event, path)
        if event.anchor:
            self.anchors[event.anchor] = (data, self.nodes - before)
        return data

    def _content(self, event, path):
        if isinstance(event, yaml.ScalarEvent):
            return self._scalar(event, path)
        if len(path) >= DEEPEST:
            _stop(f"nested deeper than {DEEPEST} levels", event.start_mark)
        if isinstance(event, yaml.SequenceStartEvent):
            return self._sequence(path)
        return self._mapping(path)

    def _aliased(self, event):
        if event.anchor not in self.anchors:
            _stop(f"alias *{event.anchor}: no finished anchor has that name", event.start_mark)
        data, nodes = self.anchors[event.anchor]
        self._count(nodes, event)
        return data

    def _scalar(self, event, path):
        if UNPRINTABLE.search(event.value):
            self._problem(event, path, "unprintable character in the text")
        return plain_value(event.value) if event.implicit[0] else event.value

    def _sequence(self, path):
        items = []
        while not isinstance(event := next(self.events), yaml.SequenceEndEvent):
            index = len(items)
            self.lined.note_line(items, index, event.start_mark.line + 1)
            items.append(self._node(event, (*path, index)))
        return items

    def _mapping(self, path):
        mapping, first_line, merged = {}, {}, {}
        while not isinstance(event := next(self.events), yaml.MappingEndEvent):
            key, line = self._key(event, path), event.start_mark.line + 1
            merge = _is_merge(event)
            value = self._node(next(self.events), (*path, key))
            if merge:  # told by now; what it would have brought is not to be told as missing
                merged.update(value if isinstance(value, dict) else {})
                continue
            if key in first_line:
                text = f"the key is here twice; it was on line {first_line[key]} first"
                self._problem(event, (*path, key), text)
                continue
            first_line[key] = line
            mapping[key] = value
            self.lined.note_line(mapping, key, line)
        for key, value in merged.items():
            mapping.setdefault(key, value)
        return mapping

    def _key(self, event, path):
        if not isinstance(event, yaml.ScalarEvent):
            _stop("a key must be plain text", event.start_mark)
        if _is_merge(event):
            self._problem(event, (*path, "<<"), "merge keys are not read; write the keys out")
        if UNPRINTABLE.search(event.value):
            self._problem(event, path, "unprintable character in a key")
        return event.value

    def _count(self, nodes, event):
        self.nodes += nodes
        if self.nodes > MOST_NODES:
            _stop(f"more than {MOST_NODES:,} values, aliases written out", event.start_mark)

    def _problem(self, event, path, text):
        self.lined.problems.append(Problem(event.start_mark.line + 1, path, text))


def _is_merge(event):
    return event.implicit[0] and event.value == "<<"


def plain_value(text: str):
    """Value of an unquoted scalar by the core schema of YAML 1.2 (section 10.3.2)."""
    if text in WORDS:
        return WORDS[text]
    if INTEGER.fullmatch(text):
        return int(text, 0) if text[:2] in ("0o", "0x") else int(text)
    if FLOAT.fullmatch(text):
        return float(text)
    if NOT_FINITE.fullmatch(text):
        return float(text.replace(".", ""))
    return text


def _stop(text, mark):
    raise yaml.MarkedYAMLError(problem=text, problem_mark=mark)
