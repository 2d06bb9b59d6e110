"""A sweep written while it runs: part files moved into place, so that one that was stopped goes on where it stopped.

A folder holds `sweep.json` (what is swept, with hashes of all inputs), one part a block of cases, and the list
`parts.sha256` of what each part must be, which is written before the part (`sha256sum -c` checks it too). A part is
there whole or not at all; one that is not as listed is done again. A sweep of other inputs is refused, not mixed in.
"""

from __future__ import annotations

import contextlib
import csv
import hashlib
import io
import json
import math
import os
import re
from collections.abc import Callable, Generator, Iterator, Mapping, Sequence
from pathlib import Path
from typing import IO, TYPE_CHECKING, Any

import numpy as np

from olefinlp.answers.sweep import (
    ENDINGS,
    THREADS,
    Cluster,
    Job,
    Solved,
    Sweep,
    columns_of,
    counted,
    gathered,
    job_of,
    run_sweep,
)
from olefinlp.answers.sweep_readings import DEFAULT
from olefinlp.lp.sweep import BLOCK, NO_CASE, SolvedBlock
from olefinlp.outputs.files import OutputError, write_bytes, write_text

if TYPE_CHECKING:
    import pandas as pd

    from olefinlp.answers.plan import Plan
    from olefinlp.inputs.scenario import Scenario

DESCRIPTION, SUMS = "sweep.json", "parts.sha256"
CSV, PARQUET = "csv", "parquet"
PART = re.compile(r"part_(\d{9})\.(csv|parquet)")
UNFINISHED = re.compile(r"\.(part_\d{9}\.(csv|parquet)|sweep\.json)\.\w+\.part")
TEXTS = ("label", "status", "reason")


class OtherSweep(OutputError):
    """The folder holds another sweep."""


def part_name(first: int, form: str) -> str:
    """The name of the part that begins with a case (from 0; names count from 1)."""
    return f"part_{first + 1:09d}.{form}"


def description(job: Job, form: str) -> dict[str, Any]:
    """What is swept: title, inputs with their hashes, numbers varied, columns; `hash` is of all of it.

    `program` is the hash of the program of today's plan, `values` that of all values and labels.
    """
    from olefinlp import __version__

    cases = job.cases
    values = hashlib.sha256(np.where(np.isnan(cases.values), np.nan, cases.values).tobytes())
    values.update("\n".join(cases.labels).encode("utf-8"))
    head: dict[str, Any] = {
        "version": __version__,
        "title": job.base.scenario.title,
        "price_case": job.base.scenario.price_case,
        "files": _files(job),
        "program": _program(job),
        "varied": [
            {"path": v.path, "month": v.month, "unit": v.unit, "percent": p}
            for v, p in zip(cases.varied, cases.percent, strict=True)
        ],
        "how": cases.how,
        "note": cases.note,
        "cases": len(cases),
        "values": values.hexdigest(),
        "block": BLOCK,
        "form": form,
        "measures": list(job.read_out.names),
    }
    return head | {"hash": hashlib.sha256(json.dumps(head, sort_keys=True).encode("utf-8")).hexdigest()}


def _files(job: Job) -> dict[str, str]:
    """Hashes of the input files by their path from the scenario's folder, whatever folder the sweep is started from."""
    files = [Path(name) for name in job.base.scenario.files]
    home = files[0].parent
    there = [file for file in files if file.exists()]
    return {Path(os.path.relpath(file, home)).as_posix(): hashlib.sha256(file.read_bytes()).hexdigest() for file in there}


def _program(job: Job) -> str:
    """The hash of the program of today's plan, with all its numbers."""
    lp, digest = job.base.lp, hashlib.sha256()
    digest.update(repr((lp.rows, lp.columns, lp.offset)).encode("utf-8"))
    for name in ("starts", "index", "value", "row_low", "row_high", "low", "high", "cost"):
        digest.update(getattr(lp, name).tobytes())
    return digest.hexdigest()


def run_into(
    job: Job,
    folder: Path,
    *,
    form: str = CSV,
    workers: int | None = None,
    engine: str | Cluster = THREADS,
    told: Callable[[int, int], object] | None = None,
) -> Sweep:
    """Run a sweep into a folder, or go on with it; what is there of the same sweep is kept.

    Raises `OtherSweep` when the folder holds another sweep, `OutputError` when it cannot be written to.
    """
    if form not in (CSV, PARQUET):
        raise OutputError(f"`{form}` is no form of part files; known: {CSV}, {PARQUET}")
    _begin(folder, description(job, form))
    _clear(folder)
    sums = _sums(folder)

    def blocks() -> Generator[Solved, None, None]:
        there: set[int] = set()
        for block, reasons in _parts(job, folder, form, sums):
            there.add(block.first)
            yield block, reasons
        with contextlib.closing(run_sweep(job, workers=workers, engine=engine, skip=there)) as solved:
            for block, reasons in solved:
                columns = columns_of(job.cases, job.read_out, block, reasons)
                _write(folder / part_name(block.first, form), columns, form)
                yield block, reasons

    with contextlib.closing(blocks()) as found:
        return gathered(job, counted(found, len(job.cases), told))


def sweep_into(
    folder: str | os.PathLike[str],
    scenario: Scenario | Plan,
    vary: Any,
    *,
    how: str | None = None,
    measures: Sequence[str] = DEFAULT,
    form: str = CSV,
    workers: int | None = None,
    engine: str | Cluster = THREADS,
    told: Callable[[int, int], object] | None = None,
) -> Sweep:
    """As `sweep`, with the results written into a folder while they come; a sweep that was stopped goes on.

    `form` of the part files is csv, or parquet (with the extra of that name). Read them, finished or not, with
    `read_sweep`. Raises what `sweep` raises, `OtherSweep` when the folder holds another sweep, `OutputError` when it
    cannot be written to.
    """
    return run_into(job_of(scenario, vary, how, measures), Path(folder), form=form, workers=workers, engine=engine, told=told)


def _begin(folder: Path, words: dict[str, Any]) -> None:
    """Make the folder, or make sure that it holds this very sweep."""
    path = folder / DESCRIPTION
    try:
        folder.mkdir(parents=True, exist_ok=True)
        old = json.loads(path.read_text(encoding="utf-8")) if path.exists() else None
    except OSError as error:
        raise OutputError(f"{folder} is no folder that can be written to: {error.strerror or error}") from error
    except ValueError as error:
        raise OtherSweep(f"{path} cannot be read: {error}\nhint: name a new folder") from error
    if old is None and any(PART.fullmatch(file.name) for file in folder.iterdir()):
        raise OtherSweep(f"{folder} holds parts of a sweep, but no {DESCRIPTION}\nhint: name a new folder")
    if old is None:
        write_text(path, json.dumps(words, indent=1, ensure_ascii=False) + "\n")
    elif not isinstance(old, dict):
        raise OtherSweep(f"{path} is no description of a sweep\nhint: name a new folder")
    elif old != words:
        apart = "; ".join(_differences(old, words))
        raise OtherSweep(f"{folder} holds another sweep: {apart}\nhint: name a new folder, or put back what was changed")


SAID = {
    "version": "it was begun with olefinlp {old}, this is {new}",
    "title": "its scenario is `{old}`, not `{new}`",
    "price_case": "its price case is `{old}`, not `{new}`",
    "how": "its cases are of the kind `{old}`, not `{new}`",
    "cases": "it has {old:,} cases, not {new:,}",
    "form": "its parts are {old}, not {new}",
    "block": "its parts have {old} cases each, not {new}",
    "varied": "other numbers vary",
    "values": "the values of its cases are others",
    "measures": "other measures are read out",
    "program": "the numbers of its scenario or plant are others",
    "note": "its note is `{old}`, not `{new}`",
}
"""What of a description differs → in words."""


def _differences(old: Mapping[str, Any], new: Mapping[str, Any]) -> list[str]:
    """What another sweep has differently, in words."""
    files, now = (one if isinstance(one, dict) else {} for one in (old.get("files"), new["files"]))
    names = sorted(name for name in {*files, *now} if files.get(name) != now.get(name))
    found = [f"changed since: {', '.join(names)}"] if names else []
    for key, words in SAID.items():
        if old.get(key) == new[key]:
            continue
        if "{" in words and isinstance(old.get(key), type(new[key])):
            found.append(words.format(old=old[key], new=new[key]))
        else:
            found.append(words if "{" not in words else f"its {key} is not known")
    return found or [f"its {DESCRIPTION} was edited"]


def _clear(folder: Path) -> None:
    """Take away what a run that was killed while it wrote has left."""
    for file in folder.iterdir():
        if UNFINISHED.fullmatch(file.name):
            file.unlink(missing_ok=True)


def _sums(folder: Path) -> dict[str, str]:
    """The hash that each part must have; of a part that was written twice, the last. A torn line is none."""
    path = folder / SUMS
    lines = path.read_text(encoding="utf-8", errors="replace").splitlines() if path.exists() else []
    return {name: digest for digest, _, name in (line.partition("  ") for line in lines)}


def _write(path: Path, columns: Mapping[str, Any], form: str) -> None:
    """One part, whole or not at all, and before it what it must be."""
    content = _parquet(columns) if form == PARQUET else _csv(columns)
    sums = path.parent / SUMS
    try:
        with sums.open("ab+") as file:
            torn = file.tell() > 0 and _last_byte(file) != b"\n"
            line = f"{hashlib.sha256(content).hexdigest()}  {path.name}\n".encode()
            file.write(b"\n" + line if torn else line)  # a line of its own even where a kill has left one torn
            file.flush()
            os.fsync(file.fileno())
    except OSError as error:
        raise OutputError(f"{sums} cannot be written to: {error.strerror or error}") from error
    write_bytes(path, content)


def _last_byte(file: IO[bytes]) -> bytes:
    file.seek(-1, os.SEEK_END)
    return file.read(1)


def _csv(columns: Mapping[str, Any]) -> bytes:
    """A table with a heading; numbers with all their digits."""
    text = io.StringIO(newline="")
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(columns)
    writer.writerows(zip(*([_cell(value) for value in _plain(column)] for column in columns.values()), strict=True))
    return text.getvalue().encode("utf-8")


def _plain(column: Any) -> list[Any]:
    return column.tolist() if isinstance(column, np.ndarray) else list(column)


def _cell(value: Any) -> Any:
    """All digits of a number; nothing for what is no number."""
    return ("" if math.isnan(value) else repr(value)) if isinstance(value, float) else value


def _parquet(columns: Mapping[str, Any]) -> bytes:
    try:
        import pyarrow as pa
        import pyarrow.parquet as pq
    except ImportError as error:
        raise OutputError("parquet needs pyarrow\nhint: pip install 'olefinlp[parquet]', or write csv") from error
    sink = io.BytesIO()
    pq.write_table(pa.table({name: pa.array(_plain(column)) for name, column in columns.items()}), sink)
    return sink.getvalue()


def _parts(job: Job, folder: Path, form: str, sums: Mapping[str, str]) -> Iterator[Solved]:
    """Parts that are there, read back; one that is not what was written is done again."""
    for file in sorted(folder.iterdir()):
        found = PART.fullmatch(file.name)
        first = int(found[1]) - 1 if found else -1
        if not found or found[2] != form or first % BLOCK or not 0 <= first < len(job.cases):
            continue
        try:
            content = file.read_bytes()
            if hashlib.sha256(content).hexdigest() == sums.get(file.name):
                yield _read_back(job, first, _rows(content, form))
        except (OSError, ValueError, KeyError):
            continue


def _rows(content: bytes, form: str) -> dict[str, list[Any]]:
    """Columns of a part. Raises `ValueError` when it is damaged."""
    if form == PARQUET:
        table = _parquet_table(content)
        return {name: table.column(name).to_pylist() for name in table.column_names}
    try:
        header, *lines = list(csv.reader(io.StringIO(content.decode("utf-8"), newline="")))
    except csv.Error as error:
        raise ValueError(str(error)) from error
    if not lines or any(len(line) != len(header) for line in lines):
        raise ValueError("lines of different length")
    return dict(zip(header, map(list, zip(*lines, strict=True)), strict=True))


def _parquet_table(content: bytes) -> Any:
    try:
        import pyarrow as pa
        import pyarrow.parquet as pq
    except ImportError as error:
        raise OutputError("parquet needs pyarrow\nhint: pip install 'olefinlp[parquet]'") from error
    return pq.read_table(pa.BufferReader(content))


def _numbers(column: list[Any]) -> np.ndarray:
    return np.array([math.nan if value in ("", None) else float(value) for value in column])


def _read_back(job: Job, first: int, rows: dict[str, list[Any]]) -> Solved:
    """A part as what it was written from."""
    status = np.array([_code(*pair) for pair in zip(rows["status"], rows["reason"], strict=True)], dtype=np.int8)
    reasons = {number: why for number, why in enumerate(rows["reason"], first) if why and why not in ENDINGS.values()}
    readings = np.full((len(status), len(job.read_out.names)), np.nan)
    for at, name in enumerate(job.read_out.names):
        readings[:, at] = _numbers(rows[name])
    return SolvedBlock(first, status, _numbers(rows["margin"]), _numbers(rows["held"]), readings), reasons


def _code(ending: str, why: str) -> int:
    """The code of an ending: clashes and margins without an end are told apart by their reason."""
    codes = [code for code, words in ENDINGS.items() if words.partition(":")[0] == ending]
    return next((code for code in codes if ENDINGS[code] == why), codes[0] if codes else NO_CASE)


def read_sweep(folder: str | Path) -> pd.DataFrame:
    """The rows of all parts of a sweep's folder, finished or not, in the order of the cases.

    Columns are those of `Sweep.to_frame`. Raises `OutputError` when the folder holds no sweep, or a part is damaged.
    """
    import pandas as pd

    home = Path(folder)
    parts = sorted(file for file in home.iterdir() if PART.fullmatch(file.name)) if home.is_dir() else []
    sums = _sums(home) if parts else {}
    frames = [_frame(part, sums.get(part.name, "")) for part in parts if part.name in sums or not sums]
    if not frames:
        raise OutputError(f"{folder} holds no parts of a sweep")
    return pd.concat(frames, ignore_index=True)


def _frame(part: Path, digest: str) -> pd.DataFrame:
    """One part, as listed where it is listed."""
    import pandas as pd

    try:
        content = part.read_bytes()
        if digest and hashlib.sha256(content).hexdigest() != digest:
            raise ValueError(f"it is not what {SUMS} lists")
        rows = _rows(content, part.suffix[1:])
        columns: dict[str, Any] = {name: own if name in TEXTS else _numbers(own) for name, own in rows.items()}
        return pd.DataFrame(columns | {"case": columns["case"].astype(np.int64)})
    except (OSError, ValueError, KeyError) as error:
        raise OutputError(f"{part} is damaged: {error}\nhint: the same sweep into the same folder makes it again") from error
