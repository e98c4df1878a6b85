"""The demo scenario: a battery-powered tide gauge whose maker is offered two process options. All invented."""

from importlib.resources import files
from pathlib import Path

from studies.errors import InputError, one_line


def write_demo(folder: Path) -> list[Path]:
    """Copy the packaged process options and job into a folder; returns the files written.

    Raises InputError when a file of that name is there already, or the folder cannot be written.
    """
    sources = sorted(
        (item for item in files("studies.examples").iterdir() if item.name.endswith((".toml", ".csv"))),
        key=lambda item: item.name,
    )
    targets = [folder / source.name for source in sources]
    try:
        for target in targets:
            if target.exists():
                raise InputError(f"{one_line(target)}: is there already; choose another folder")
        folder.mkdir(parents=True, exist_ok=True)
        for source, target in zip(sources, targets):
            target.write_bytes(source.read_bytes())
    except InputError:
        raise
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or error
        raise InputError(f"{one_line(folder)}: cannot be written ({one_line(reason)})") from None
    return targets
