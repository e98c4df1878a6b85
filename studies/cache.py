"""Results that are slow to compute and quick to keep: arrays in a folder of the machine, named by what they depend on.

Nothing here can fail a study: what cannot be read or written is computed again. Files are numpy's .npz without pickles,
written whole or not at all, and hold a digest of their numbers.
"""

import os
import sys
import tempfile
import zipfile
from hashlib import sha256
from pathlib import Path

import numpy as np

VARIABLE = "WIDTHWISE_CACHE"
LARGEST_FILE = 8_000_000  # bytes; ours hold some hundreds of numbers


def cache_folder() -> Path | None:
    """The folder; the variable WIDTHWISE_CACHE beats the platform's own place. None where there is no such place."""
    if named := os.environ.get(VARIABLE):
        return Path(named)
    try:
        home = Path.home()
    except RuntimeError:  # nobody's home
        return None
    if sys.platform == "win32":
        return Path(os.environ.get("LOCALAPPDATA") or home / "AppData" / "Local") / "widthwise"
    if sys.platform == "darwin":
        return home / "Library" / "Caches" / "widthwise"
    return Path(os.environ.get("XDG_CACHE_HOME") or home / ".cache") / "widthwise"


def kept(key: str, shape: tuple[int, ...]) -> tuple[np.ndarray | None, bool]:
    """The finite numbers kept under a key, or None; and whether a file was there that is not what was once written."""
    folder = cache_folder()
    path = None if folder is None else folder / f"{key}.npz"
    try:
        if path is None or path.stat().st_size > LARGEST_FILE:
            return None, path is not None
        with np.load(path, allow_pickle=False) as file:
            numbers, digest = np.asarray(file["numbers"], float), str(file["digest"])
    except (FileNotFoundError, NotADirectoryError, PermissionError):
        return None, False
    except (OSError, ValueError, KeyError, EOFError, zipfile.BadZipFile):
        return None, True
    if numbers.shape != shape or digest != _digest(key, numbers) or not np.all(np.isfinite(numbers)):
        return None, True
    return numbers, False


def keep(key: str, numbers: np.ndarray) -> str:
    """Keep numbers under a key. Returns why it could not be done, or nothing."""
    folder = cache_folder()
    if folder is None:
        return "there is no home folder"
    partial = None
    try:
        folder.mkdir(parents=True, exist_ok=True)
        with tempfile.NamedTemporaryFile(dir=folder, suffix=".partial", delete=False) as file:
            partial = Path(file.name)
            np.savez(file, numbers=numbers, digest=np.array(_digest(key, numbers)))
        partial.replace(folder / f"{key}.npz")
    except (OSError, ValueError) as error:
        if partial is not None:
            partial.unlink(missing_ok=True)
        return str(getattr(error, "strerror", None) or error)
    return ""


def _digest(key: str, numbers: np.ndarray) -> str:
    return sha256(key.encode() + numbers.astype("<f8").tobytes()).hexdigest()
