"""What a check found, where, and what to do about it.

Every reader and check returns findings instead of raising at the first one, so that a person
mends a file once. `InputError` carries all of them.
"""

from __future__ import annotations

import difflib
import os
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field
from typing import Literal

Level = Literal["error", "warning"]


@dataclass(frozen=True, slots=True)
class Place:
    """Where a value was written: a file and a line (1 is the first), and a column of a table.

    >>> str(Place("scenarios/march.yaml", 8))
    'scenarios/march.yaml:8'
    """

    file: str
    line: int = 0
    column: str = ""

    def __str__(self) -> str:
        text = f"{self.file}:{self.line}" if self.line else self.file
        return f"{text} [{self.column}]" if self.column else text


NOWHERE = Place("written in Python")


@dataclass(frozen=True, slots=True)
class Finding:
    """One thing a person should mend (error) or look at (warning).

    >>> print(Finding("error", Place("m.yaml", 3), "feeds.ethane", "unknown name", "did you mean x?"))
    m.yaml:3  feeds.ethane
      unknown name
    hint: did you mean x?
    """

    level: Level
    place: Place
    path: str
    message: str
    hint: str = ""

    def __str__(self) -> str:
        head = f"{self.place}  {self.path}" if self.path else str(self.place)
        label = "warning: " if self.level == "warning" else ""
        tail = f"\nhint: {self.hint}" if self.hint else ""
        return f"{head}\n  {label}{self.message}{tail}"


@dataclass
class Findings:
    """A list that findings are added to, in the order in which they are met."""

    items: list[Finding] = field(default_factory=list)

    def error(self, place: Place, path: str, message: str, hint: str = "") -> None:
        """Add something that stops the plan."""
        self._add(Finding("error", place, path, message, hint))

    def warn(self, place: Place, path: str, message: str, hint: str = "") -> None:
        """Add something that a person should look at."""
        self._add(Finding("warning", place, path, message, hint))

    def _add(self, finding: Finding) -> None:
        if finding not in self.items:
            self.items.append(finding)

    @property
    def errors(self) -> tuple[Finding, ...]:
        """The findings that stop the plan."""
        return tuple(f for f in self.items if f.level == "error")

    @property
    def warnings(self) -> tuple[Finding, ...]:
        """The findings to look at."""
        return tuple(f for f in self.items if f.level == "warning")

    def __iter__(self) -> Iterator[Finding]:
        return iter(self.items)

    def stop_on_errors(self) -> None:
        """Raise `InputError` with everything found, if any of it is an error."""
        if self.errors:
            raise InputError(self.items)


class InputError(Exception):
    """The files cannot be planned as they are; `findings` says all that is wrong.

    >>> try:
    ...     raise InputError([Finding("error", Place("m.yaml", 3), "months", "is missing")])
    ... except InputError as error:
    ...     print(error)
    m.yaml:3  months
      is missing
    """

    def __init__(self, findings: Iterable[Finding]) -> None:
        self.findings = tuple(findings)
        super().__init__("\n".join(str(f) for f in self.findings))


def near_name(name: str, known: Iterable[str]) -> str:
    """A hint with the nearest known name, or the list of known names if it is short.

    >>> near_name("maxx", ["min", "max"])
    'did you mean `max`?'
    """
    names = list(known)
    near = difflib.get_close_matches(name, names, n=1, cutoff=0.6)
    if near:
        return f"did you mean `{near[0]}`?"
    if 0 < len(names) <= 12:
        return "known: " + ", ".join(names)
    return ""


def path_text(path: Iterable[str | int]) -> str:
    """A path in a file as people write it; the first of a list is 1.

    >>> path_text(("outages", 0, "hours"))
    'outages.1.hours'
    """
    return ".".join(str(part + 1) if isinstance(part, int) else part for part in path)


def shown(path: str | os.PathLike[str]) -> str:
    """The path of a file as a person in this folder would type it.

    A file outside the present folder keeps its name and two folders, so that no machine's own
    folders travel into reports.
    """
    full = os.path.abspath(path)
    relative = os.path.relpath(full)
    if not relative.startswith(".."):
        return relative.replace(os.sep, "/")
    return "/".join(full.split(os.sep)[-3:])
