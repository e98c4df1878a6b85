"""The table of a measured file, CSV or Parquet, with the columns that are known, under our names and in our units."""

import warnings
from pathlib import Path

import pandas as pd

from studies.errors import InputError, nearest, one_line
from studies.units import split_unit

NEEDED = ("width_um", "length_um")
THRESHOLDS = ("vth_v", "vth_mv")
LEVELS = ("lot", "wafer", "die")
NUMBERS = {"body_bias_v": 0.0, "drain_v": None, "temperature_c": None, "count": 1.0}  # optional; value when not given
WORDS = ("device", *LEVELS, "site", "pair")
KNOWN = (*NEEDED, *THRESHOLDS, *NUMBERS, *WORDS)


def measured_table(path: Path, mapping, where: str) -> pd.DataFrame:
    """The known columns of a file as text. mapping : our column for theirs; raises InputError"""
    return _named(_table(path), mapping, where)


def _table(path: Path) -> pd.DataFrame:
    where = one_line(path)
    try:
        if Path(path).suffix.lower() in (".parquet", ".pq"):
            try:
                table = pd.read_parquet(path)
            except ImportError:
                raise InputError(f"{where}: a Parquet file needs pyarrow: pip install 'widthwise[parquet]'") from None
        else:
            with open(path, encoding="utf-8-sig") as file:
                heading = file.readline()
            if ";" in heading and "," not in heading:
                raise InputError(f"{where}: separated by semicolons; commas are needed, and a decimal point")
            with warnings.catch_warnings():  # pandas would drop what stands beyond the last column
                warnings.simplefilter("error", pd.errors.ParserWarning)
                table = pd.read_csv(path, encoding="utf-8-sig", skipinitialspace=True, dtype=str, index_col=False)
    except InputError:
        raise
    except FileNotFoundError:
        raise InputError(f"{where}: no such file") from None
    except UnicodeDecodeError:
        raise InputError(f"{where}: not UTF-8 text") from None
    except (pd.errors.ParserWarning, pd.errors.ParserError) as error:
        raise InputError(
            f"{where}: more cells than columns in a row (a decimal comma?): {one_line(str(error).splitlines()[0])}"
        ) from None
    except pd.errors.EmptyDataError:
        raise InputError(f"{where}: empty file") from None
    except Exception as error:  # pandas and pyarrow raise many kinds
        raise InputError(f"{where}: cannot be read ({one_line(getattr(error, 'strerror', None) or error)})") from None
    table.columns = [str(name).strip() for name in table.columns]
    if table.columns.duplicated().any():
        raise InputError(f"{where}: column '{one_line(table.columns[table.columns.duplicated()][0])}' is there twice")
    return table


def _named(table, mapping, where):
    for ours, theirs in mapping.items():
        if ours not in KNOWN:
            raise InputError(
                f"--column {one_line(ours)}={one_line(theirs)}: no such column of ours; {nearest(ours, KNOWN)}"
            )
        if theirs not in table:
            raise InputError(f"{where}: no column '{one_line(theirs)}'; {nearest(theirs, table.columns)}")
        if ours in table and ours != theirs:
            raise InputError(f"{where}: has a column '{ours}' already; --column {ours}={one_line(theirs)} makes it two")
    table = table.rename(columns={theirs: ours for ours, theirs in mapping.items()})
    present = [name for name in THRESHOLDS if name in table]
    if len(present) == 2:
        raise InputError(f"{where}: has both vth_v and vth_mv; one of them is needed")
    for name in (*NEEDED, *(() if present else ("vth_v",))):
        if name not in table:
            quantity = split_unit(name)[0]
            other = [column for column in table.columns if split_unit(column)[0] == quantity and split_unit(column)[1]]
            if other:
                raise InputError(
                    f"{where}: column '{one_line(other[0])}' has the wrong unit; this one is given as '{name}'"
                )
            wanted = "'vth_v' or 'vth_mv'" if name == "vth_v" else f"'{name}'"
            raise InputError(
                f"{where}: no column {wanted}; found: {one_line(', '.join(table.columns))}; --column {name}=THEIRS names another"
            )
    for column in table.columns:
        quantity, unit = split_unit(column)
        ours = {split_unit(name)[0]: name for name in NUMBERS if name != "count"} | {"temperature": "temperature_c"}
        if column not in KNOWN and (unit and quantity in ours or quantity.startswith("temperature_")):
            name = ours.get(quantity, "temperature_c")
            raise InputError(f"{where}: column '{one_line(column)}' has the wrong unit; this one is given as '{name}'")
    return table[[column for column in table.columns if column in KNOWN]].copy()
