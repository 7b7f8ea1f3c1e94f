"""Pictures drawn by a Dask cluster that somebody runs: any number of machines."""

from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from typing import Any

from pinsim.batch.lanes import Borrowed, Lane
from pinsim.batch.spool import Source
from pinsim.errors import DesignError

_TIMEOUT_S = 10
_SPARE = 2  # pictures a worker has waiting, so that it is not idle while one travels


@contextmanager
def dask_lanes(address: str, sources: Sequence[Source]) -> Iterator[tuple[list[Lane], list[Any]]]:
    """Give lanes to a Dask scheduler, and the scenes as its workers have them.

    sources : with their scenes; each is sent once, to every worker, so that none is lost with one.
    Raises DesignError when dask is not installed or nobody answers.
    """
    try:
        import distributed
    except ImportError:
        raise DesignError(
            "--dask needs the package distributed; install it with: pip install 'pinsim[cluster]'"
        ) from None
    try:
        make_client: Any = distributed.Client
        client: Any = make_client(address, timeout=_TIMEOUT_S, set_as_default=False)
    except (OSError, ValueError, TypeError) as problem:
        reason = " ".join(str(problem).split())[:120] or type(problem).__name__
        raise DesignError(
            f"no Dask scheduler answers at {address!r} ({reason}); start one with dask scheduler, "
            "and give its address, for example tcp://192.168.1.20:8786."
        ) from None
    try:
        threads = sum(client.nthreads().values())
        if threads == 0:
            raise DesignError(
                f"the Dask scheduler at {address} has no workers; start some with "
                f"dask worker {address} --nthreads 1."
            )
        there = [client.scatter(source, broadcast=True, hash=False) for source in sources]
        executor = client.get_executor(pure=False, retries=2)
        yield [Borrowed(executor) for _ in range(_SPARE * threads)], there
        executor.shutdown(wait=False)
    finally:
        client.close()
