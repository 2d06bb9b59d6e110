"""Correlation of the numbers that a sweep draws: read from a table or pairs, checked, and laid on normal scores."""

from __future__ import annotations

import math
import os
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations
from typing import Any

import numpy as np

from olefinlp.inputs.findings import Findings, Place, near_name
from olefinlp.inputs.prices import item_name
from olefinlp.inputs.sweep_cases import Values
from olefinlp.inputs.sweep_numbers import NUMBER_TEXT, Number, Where, path_and_month, plain_number
from olefinlp.inputs.tables import read_table
from olefinlp.inputs.yaml_files import Path_

OTHER_PAIRS = "other_pairs"
"""In a mapping: the correlation of every pair that is not written."""
FIRST_COLUMN = "number"
"""The column of a csv matrix that names its rows."""
_ROUNDING = 1e-10
_AT: Path_ = ("draws", "correlation")


@dataclass(frozen=True)
class Correlation:
    """Correlations of normal scores, a row and a column a drawn number, and where they come from."""

    matrix: Values
    source: str


@dataclass(frozen=True, slots=True)
class _Pair:
    """One written correlation, of a number with a number."""

    row: str
    column: str
    value: object
    place: Place


def read_correlation(written: object, numbers: Sequence[Number], where: Where, findings: Findings) -> Correlation | None:
    """A correlation matrix of all numbers given, in their order; None with findings.

    `written` is a `DataFrame` with paths for rows and columns, the path of a csv file with a column `number`
    and one for each path, or a mapping `{path: {path: 0.6}}` (or `{(path, path): 0.6}`), which has every pair at least
    one way round, or `other_pairs: 0`. The matrix must be symmetric with ones on its diagonal, and positive semidefinite: else
    nothing can move together like that. It is never mended.
    """
    read = _pairs(written, where, findings)
    if read is None:
        return None
    pairs, others, source, place = read
    before = len(findings.errors)
    if len(numbers) < 2:
        findings.error(place, "correlation", "needs two numbers with a spread of their own")
    matrix = _matrix(pairs, numbers, findings)
    _fill(matrix, others, numbers, place, findings)
    if len(findings.errors) > before:
        return None
    _check_possible(matrix, place, findings)
    return Correlation(matrix, source) if len(findings.errors) == before else None


def correlated(scores: Values, matrix: Values) -> Values:
    """Independent normal scores, a row a case, made to correlate; the first column stays as it is.

    Sums are written out, so that the result does not depend on a machine's library of linear algebra.

    >>> correlated(np.array([[1.0, 0.0], [0.0, 1.0]]), np.array([[1.0, 0.6], [0.6, 1.0]])).tolist()
    [[1.0, 0.6], [0.0, 0.8]]
    """
    root = _root(matrix)
    result = np.zeros_like(scores)
    for column in range(len(matrix)):
        for part in range(column + 1):
            result[:, column] += root[column, part] * scores[:, part]
    return result


def _root(matrix: Values) -> Values:
    """The lower triangle whose product with its transpose is the matrix, which may be singular."""
    size = len(matrix)
    root = np.zeros((size, size))
    for column in range(size):
        left = matrix[column, column] - sum(root[column, part] ** 2 for part in range(column))
        if left <= _ROUNDING:
            continue  # moves only with numbers before it
        root[column, column] = math.sqrt(left)
        for row in range(column + 1, size):
            shared = sum(root[row, part] * root[column, part] for part in range(column))
            root[row, column] = (matrix[row, column] - shared) / root[column, column]
    return root


# ---------------------------------------------------------------------------------- what is written


def _pairs(written: object, where: Where, findings: Findings) -> tuple[list[_Pair], float | None, str, Place] | None:
    """Written pairs, the correlation of others (None: all must be written), the source, and the place of the whole."""
    place = where(_AT)
    if isinstance(written, str | os.PathLike):
        table = read_table(written, findings, required=(FIRST_COLUMN,), others=True)
        if table is None:
            return None
        names = [name for name in table.columns if name != FIRST_COLUMN]
        pairs = [
            _Pair(r.cells[FIRST_COLUMN], name, r.cells[name], r.place(name)) for r in table for name in names if r.cells[name]
        ]
        return pairs, None, table.file, Place(table.file)
    if hasattr(written, "columns") and hasattr(written, "index"):
        frame: Any = written
        cells = frame.astype(object).where(frame.notna(), None).to_numpy().tolist()
        pairs = [
            _Pair(str(row), str(column), value, place)
            for row, line in zip(frame.index, cells, strict=True)
            for column, value in zip(frame.columns, line, strict=True)
            if value is not None
        ]
        return pairs, None, "", place
    if isinstance(written, Mapping):
        others = None
        if OTHER_PAIRS in written:
            others = _coefficient(_Pair(OTHER_PAIRS, "", written[OTHER_PAIRS], where((*_AT, OTHER_PAIRS))), findings)
            if others is None:
                return None
        return list(_of_mapping(written, where, findings)), others, "", place
    findings.error(place, "correlation", "is no matrix, mapping or path of a csv file")
    return None


def _of_mapping(written: Mapping[Any, object], where: Where, findings: Findings) -> Iterator[_Pair]:
    for row, line in written.items():
        if row == OTHER_PAIRS:
            continue
        if isinstance(row, tuple) and len(row) == 2:
            yield _Pair(str(row[0]), str(row[1]), line, where(_AT))
        elif isinstance(line, Mapping):
            yield from (_Pair(str(row), str(name), value, where((*_AT, row, name))) for name, value in line.items())
        else:
            hint = f"for example `{row}: {{<path>: 0.6}}`"
            findings.error(where((*_AT, row)), str(row), "needs `path: correlation` lines", hint)


# ---------------------------------------------------------------------------------- checks


def _matrix(pairs: Sequence[_Pair], numbers: Sequence[Number], findings: Findings) -> Values:
    """The matrix with what is written, not a number elsewhere; both sides of the diagonal from either."""
    matrix = np.full((len(numbers), len(numbers)), np.nan)
    given: dict[tuple[int, int], _Pair] = {}
    for pair in pairs:
        row, column = (_index(name, numbers, pair, findings) for name in (pair.row, pair.column))
        value = _coefficient(pair, findings)
        if row is None or column is None:
            continue
        if value is None:
            matrix[row, column] = matrix[column, row] = 0.0  # its finding is there; the pair is not missing
            continue
        if row == column and value != 1:
            findings.error(pair.place, pair.row, f"correlates {value:g} with itself", "a number correlates 1 with itself")
        other = given.get((column, row))
        if other is not None and other is not pair and matrix[row, column] != value:
            text = f"correlates {value:g} with {pair.column}, but the other way round {matrix[row, column]:g}"
            findings.error(pair.place, pair.row, text, "write the same number twice, or one of the two")
        given[row, column] = pair
        matrix[row, column] = matrix[column, row] = value
    return matrix


def _index(name: str, numbers: Sequence[Number], pair: _Pair, findings: Findings) -> int | None:
    """Which number a name means; None with a finding."""
    parts = path_and_month(name)
    meant = (item_name(parts[0].split(".")), parts[1]) if parts else ("", "")
    for index, number in enumerate(numbers):
        if name == number.written or meant == (number.varied.path, number.varied.month):
            return index
    known = [number.written for number in numbers]
    findings.error(pair.place, name, "is not a number that is drawn from a spread of its own", near_name(name, known))
    return None


def _coefficient(pair: _Pair, findings: Findings) -> float | None:
    """A correlation from −1 to 1; None with a finding."""
    text = pair.value.strip() if isinstance(pair.value, str) else ""
    value = plain_number(float(text) if NUMBER_TEXT.fullmatch(text) else pair.value)
    name = f"{pair.row}, {pair.column}" if pair.column else pair.row
    if value is None:
        findings.error(pair.place, name, f"`{'' if pair.value is None else pair.value}` is not a number")
    elif not -1 <= value <= 1:
        findings.error(pair.place, name, f"the correlation {value:g} is not between -1 and 1")
        return None
    return value


def _fill(matrix: Values, others: float | None, numbers: Sequence[Number], place: Place, findings: Findings) -> None:
    """Ones on the diagonal, and pairs that are not written; a finding where nothing says what they are."""
    np.fill_diagonal(matrix, 1.0)
    for row, column in combinations(range(len(numbers)), 2):
        if not np.isnan(matrix[row, column]):
            continue
        if others is None:
            text = f"has no correlation with {numbers[column].written}"
            findings.error(place, numbers[row].written, text, f"write every pair, or `{OTHER_PAIRS}: 0` in a mapping of pairs")
        matrix[row, column] = matrix[column, row] = others or 0.0


def _check_possible(matrix: Values, place: Place, findings: Findings) -> None:
    """Nothing can move together in a way that makes some sum of it vary less than not at all."""
    smallest = float(np.linalg.eigvalsh(matrix)[0])
    if smallest < -_ROUNDING:
        share = math.floor(1000 / (1 - smallest)) / 1000  # off the diagonal, times this: smallest eigenvalue 0 or more
        text = f"is not positive semidefinite (smallest eigenvalue {smallest:.3g}): no numbers can move together like this"
        findings.error(place, "correlation", text, f"correlations {share:g} times as large, all of them, would be possible")
