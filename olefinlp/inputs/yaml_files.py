"""YAML files into plain values that remember their lines.

Only safe YAML: no tags that build objects. Equal keys twice in one mapping, endless nesting and
anchors that expand enormously are findings, not surprises.
"""

from __future__ import annotations

import os
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from olefinlp.inputs.findings import Findings, Place, near_name, path_text, shown

Path_ = tuple[str | int, ...]
MAX_BYTES = 8 * 1024 * 1024
MAX_VALUES = 200_000
MAX_DEPTH = 40


@dataclass(frozen=True)
class Document:
    """A YAML file as plain values (`data`), with the line of every path in it.

    `places` are those of values that were changed elsewhere, such as a cell of a case sheet.
    """

    file: str
    data: dict[str, Any]
    lines: dict[Path_, int] = field(default_factory=dict)
    places: dict[Path_, Place] = field(default_factory=dict)

    def place(self, path: Path_) -> Place:
        """The place of a path, or of the nearest thing above it that is written."""
        while path and path not in self.lines and path not in self.places:
            path = path[:-1]
        return self.places.get(path) or Place(self.file, self.lines.get(path, 1))


def read_text(path: str | os.PathLike[str], findings: Findings, limit: int = MAX_BYTES) -> str | None:
    """The text of a UTF-8 file; None with a finding when it cannot be read."""
    place = Place(shown(path))
    file = Path(path)
    try:
        if file.is_dir():
            findings.error(place, "", "is a folder, a file is needed here")
            return None
        if file.stat().st_size > limit:
            findings.error(place, "", f"is larger than {limit // 1024 // 1024} MB", "is it the right file?")
            return None
        text = file.read_bytes().decode("utf-8-sig")
    except FileNotFoundError:
        findings.error(place, "", "no such file", _near_file(file))
        return None
    except UnicodeDecodeError as error:
        findings.error(place, "", f"is not UTF-8 text (byte {error.start})", "save it as UTF-8")
        return None
    except (OSError, ValueError) as error:
        findings.error(place, "", f"cannot be read: {getattr(error, 'strerror', None) or error}")
        return None
    if not text.strip():
        findings.error(place, "", "is empty")
        return None
    return text


def _near_file(file: Path) -> str:
    try:
        return near_name(file.name, (p.name for p in file.parent.iterdir()))
    except OSError:
        return "the folder is not there either"


def read_yaml(path: str | os.PathLike[str], findings: Findings) -> Document | None:
    """Read one YAML file with the line of every value; None with findings when it is no mapping."""
    text = read_text(path, findings)
    if text is None:
        return None
    file = shown(path)
    node = _compose(text, file, findings)
    if node is None:
        return None
    reader = _Reader(file, findings)
    if node.id != "mapping":
        findings.error(Place(file, 1), "", "must hold `name: value` lines")
        return None
    data = reader.value(node, (), 0)
    return None if reader.broken else Document(file, data, reader.lines)


def _compose(text: str, file: str, findings: Findings) -> Any:
    from ruamel.yaml import YAML
    from ruamel.yaml.error import MarkedYAMLError, YAMLError

    try:
        node = YAML(typ="safe", pure=True).compose(text)
    except MarkedYAMLError as error:
        mark = error.problem_mark or error.context_mark
        line = mark.line + 1 if mark else 0
        findings.error(
            Place(file, line),
            "",
            f"is not valid YAML: {error.problem or error.context}",
            "indent with spaces, write `name: value`, quote text that holds `: ` or `#`",
        )
        return None
    except YAMLError as error:
        findings.error(Place(file), "", f"is not valid YAML: {str(error).splitlines()[0]}")
        return None
    except RecursionError:
        findings.error(Place(file), "", f"is nested more than {MAX_DEPTH} deep")
        return None
    if node is None:
        findings.error(Place(file), "", "is empty")
    return node


class _Reader:
    """Turns YAML nodes into plain values and notes the line of each path."""

    def __init__(self, file: str, findings: Findings) -> None:
        self.file = file
        self.findings = findings
        self.lines: dict[Path_, int] = {}
        self.broken = False
        self._count = 0

    def value(self, node: Any, path: Path_, depth: int) -> Any:
        self._count += 1
        self.lines.setdefault(path, node.start_mark.line + 1)
        if self._count > MAX_VALUES or depth > MAX_DEPTH:
            if not self.broken:
                what = f"nested more than {MAX_DEPTH} deep" if depth > MAX_DEPTH else f"more than {MAX_VALUES} values"
                self._error(node, path, what)
            self.broken = True
            return None
        if node.id == "mapping":
            return self._mapping(node, path, depth)
        if node.id == "sequence":
            return [self.value(item, (*path, i), depth + 1) for i, item in enumerate(node.value)]
        return self._scalar(node, path)

    def _mapping(self, node: Any, path: Path_, depth: int) -> dict[str, Any]:
        result: dict[str, Any] = {}
        for key_node, value_node in node.value:
            if key_node.id != "scalar":
                self._error(key_node, path, "a name must be plain text")
                self.broken = True
                continue
            key = str(key_node.value)
            here = (*path, key)
            if key in result:
                first = self.lines[here]
                self._error(key_node, here, f"`{key}` is written twice, first in line {first}")
                self.broken = True
                continue
            self.lines[here] = key_node.start_mark.line + 1
            result[key] = self.value(value_node, here, depth + 1)
            if self.broken and self._count > MAX_VALUES:
                break
        return result

    def _scalar(self, node: Any, path: Path_) -> Any:
        kind, text = str(node.tag).rsplit(":", 1)[-1], str(node.value)
        if kind == "null":
            return None
        if kind == "bool":
            # A file may call itself YAML 1.1, where `no` is false: here only `true` and `false` are.
            return {"true": True, "false": False}.get(text.lower(), text)
        if kind in ("int", "float") and "_" not in text:
            try:
                return int(text, 10) if kind == "int" else float(text)
            except ValueError:
                return text
        if kind not in ("str", "timestamp", "int", "float"):
            self._error(node, path, f"the tag `{node.tag}` is not allowed")
            self.broken = True
        return text

    def _error(self, node: Any, path: Path_, message: str) -> None:
        self.findings.error(Place(self.file, node.start_mark.line + 1), path_text(path), message)
