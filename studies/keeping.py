"""The ledger in the output folder: what a stopped run has finished, so that the same command goes on from there."""

from collections.abc import Iterator
from contextlib import closing, contextmanager
from pathlib import Path

from mc.ledger import Ledger, LedgerError, LedgerInUse
from studies.errors import InputError, one_line
from studies.job import Job

LEDGER = "blocks.sqlite"


@contextmanager
def open_ledger(folder: Path, job: Job, replace: bool) -> Iterator[Ledger]:
    """The folder's ledger, new or of the same job; another job's is emptied when it is to be replaced.

    Raises InputError when it is another job's, damaged, in use, or cannot be written, now or later.
    """
    path, where, made = folder / LEDGER, one_line(folder), not folder.exists()
    try:
        ledger = _opened(path, job, replace)
        try:
            yield ledger
        except BaseException:
            if ledger.is_empty():  # nothing was finished: leave the place as it was
                ledger.close()
                path.unlink(missing_ok=True)
                if made:
                    folder.rmdir()
            raise
        finally:
            ledger.close()
    except LedgerInUse as error:
        raise InputError(f"{where}: {error}") from None
    except LedgerError as error:
        raise InputError(f"{where}: {LEDGER} {error}; choose another folder or add --replace") from None


def _opened(path: Path, job: Job, replace: bool) -> Ledger:
    where = one_line(path.parent)
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        if replace and _is_damaged(path):
            path.unlink(missing_ok=True)
    except OSError as error:
        raise InputError(f"{where}: cannot be written ({error.strerror})") from None
    ledger = Ledger(path)
    try:
        about, fingerprint, samples = ledger.about(), job.fingerprint(), job.settings.samples or 0
        same, kept = about.get("fingerprint") == fingerprint, int(about.get("samples", 0))
        if about and not same and not replace:
            raise InputError(
                f"{where}: holds the unfinished work of another job; choose another folder or add --replace"
            )
        if about and (not same or (replace and samples < kept)):
            ledger.clear()
            kept = 0
        ledger.describe({"fingerprint": fingerprint, "samples": str(max(samples, kept))})
    except BaseException:
        ledger.close()
        raise
    return ledger


def _is_damaged(path: Path) -> bool:
    if not path.exists():
        return False
    try:
        with closing(Ledger(path)) as ledger:
            ledger.check()
    except LedgerInUse:
        return False
    except LedgerError:
        return True
    return False


def kept_fingerprint(folder: Path) -> str | None:
    """Whose work a folder's ledger keeps; None where it has none, or one that cannot be read."""
    if not (folder / LEDGER).is_file():
        return None
    try:
        with closing(Ledger(folder / LEDGER)) as ledger:
            return ledger.about().get("fingerprint")
    except LedgerError:
        return None
