"""The files of a fit, written beside the fitted process file: all of them, or none."""

import os
from pathlib import Path

import pandas as pd

from studies.errors import InputError, one_line
from studies.fit import Fit
from studies.fit_tables import ensemble_table, form_table, parameter_table, prediction_table, residual_table
from studies.fit_toml import toml_text

BESIDE = ("fit.csv", "fit_edges.csv", "fit_prediction.csv", "residuals.csv", "fit.png", "fit.svg")


def names(out: Path) -> list[str]:
    """Names of all files, the fitted process last."""
    return [*BESIDE, f"{out.stem}_ensemble.csv", out.name]


def check_out(out: Path, inputs: list[Path], replace: bool) -> None:
    """Refuse a place that cannot be written or holds such files already. Raises InputError; writes nothing."""
    where = one_line(out)
    if out.suffix != ".toml":
        raise InputError(f"--out {where}: a name that ends in .toml is needed")
    try:
        if out.is_dir():
            raise InputError(f"--out {where}: is a folder, a file is needed")
        folder = out.absolute().parent
        parent = next(place for place in (folder, *folder.parents) if place.exists())
        if not parent.is_dir() or not os.access(parent, os.W_OK):
            raise InputError(f"--out {where}: cannot be written")
        taken = [name for name in names(out) if (folder / name).exists()]
        held = {path.absolute() for path in inputs}
        own = [name for name in names(out) if (folder / name) in held]
    except (OSError, ValueError) as error:
        if isinstance(error, InputError):
            raise
        raise InputError(
            f"--out {where}: cannot be used ({one_line(getattr(error, 'strerror', None) or error)})"
        ) from None
    if own:
        raise InputError(f"--out {where}: would overwrite the input {own[0]}; choose another folder")
    if taken and not replace:
        raise InputError(f"--out {where}: {taken[0]} is there already; choose another folder or add --replace")


def contents(fitted: Fit, out: Path) -> dict[str, bytes]:
    """Every file's content by name."""
    from studies.fit_figure import draw_fit  # the drawing library is slow to import

    predicted = prediction_table(fitted)
    tables = {
        "fit.csv": parameter_table(fitted),
        "fit_edges.csv": form_table(fitted),
        "fit_prediction.csv": predicted,
        "residuals.csv": residual_table(fitted),
        f"{out.stem}_ensemble.csv": ensemble_table(fitted),
    }
    made = {name: _csv(table, 10 if "ensemble" in name else 7) for name, table in tables.items()}
    return made | draw_fit(fitted, predicted) | {out.name: toml_text(fitted, out).encode()}


def _csv(table: pd.DataFrame, digits: int) -> bytes:
    return table.to_csv(index=False, lineterminator="\n", float_format=f"%.{digits}g").encode()


def write(fitted: Fit, out: Path) -> list[str]:
    """Write all files, or none. Returns their names; raises InputError when the disk does not take them."""
    made, folder = contents(fitted, out), out.absolute().parent
    partials = {name: folder / f".{name}.partial" for name in made}
    fresh, done = not folder.exists(), []
    kept = {name: (folder / name).read_bytes() for name in made if (folder / name).is_file()}
    try:
        folder.mkdir(parents=True, exist_ok=True)
        for name, content in made.items():
            partials[name].write_bytes(content)
        for name in made:
            partials[name].replace(folder / name)
            done.append(name)
    except OSError as error:
        for name in made:
            partials[name].unlink(missing_ok=True)
        for name in done:  # back to what was there
            if name in kept:
                (folder / name).write_bytes(kept[name])
            else:
                (folder / name).unlink(missing_ok=True)
        if fresh and folder.exists() and not any(folder.iterdir()):
            folder.rmdir()
        raise InputError(f"{one_line(out)}: cannot be written ({error.strerror})") from None
    return list(made)
