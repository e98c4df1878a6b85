"""Columns of measured values from CSV files."""

import csv
from pathlib import Path

from studies.errors import InputError, nearest, one_line


def read_column(path: Path, column: str) -> tuple[float, ...]:
    """Finite numbers of one column, at least two. Raises InputError that names file, column and row."""
    where = one_line(path)
    try:
        with open(path, newline="", encoding="utf-8-sig") as file:
            reader = csv.DictReader(file)
            if column not in (reader.fieldnames or []):
                raise InputError(f"{where}: no column '{one_line(column)}'; {nearest(column, reader.fieldnames or [])}")
            rows = []
            for row in reader:
                if None in row:
                    raise InputError(f"{where}: line {reader.line_num}: more cells than columns (a decimal comma?)")
                rows.append((reader.line_num, row[column]))
    except InputError:
        raise
    except (OSError, ValueError, csv.Error) as error:
        raise InputError(f"{where}: cannot be read ({getattr(error, 'strerror', None) or one_line(error)})") from None
    values = []
    for line, text in rows:
        try:
            value = float(text)
        except (TypeError, ValueError):
            value = float("nan")
        if not abs(value) < float("inf"):
            raise InputError(
                f"{where}: line {line}, {one_line(column)} = {one_line(repr(text))}: a finite number is needed"
            )
        values.append(value)
    if len(values) < 2:
        raise InputError(f"{where}: column '{one_line(column)}' needs two values or more")
    return tuple(values)
