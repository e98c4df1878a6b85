"""Blocks sent to an existing cluster of dask.distributed, through joblib; an optional extra.

The answer has the same bits as on one machine: a block's draws depend on its number alone, and tallies are added in the
order of the blocks.
"""

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from joblib import parallel_config

from mc.runner import CONFIGURED
from studies import __version__
from studies.errors import InputError, one_line
from studies.settings import Place, Workers

PATIENCE = "10s"  # for the scheduler to answer


def _their_version() -> str:
    from studies import __version__ as theirs

    return theirs


@contextmanager
def on_cluster(address: str) -> Iterator[Place]:
    """The workers of a cluster. address : tcp://host:port of its scheduler, or the path of its scheduler file

    Raises InputError where there is none, where it has no workers, or where they have another version of this package.
    """
    where = f"--cluster {one_line(address)}"
    try:
        from distributed import Client
        from distributed.scheduler import KilledWorker
    except ImportError:
        raise InputError(f"{where}: needs the extra: pip install 'widthwise[cluster]'") from None
    place = {"scheduler_file": address} if Path(address).is_file() else {"address": address}
    try:
        client = Client(**place, timeout=PATIENCE)
    except (OSError, ValueError, TypeError, KeyError) as error:
        raise InputError(f"{where}: no scheduler answers there ({one_line(error)})") from None
    with client:
        jobs = sum(client.ncores().values())
        if jobs == 0:
            raise InputError(f"{where}: the cluster has no workers")
        try:
            versions = client.run(_their_version)
        except ImportError:
            raise InputError(f"{where}: its workers do not have widthwise") from None
        except OSError as error:
            raise InputError(f"{where}: a worker does not answer ({one_line(error)})") from None
        for worker, version in versions.items():
            if version != __version__:
                raise InputError(f"{where}: worker {one_line(worker)} has widthwise {version}, this is {__version__}")
        try:
            with parallel_config(backend="dask", n_jobs=jobs):
                yield Place(jobs=jobs, backend=CONFIGURED, ledger=None)
        except KilledWorker as error:
            raise InputError(f"{where}: workers died again and again at the same blocks ({one_line(error)})") from None


@contextmanager
def crew(workers: Workers, address: str | None) -> Iterator[Workers | Place]:
    """This machine's workers, or a cluster's where an address is given; joblib's own configuration says so too."""
    if address is not None:
        with on_cluster(address) as place:
            yield place
        return
    with parallel_config(n_jobs=workers.jobs, backend=workers.backend):  # for what is solved before the first block
        yield workers
