"""A sweep written while it runs: part files moved into place, so that one that was stopped goes on where it stopped.

A folder holds `sweep.json` (what is swept, with the hash of all inputs) and one part a block of cases. A part is
there whole or not at all. A sweep of other inputs is refused, not mixed in.
"""

from __future__ import annotations

import csv
import hashlib
import io
import json
import math
import os
import re
from collections.abc import Callable, Iterator, Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from olefinlp.answers.sweep import THREADS, Cluster, Job, Sweep, counted, gathered, job_of, run_sweep
from olefinlp.answers.sweep_readings import DEFAULT
from olefinlp.lp.sweep import BLOCK, NO_CASE, SolvedBlock
from olefinlp.outputs.files import OutputError, write_bytes, write_text

if TYPE_CHECKING:
    import pandas as pd

    from olefinlp.answers.plan import Plan
    from olefinlp.inputs.scenario import Scenario

DESCRIPTION = "sweep.json"
CSV, PARQUET = "csv", "parquet"
PART = re.compile(r"part_(\d{9})\.(csv|parquet)")


class OtherSweep(OutputError):
    """The folder holds another sweep."""


def part_name(first: int, form: str) -> str:
    """The name of the part that begins with a case (from 0; names count from 1)."""
    return f"part_{first + 1:09d}.{form}"


def description(job: Job, form: str) -> dict[str, Any]:
    """What is swept: title, inputs with their hashes, numbers varied, columns; `hash` is of all of it and of every value."""
    from olefinlp import __version__

    cases = job.cases
    head: dict[str, Any] = {
        "version": __version__,
        "title": job.base.scenario.title,
        "price_case": job.base.scenario.price_case,
        "files": job.base.file_hashes(),
        "varied": [
            {"path": v.path, "month": v.month, "unit": v.unit, "percent": p}
            for v, p in zip(cases.varied, cases.percent, strict=True)
        ],
        "how": cases.how,
        "note": cases.note,
        "cases": len(cases),
        "block": BLOCK,
        "form": form,
        "measures": list(job.read_out.names),
    }
    digest = hashlib.sha256(json.dumps(head, sort_keys=True).encode("utf-8"))
    digest.update(np.ascontiguousarray(cases.values).tobytes())
    digest.update("\n".join(cases.labels).encode("utf-8"))
    for name in ("cost", "value", "row_low", "row_high"):
        digest.update(getattr(job.base.lp, name).tobytes())
    return head | {"hash": digest.hexdigest()}


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
    words = description(job, form)
    _begin(folder, words)
    there = dict(_parts(job, folder, form))

    def written() -> Iterator[tuple[SolvedBlock, dict[int, str]]]:
        yield from there.values()
        for block, reasons in run_sweep(job, workers=workers, engine=engine, skip=there):
            count = len(block.status)
            one = gathered(job, [(block, reasons)])
            _write(folder / part_name(block.first, form), one.columns(block.first, block.first + count), form)
            yield block, reasons

    return gathered(job, counted(written(), len(job.cases), told))


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
    if old is not None and old.get("hash") != words["hash"]:
        keys = [key for key in words if key != "hash" and old.get(key) != words[key]]
        text = f"differs in {', '.join(keys)}" if keys else "differs in its values"
        raise OtherSweep(f"{folder} holds another sweep, which {text}\nhint: name a new folder, or put back what was changed")
    if old is None:
        write_text(path, json.dumps(words, indent=1, ensure_ascii=False) + "\n")


def _write(path: Path, columns: Mapping[str, Any], form: str) -> None:
    """One part, whole or not at all."""
    if form == PARQUET:
        write_bytes(path, _parquet(columns))
        return
    text = io.StringIO(newline="")
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(columns)
    writer.writerows(zip(*([_cell(value) for value in _plain(column)] for column in columns.values()), strict=True))
    write_text(path, text.getvalue())


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


def _parts(job: Job, folder: Path, form: str) -> Iterator[tuple[int, tuple[SolvedBlock, dict[int, str]]]]:
    """Parts that are there, read back; one that does not read is done again."""
    for file in sorted(folder.iterdir()):
        found = PART.fullmatch(file.name)
        if not found or found[2] != form:
            continue
        first = int(found[1]) - 1
        count = min(BLOCK, len(job.cases) - first)
        rows = _rows(file, form)
        if first % BLOCK == 0 and rows is not None and len(rows["case"]) == count and _numbers(rows["case"])[0] == first + 1:
            yield first, _solved(job, first, rows)


def _rows(file: Path, form: str) -> dict[str, list[Any]] | None:
    """Columns of a part; None when it is damaged."""
    try:
        if form == PARQUET:
            import pyarrow.parquet as pq

            table = pq.read_table(file)
            return {name: table.column(name).to_pylist() for name in table.column_names}
        with file.open(encoding="utf-8", newline="") as text:
            header, *lines = list(csv.reader(text))
        if not lines or any(len(line) != len(header) for line in lines):
            return None
        return {name: [line[at] for line in lines] for at, name in enumerate(header)}
    except (OSError, ValueError, csv.Error):
        return None


def _numbers(column: list[Any]) -> np.ndarray:
    return np.array([math.nan if value in ("", None) else float(value) for value in column])


def _solved(job: Job, first: int, rows: dict[str, list[Any]]) -> tuple[SolvedBlock, dict[int, str]]:
    """A part as what it was written from."""
    from olefinlp.answers.sweep import ENDINGS

    codes = {words: code for code, words in ENDINGS.items()}
    status = np.full(len(rows["case"]), NO_CASE, dtype=np.int8)
    reasons: dict[int, str] = {}
    for at, (ending, why) in enumerate(zip(rows["status"], rows["reason"], strict=True)):
        status[at] = codes.get(ending, codes.get(why, _code(ending, why)))
        if why and why not in codes:
            reasons[first + at] = why
    readings = np.array([_numbers(rows[name]) for name in job.read_out.names]).reshape(len(job.read_out.names), len(status)).T
    block = SolvedBlock(first, status, _numbers(rows["margin"]), _numbers(rows["held"]), np.ascontiguousarray(readings))
    return block, reasons


def _code(ending: str, why: str) -> int:
    """The code of an ending whose reason is in words of its own."""
    return 1 if ending == "no plan" and why.startswith("limits clash") else 2 if ending == "no plan" else NO_CASE


def read_sweep(folder: str | Path) -> pd.DataFrame:
    """The rows of all parts of a sweep's folder, finished or not, in the order of the cases.

    Raises `OutputError` when the folder holds no sweep.
    """
    import pandas as pd

    parts = sorted(file for file in Path(folder).iterdir() if PART.fullmatch(file.name)) if Path(folder).is_dir() else []
    if not parts:
        raise OutputError(f"{folder} holds no parts of a sweep")
    frames = [pd.read_parquet(part) if part.suffix == ".parquet" else pd.read_csv(part) for part in parts]
    return pd.concat(frames, ignore_index=True)
