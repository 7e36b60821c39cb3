"""A study's sites on a Dask cluster that is already there; the only place that knows of Dask."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from pathlib import Path
from typing import Any

from yieldsim.errors import PlaceError
from yieldsim.study.plan import SitePlan, StudyPlan

_AHEAD = 3  # tasks sent for each thread of the cluster: it never idles, and the scheduler holds no more than that
_CONNECT_S = 20
_RETRIES = 3


def each(
    address: str,
    work: Callable[..., Any],
    plan: StudyPlan,
    sites: Sequence[SitePlan],
    load_weather: Callable[..., Any],
    folder: Path,
) -> Iterator[Any]:
    """Yield what a piece of work returns for each site, as sites finish.

    Parameters
    ----------
    address : ``tcp://HOST:PORT`` of the scheduler
    work : called as work(plan, site, load_weather, folder) on a worker
    plan : StudyPlan without its sites, sent once
    sites : SitePlans
    load_weather : gives a site's weather
    folder : Path of the results, which workers must see under the same name

    Raises
    ------
    PlaceError
        When Dask is not installed, the scheduler does not answer, has no workers, or a site is lost with its worker
        again and again. A worker that dies costs the time of the sites it held: others take them over.
    """
    try:
        from distributed import Client, as_completed
    except ImportError:
        raise PlaceError('--cluster needs Dask: pip install "yieldsim[cluster]"') from None
    try:
        client = Client(address, timeout=_CONNECT_S, set_as_default=False)
    except (OSError, TimeoutError, ValueError) as error:
        raise PlaceError(f"no Dask scheduler answers at {address} ({error}); what is finished is kept") from None
    with client:
        threads = sum(client.nthreads().values())
        if threads == 0:
            raise PlaceError(f"the Dask scheduler at {address} has no workers; start some and run again")
        shared = client.scatter(plan, broadcast=True, hash=False)
        left = iter(sites)

        def send() -> Any:
            site = next(left, None)
            if site is None:
                return None
            return client.submit(work, shared, site, load_weather, folder, pure=False, retries=_RETRIES)

        first = [future for _ in range(_AHEAD * threads) if (future := send()) is not None]
        running = as_completed(first, loop=client.loop)
        for future in running:
            yield _result(future, address)
            if (following := send()) is not None:
                running.add(following)


def _result(future: Any, address: str) -> Any:
    from distributed import KilledWorker

    try:
        return future.result()
    except KilledWorker as error:
        raise PlaceError(
            f"the cluster at {address} lost the same site with {_RETRIES} workers or more ({error}); "
            "what is finished is kept: run again to go on"
        ) from None
