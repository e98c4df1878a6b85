"""Cells of the tables that are printed: numbers with their intervals, as many digits as told."""

from rich.table import Table


def plus_minus(row, name: str, unit: str, digits: int, scale=1.0) -> str:
    """A number with the larger half of its interval. row : of a tidy table; name : without its unit"""
    value, low, high = (row[f"{name}{part}{unit}"] * scale for part in ("", "_low", "_high"))
    return f"{value:.{digits}f} ±{max(high - value, value - low):.{digits}f}"


def bounds(row, name: str, unit: str, digits: int, scale=1.0) -> str:
    """A number with the ends of its interval. Arguments as in `plus_minus`"""
    value, low, high = (row[f"{name}{part}{unit}"] * scale for part in ("", "_low", "_high"))
    return f"{value:.{digits}f} [{low:.{digits}f}, {high:.{digits}f}]"


def text_table(title: str, columns: list[str], rows: list[list[str]]) -> Table:
    """A table without lines, its columns to the right."""
    table = Table(title=title, title_justify="left", title_style="bold", box=None, pad_edge=False, padding=(0, 2, 0, 0))
    for column in columns:
        table.add_column(column, justify="right", no_wrap=True)
    for row in rows:
        table.add_row(*row)
    return table
