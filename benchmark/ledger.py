"""The ledger: one SQLite file that keeps every finished task, so that an interrupted run loses nothing."""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Mapping
from pathlib import Path
from types import TracebackType
from typing import Any

import pandas as pd

from steelyard.benchmark.errors import StudyError
from steelyard.benchmark.tasks import Outcome, TaskResult

__all__ = ["Ledger"]

FORMAT = 1
SCHEMA = """
CREATE TABLE IF NOT EXISTS about (name TEXT PRIMARY KEY, value TEXT NOT NULL);
CREATE TABLE IF NOT EXISTS task (
    key TEXT PRIMARY KEY, outcome TEXT NOT NULL, reason TEXT NOT NULL, payload TEXT NOT NULL, seconds REAL NOT NULL
);
"""


class Ledger:
    """An open ledger; use it in a `with` block.

    Raises
    ------
    StudyError : the file cannot be opened or written, is locked by another run, or is no ledger of this format
    """

    def __init__(self, path: Path) -> None:
        self.path = path
        try:
            self._connection = sqlite3.connect(path, timeout=2.0)
            # Taken at once and held: a second run in the same directory is told so instead of mixing in.
            self._connection.execute("PRAGMA locking_mode = EXCLUSIVE")
            self._connection.executescript(SCHEMA)
            self._check_format()
        except sqlite3.Error as error:
            raise self._cannot(error) from error

    def __enter__(self) -> Ledger:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._connection.close()

    def _check_format(self) -> None:
        found = self.about("format")
        if found is None:
            self.note("format", str(FORMAT))
        elif found != str(FORMAT):
            raise StudyError(
                f"{self.path} has ledger format {found} and this version writes {FORMAT}; "
                "choose another directory or start over with --fresh"
            )

    def _cannot(self, error: sqlite3.Error) -> StudyError:
        text = str(error)
        if "locked" in text:
            return StudyError(
                f"{self.path} is in use by another run; wait for it or choose another directory"
            )
        if "not a database" in text or "malformed" in text:
            return StudyError(
                f"{self.path} is damaged or no ledger ({text}); move it away, or start over with --fresh"
            )
        return StudyError(
            f"{self.path} cannot be read or written ({text}); check the directory's rights and room"
        )

    def about(self, name: str) -> str | None:
        """A note of the run, or None."""
        row = self._connection.execute("SELECT value FROM about WHERE name = ?", (name,)).fetchone()
        return None if row is None else str(row[0])

    def note(self, name: str, value: str) -> None:
        """Keep a note of the run, replacing an earlier one."""
        self._write("INSERT OR REPLACE INTO about VALUES (?, ?)", (name, value))

    def result(self, key: str) -> TaskResult | None:
        """The kept result of a task, or None."""
        query = "SELECT outcome, reason, payload, seconds FROM task WHERE key = ?"
        row = self._connection.execute(query, (key,)).fetchone()
        if row is None:
            return None
        return TaskResult(Outcome(row[0], row[1]), json.loads(row[2]), float(row[3]), lasting=True)

    def keep(self, key: str, result: TaskResult) -> None:
        """Commit the result of a task; one that is not lasting is left out, to be tried again."""
        if result.lasting:
            payload = json.dumps(result.payload)
            values = (key, result.outcome.outcome, result.outcome.reason, payload, result.seconds)
            self._write("INSERT OR REPLACE INTO task VALUES (?, ?, ?, ?, ?)", values)

    def keep_tables(self, tables: Mapping[str, Any]) -> None:
        """Replace the tidy tables, under their own names, all or none."""
        try:
            with self._connection:
                for name, frame in tables.items():
                    frame.to_sql(name, self._connection, if_exists="replace", index=False)
        except sqlite3.Error as error:
            raise self._cannot(error) from error

    def table(self, name: str) -> Any:
        """One tidy table as a DataFrame.

        Raises
        ------
        StudyError : the run that this ledger belongs to did not finish
        """
        try:
            return pd.read_sql_query(f'SELECT * FROM "{name}"', self._connection)
        except (sqlite3.Error, pd.errors.DatabaseError) as error:
            raise StudyError(
                f"{self.path} holds no table '{name}': the run is not finished; finish it with steelyard run"
            ) from error

    def _write(self, statement: str, values: tuple[object, ...]) -> None:
        try:
            with self._connection:
                self._connection.execute(statement, values)
        except sqlite3.Error as error:
            raise self._cannot(error) from error
