"""What every answer around a plan is: tables, sentences in plain words, and how to read them."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from olefinlp.answers.tables import Table

if TYPE_CHECKING:
    import pandas as pd


@dataclass(frozen=True, slots=True)
class Chart:
    """A picture of the main table: `steps` between two x columns, or a `line` through one."""

    kind: str
    title: str
    x: str
    x_end: str
    y: str
    x_unit: str
    y_unit: str
    today: float


@dataclass(frozen=True)
class Answer:
    """An answer: `tables` (the first is the main one), `sentences`, and a `note` on its use.

    `charts` are further pictures of the main table, after `chart`.
    """

    name: str
    title: str
    tables: tuple[Table, ...]
    sentences: tuple[str, ...]
    note: str = ""
    chart: Chart | None = None
    charts: tuple[Chart, ...] = field(default=(), kw_only=True)

    @property
    def table(self) -> Table:
        """The main table."""
        return self.tables[0]

    def to_frame(self) -> pd.DataFrame:
        """The main table as a DataFrame."""
        return self.table.to_frame()

    def __str__(self) -> str:
        return "\n".join([self.title, *(f"  {sentence}" for sentence in self.sentences)])

    def _repr_html_(self) -> str:
        """An answer in a notebook: its sentences and its main table."""
        from olefinlp.answers.notebook import answer_html

        return answer_html(self)
