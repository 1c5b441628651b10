"""Averages side by side: in threads of this process, or on the workers of a dask cluster.

The workers open the table by its path, so they must see the same file system; what travels
is a population one way and its averages the other. The cluster's processes talk to each other
in pickles, which is dask's way: only a scheduler that is trusted is to be given. Nothing of
ours is stored so.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING, Any

from threadpoolctl import threadpool_limits

import scatterloom
from scatterloom.bulk.build import AVERAGE_BYTES, Spread, Values, average_cell
from scatterloom.bulk.population import Population
from scatterloom.errors import BadInput, EnvironmentProblem

if TYPE_CHECKING:
    import xarray

_ADDRESS = re.compile(r"(?:tcp|tls|ucx|ws|wss)://(?:[\w.-]+|\[[0-9a-fA-F:]+\]):\d{1,5}")

ANSWER_S = 30.0
"""Time allowed to a scheduler to answer, and to have its first worker [s]."""


def threads_for(cores: int, memory_bytes: float) -> int:
    """Return how many averages may be at work at once, on so many cores in half of a memory."""
    return max(1, min(cores, int(0.5 * memory_bytes / AVERAGE_BYTES)))


def in_threads(number: int) -> Spread:
    """Spread averages over so many threads of this process."""

    def spread(table: xarray.Dataset, cells: Sequence[tuple[Population, int]]) -> Iterable[Values]:
        import dask

        # The table stays out of dask's sight, which would load an argument that it knows.
        tasks = [dask.delayed(_Average(table))(*cell) for cell in cells]
        # One thread of linear algebra each: sums are then the same wherever they are made.
        with threadpool_limits(1):
            return dask.compute(*tasks, scheduler="threads", num_workers=number)

    return spread


def on_cluster(address: str) -> Spread:
    """Spread averages over the workers of a dask cluster.

    Parameters
    ----------
    address : str
        Of its scheduler, as "tcp://host:8786".

    Raises
    ------
    BadInput
        If that is no address.
    EnvironmentProblem
        When it spreads, if nobody answers there, if the workers run another version, or if one
        is killed.
    """

    if not _ADDRESS.fullmatch(address):
        raise BadInput(
            f"{address!r} is not the address of a dask scheduler\n  hint: like tcp://host:8786"
        )

    def spread(table: xarray.Dataset, cells: Sequence[tuple[Population, int]]) -> Iterable[Values]:
        from distributed import Client, KilledWorker

        try:
            client = Client(address, timeout=ANSWER_S, set_as_default=False)
        except (OSError, TimeoutError) as error:
            raise EnvironmentProblem(
                f"no dask scheduler answers at {address} ({_first_line(error)})"
            ) from None
        with client:
            _check_workers(client, address)
            task = _Average(table)
            futures = [client.submit(task, *cell, pure=False) for cell in cells]
            try:
                return client.gather(futures)
            except KilledWorker:
                raise EnvironmentProblem(
                    f"the dask workers of {address} are killed at work; was memory short?\n"
                    f"  hint: an average takes {AVERAGE_BYTES >> 20} MiB beside the worker's "
                    "own 200; give each worker fewer threads or more memory"
                ) from None

    return spread


class _Average:
    """One average, with the table bound to it."""

    def __init__(self, table: xarray.Dataset) -> None:
        self._table = table

    def __call__(self, population: Population, wavelength: int) -> Values:
        with threadpool_limits(1):
            return average_cell(self._table, population, wavelength)


def _check_workers(client: Any, address: str) -> None:
    try:
        client.wait_for_workers(1, timeout=ANSWER_S)
    except TimeoutError:
        raise EnvironmentProblem(f"the dask scheduler at {address} has no workers") from None
    try:
        versions = client.run(_version)
    except ImportError:
        versions = {"": "none"}
    other = sorted(set(versions.values()) - {_version()})
    if other:
        raise EnvironmentProblem(
            f"the dask workers of {address} run scatterloom {', '.join(other)}, "
            f"this is {_version()}"
        )


def _version() -> str:
    return scatterloom.__version__


def _first_line(error: Exception) -> str:
    return str(error).split("\n", 1)[0] or type(error).__name__
