"""Tables that every output shares: columns with titles and units, rows as plain records."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import pandas as pd

Record = dict[str, Any]


@dataclass(frozen=True, slots=True)
class Column:
    """A column: its key in records, its title, its unit in words, and how numbers are shown.

    `kind` is one of text, quantity, price, money, share, hours, number, count.
    """

    key: str
    title: str
    unit: str = ""
    kind: str = "text"

    @property
    def heading(self) -> str:
        """Title with the unit, as it stands above a column."""
        return f"{self.title}, {self.unit}" if self.unit else self.title


@dataclass(frozen=True)
class Table:
    """A named table. `to_frame()` gives a pandas DataFrame with the keys as columns.

    >>> table = Table("feeds", "Feeds", (Column("feed", "Feed"),), [{"feed": "naphtha"}])
    >>> len(table), list(table.to_frame().columns)
    (1, ['feed'])
    """

    name: str
    title: str
    columns: tuple[Column, ...]
    rows: list[Record] = field(default_factory=list)
    note: str = ""

    def __len__(self) -> int:
        return len(self.rows)

    def to_frame(self) -> pd.DataFrame:
        """The table as a DataFrame, one row a record."""
        import pandas as pd

        return pd.DataFrame(self.rows, columns=[column.key for column in self.columns])

    def where(self, **match: Any) -> list[Record]:
        """Rows whose values equal those given."""
        return [row for row in self.rows if all(row[key] == value for key, value in match.items())]

    def _repr_html_(self) -> str:
        """A table in a notebook: its first rows."""
        from olefinlp.answers.notebook import table_html

        return table_html(self)
