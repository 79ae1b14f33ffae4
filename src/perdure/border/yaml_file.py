"""YAML as the user writes it: safe, small, without anchors, every key once, with the line of every key.

Only plain text, decimal numbers, true/false and null are recognised: ``no`` stays a word, ``1:30`` is no number.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import yaml

from perdure.errors import Problem, StudyError, problem

SIZE_LIMIT = 1_000_000
_DEPTH_LIMIT = 20
Path_ = tuple[str, ...]


@dataclass(frozen=True, slots=True)
class YamlFile:
    """A parsed file.

    Attributes:
        name: how messages call it, relative to the study folder.
        content: the top mapping.
        lines: line number (1 = first) of every key, by its path of keys.
    """

    name: str
    content: Mapping[str, object]
    lines: Mapping[Path_, int]

    def where(self, path: Path_) -> str:
        """``file, line n, key a > b`` for messages; the line of the nearest parent where the key itself is missing."""
        for length in range(len(path), 0, -1):
            if path[:length] in self.lines:
                return f"{self.name}, line {self.lines[path[:length]]}, key {' > '.join(path)}"
        return f"{self.name}, key {' > '.join(path)}" if path else self.name


_INT = re.compile(r"[-+]?\d+")
_FLOAT = re.compile(r"[-+]?(\d+\.?\d*|\.\d+)([eE][-+]?\d+)?")


def _scalar(node: yaml.ScalarNode) -> object:
    text = node.value
    if node.style is not None:
        return text
    if text in ("", "~", "null"):
        return None
    if text in ("true", "false"):
        return text == "true"
    if _INT.fullmatch(text) and len(text) < 20:
        return int(text)
    if _FLOAT.fullmatch(text):
        return float(text)
    return text


def _line(item: yaml.Node | yaml.Event) -> int:
    return item.start_mark.line + 1 if item.start_mark is not None else 1


def _build(node: yaml.Node, path: Path_, lines: dict[Path_, int], problems: list[Problem], name: str) -> object:
    if isinstance(node, yaml.ScalarNode):
        return _scalar(node)
    if isinstance(node, yaml.SequenceNode):
        items = []
        for index, child in enumerate(node.value, start=1):
            lines[(*path, str(index))] = _line(child)
            items.append(_build(child, (*path, str(index)), lines, problems, name))
        return items
    content: dict[str, object] = {}
    for key_node, value_node in node.value:
        if not isinstance(key_node, yaml.ScalarNode):
            problems.append(problem(f"{name}, line {_line(key_node)}", "a key that is no word", "a plain word", "Name the key."))
            continue
        key = str(key_node.value)
        here = (*path, key)
        if key in content:
            problems.append(
                problem(
                    f"{name}, line {_line(key_node)}, key {' > '.join(here)}",
                    f'the key "{key}" a second time (first in line {lines[here]})',
                    "every key once",
                    "Remove one of the two.",
                )
            )
            continue
        lines[here] = _line(key_node)
        content[key] = _build(value_node, here, lines, problems, name)
    return content


def read_yaml(path: Path, name: str) -> YamlFile:
    """Read ``path``, called ``name`` in messages.

    Raises:
        StudyError: missing, too large, not UTF-8, not YAML, with anchors or tags, a key twice, or no mapping at the top.
    """
    if not path.is_file():
        raise StudyError([problem(name, "no such file", "a YAML file", f"Write {name}; `perdure new` shows one that runs.")])
    raw = path.read_bytes()
    if len(raw) > SIZE_LIMIT:
        raise StudyError([problem(name, f"{len(raw)} bytes", f"at most {SIZE_LIMIT} bytes", "Keep readings in records/ and histories/.")])
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = raw[: error.start].count(b"\n") + 1
        raise StudyError([problem(f"{name}, line {line}", "bytes that are not UTF-8", "UTF-8 text", "Save the file as UTF-8.")]) from None
    return parse_yaml(text, name)


def _event_faults(text: str, name: str) -> list[Problem]:
    """Tags; anchors, aliases and deep nesting are raised at once, before anything is built from them.

    Raises:
        StudyError: an anchor, an alias or deep nesting.
    """
    problems: list[Problem] = []
    depth = 0
    for event in yaml.parse(text, Loader=yaml.SafeLoader):
        where = f"{name}, line {_line(event)}"
        depth += isinstance(event, yaml.CollectionStartEvent) - isinstance(event, yaml.CollectionEndEvent)
        if depth > _DEPTH_LIMIT:
            raise StudyError([problem(where, "deep nesting", f"at most {_DEPTH_LIMIT} levels", "Flatten it.")])
        if getattr(event, "anchor", None) is not None:
            kind = "an alias" if isinstance(event, yaml.AliasEvent) else "an anchor"
            remedy = 'Write the value where it is used; put text with "&" or "*" in quotes.'
            raise StudyError([problem(where, kind, "every value written out", remedy)])
        if getattr(event, "tag", None) is not None:
            problems.append(problem(where, "a tag (!)", "plain values", "Remove the tag."))
    return problems


def parse_yaml(text: str, name: str) -> YamlFile:
    """Parse ``text``, called ``name`` in messages; errors as in :func:`read_yaml`."""
    try:
        problems = _event_faults(text, name)
        node = yaml.compose(text, Loader=yaml.SafeLoader)
    except yaml.YAMLError as error:
        mark = getattr(error, "problem_mark", None)
        where = f"{name}, line {mark.line + 1}" if mark is not None else name
        detail = getattr(error, "problem", None) or "text that is no YAML"
        raise StudyError([problem(where, str(detail), "valid YAML", "Check indentation, colons and quotes near this line.")]) from None
    lines: dict[Path_, int] = {}
    content = None if node is None else _build(node, (), lines, problems, name)
    if not problems and not isinstance(content, dict):
        problems.append(problem(name, "no keys at the top", "keys such as format: 1", "Write the keys at the left margin."))
    if problems or not isinstance(content, dict):
        raise StudyError(problems)
    return YamlFile(name, content, lines)
