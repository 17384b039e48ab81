"""The one table type of every report; a renderer sees only its grid of finished texts."""

from dataclasses import dataclass
from enum import Enum

from steelyard.reports.cells import Cell, CellKind, Estimate, Missing, format_cell, is_missing
from steelyard.reports.errors import ReportError

__all__ = ["Alignment", "Cell", "CellKind", "Column", "Estimate", "Grid", "Missing", "Table"]


class Alignment(Enum):
    """Where the texts of a column stand."""

    LEFT = "left"
    RIGHT = "right"


@dataclass(frozen=True)
class Column:
    """A column: its key, its heading (with the unit) and how its values are written.

    `digits` are decimals or significant digits, as the kind says; text, whole numbers and yes/no have none.
    """

    name: str
    title: str
    kind: CellKind
    digits: int = 0

    @property
    def alignment(self) -> Alignment:
        """Numbers to the right, words to the left."""
        words = self.kind in (CellKind.TEXT, CellKind.YES_NO)
        return Alignment.LEFT if words else Alignment.RIGHT


@dataclass(frozen=True)
class Grid:
    """What a renderer needs: texts, alignments, and the place of every row when sorted by a column.

    A text may hold a line break, which a renderer of single lines writes as a space. `orders[i][j]` is the
    place of row i by column j, equal values sharing a place, missing values last (-1).
    """

    titles: tuple[str, ...]
    alignments: tuple[Alignment, ...]
    texts: tuple[tuple[str, ...], ...]
    orders: tuple[tuple[int, ...], ...]


@dataclass(frozen=True)
class Table:
    """A finished table. The first column names the rows.

    Raises
    ------
    ReportError : a row has more or fewer cells than there are columns, or two columns share a name
    """

    name: str
    caption: str
    columns: tuple[Column, ...]
    rows: tuple[tuple[Cell, ...], ...]
    notes: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        names = [column.name for column in self.columns]
        if len(set(names)) != len(names):
            raise ReportError(f"table {self.name!r}", f"columns {names}", "different names", "rename one")
        for number, row in enumerate(self.rows):
            if len(row) != len(names):
                where = f"table {self.name!r}, row {number}"
                raise ReportError(
                    where, f"{len(row)} cells", f"{len(names)}", "give one cell for each column"
                )

    def grid(self) -> Grid:
        """Format every cell, once."""
        texts = tuple(
            tuple(
                format_cell(cell, column.kind, column.digits)
                for cell, column in zip(row, self.columns, strict=True)
            )
            for row in self.rows
        )
        places = [_places([row[index] for row in self.rows]) for index in range(len(self.columns))]
        return Grid(
            titles=tuple(column.title for column in self.columns),
            alignments=tuple(column.alignment for column in self.columns),
            texts=texts,
            orders=tuple(tuple(column[index] for column in places) for index in range(len(self.rows))),
        )


def _places(cells: list[Cell]) -> list[int]:
    """Dense place of each value among the column's values; -1 where there is none."""
    keys = [None if is_missing(cell) else _sort_key(cell) for cell in cells]
    place = {key: index for index, key in enumerate(sorted({key for key in keys if key is not None}))}
    return [-1 if key is None else place[key] for key in keys]


def _sort_key(cell: Cell) -> tuple[float, str]:
    if isinstance(cell, str):
        return (0.0, cell.casefold())
    if cell is None or isinstance(cell, Missing):
        return (0.0, "")
    return (cell.value if isinstance(cell, Estimate) else float(cell), "")
