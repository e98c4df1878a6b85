"""Finished work in one SQLite file, so that a run that was stopped at any moment can go on from there.

A ledger has parts, one a question; a part has named runs. A run's tally is kept group by group, each group as the sum of
its blocks so far, with the number of blocks done: one transaction writes both, so the file never holds half a block and
does not grow with the number of samples. Single results are kept by name.
"""

import sqlite3
from dataclasses import dataclass
from hashlib import sha256
from pathlib import Path
from typing import Any

from mc.codec import Damaged, decode, encode

_TABLES = """
create table if not exists about (key text primary key, value text not null) without rowid;
create table if not exists progress (part text, run text, blocks integer not null, target integer not null,
  primary key (part, run)) without rowid;
create table if not exists sums (part text, run text, number integer, value blob not null, digest blob not null,
  primary key (part, run, number)) without rowid;
create table if not exists results (part text, run text, name text, value blob not null, digest blob not null,
  primary key (part, run, name)) without rowid;
"""


class LedgerError(Exception):
    """A ledger that cannot be used; the message says why."""


class LedgerInUse(LedgerError):
    """Another process has it."""


def _digest(data: bytes) -> bytes:
    return sha256(data).digest()[:16]


class Ledger:
    """The file. One process at a time; a second is refused.

    path : of the file, made when missing
    Raises LedgerInUse, and LedgerError for a file that is damaged or cannot be written.
    """

    def __init__(self, path: Path):
        self._path = path
        try:
            self._connection = sqlite3.connect(path, timeout=0.2, isolation_level=None)
            self._connection.execute("pragma locking_mode = exclusive")
            self._connection.execute("pragma journal_mode = wal")
            self._connection.execute("pragma synchronous = normal")
            self._connection.execute("begin immediate")  # takes the lock, which is then kept
            for statement in _TABLES.split(";"):
                self._connection.execute(statement)
            self._connection.execute("commit")
        except sqlite3.Error as error:
            if hasattr(self, "_connection"):
                self._connection.close()  # else it would keep the file locked
            raise self._trouble(error) from None

    def _trouble(self, error: sqlite3.Error) -> LedgerError:
        words = str(error)
        if "locked" in words:
            return LedgerInUse("another run is using it")
        if isinstance(error, sqlite3.OperationalError) and "malformed" not in words:
            return LedgerError(f"cannot be written ({words})")
        return LedgerError(f"is damaged ({words})")

    def about(self) -> dict[str, str]:
        """What the file says of itself."""
        return dict(self._read("select key, value from about"))

    def describe(self, about: dict[str, str]) -> None:
        """Say what the file is of."""
        self._write([("insert or replace into about values (?, ?)", item) for item in about.items()])

    def clear(self) -> None:
        """Forget everything."""
        self._write([(f"delete from {table}", ()) for table in ("about", "progress", "sums", "results")])

    def is_empty(self) -> bool:
        """Whether it keeps no finished work."""
        return not any(self._read(f"select 1 from {table} limit 1") for table in ("sums", "results"))

    def check(self) -> None:
        """Read everything once. Raises LedgerError where anything is not what was written."""
        for table in ("sums", "results"):
            for value, digest in self._read(f"select value, digest from {table}"):
                _decoded(value, digest)

    def part(self, name: str) -> "Part":
        """The part of one question."""
        return Part(ledger=self, name=name)

    def close(self) -> None:
        """Close the file; what was written stays."""
        self._connection.close()

    def _read(self, query: str, values=()) -> list:
        try:
            return self._connection.execute(query, values).fetchall()
        except sqlite3.Error as error:
            raise self._trouble(error) from None

    def _write(self, statements) -> None:
        """All statements in one transaction."""
        try:
            self._connection.execute("begin")
            for statement, values in statements:
                self._connection.execute(statement, values)
            self._connection.execute("commit")
        except sqlite3.Error as error:
            if self._connection.in_transaction:
                self._connection.execute("rollback")
            raise self._trouble(error) from None


def _decoded(value: bytes, digest: bytes) -> Any:
    if _digest(value) != digest:
        raise LedgerError("is damaged (a stored block is not what was written)")
    try:
        return decode(value)
    except Damaged as error:
        raise LedgerError(f"is damaged ({error})") from None


@dataclass(frozen=True, kw_only=True)
class Part:
    """One question's share of a ledger."""

    ledger: Ledger
    name: str

    def sums(self, run: str) -> tuple[int, int, dict[int, Any]]:
        """Blocks done, samples aimed at, and the sums by group; nothing done where the run is new."""
        found = self.ledger._read("select blocks, target from progress where part = ? and run = ?", (self.name, run))
        if not found:
            return 0, 0, {}
        rows = self.ledger._read("select number, value, digest from sums where part = ? and run = ?", (self.name, run))
        return *found[0], {number: _decoded(value, digest) for number, value, digest in rows}

    def keep(self, run: str, blocks: int, target: int, sums: dict[int, Any]) -> None:
        """Write the groups that blocks changed, and how far the run is, in one transaction."""
        statements = [
            ("insert or replace into sums values (?, ?, ?, ?, ?)", (self.name, run, number, value, _digest(value)))
            for number, value in ((number, encode(tally)) for number, tally in sums.items())
        ]
        progress = ("insert or replace into progress values (?, ?, ?, ?)", (self.name, run, blocks, target))
        self.ledger._write([*statements, progress])

    def result(self, run: str, name: str) -> Any | None:
        """A single result by name; None where there is none."""
        found = self.ledger._read(
            "select value, digest from results where part = ? and run = ? and name = ?", (self.name, run, name)
        )
        return _decoded(*found[0]) if found else None

    def keep_result(self, run: str, name: str, value) -> None:
        """Write a single result, in one transaction."""
        data = encode(value)
        row = (self.name, run, name, data, _digest(data))
        self.ledger._write([("insert or replace into results values (?, ?, ?, ?, ?)", row)])
