"""Many tasks on a `concurrent.futures` executor: threads by default, any other if handed over."""

from __future__ import annotations

from collections.abc import Callable, Generator, Iterable, Iterator
from concurrent.futures import FIRST_COMPLETED, Executor, Future, ThreadPoolExecutor, wait
from contextlib import contextmanager
from importlib import import_module
from typing import TypeVar

from optics.outcome.light import cores

_Item = TypeVar("_Item")
_Result = TypeVar("_Result")

# Tasks handed out ahead of those that are done: enough for many workers, little to hold.
_IN_FLIGHT = 64
_PATIENCE = "10s"  # for a scheduler to answer


@contextmanager
def executor_or_threads(executor: Executor | None = None) -> Iterator[Executor]:
    """Yield the executor handed over, which stays open, or as many threads as there are cores.

    Leaving waits for the threads' running tasks; those that have not begun are dropped.
    """
    if executor is not None:
        yield executor
        return
    own = ThreadPoolExecutor(cores())
    try:
        yield own
    finally:
        own.shutdown(wait=True, cancel_futures=True)


@contextmanager
def cluster_executor(address: str) -> Iterator[Executor]:
    """Connect to a Dask scheduler and yield its executor.

    Parameters
    ----------
    address : str
        Such as ``tcp://host:8786``.

    Raises
    ------
    ModuleNotFoundError
        If Dask distributed is not installed; the message says how to install it.
    OSError
        If nothing answers at the address.
    """
    try:
        distributed = import_module("distributed")
    except ModuleNotFoundError:
        raise ModuleNotFoundError(
            "a cluster needs Dask distributed: pip install 'outcouple[cluster]'"
        ) from None
    client = distributed.Client(address, timeout=_PATIENCE, set_as_default=False)
    try:
        with client.get_executor() as executor:
            yield executor
    finally:
        client.close()


def completed(
    executor: Executor,
    function: Callable[[_Item], _Result],
    items: Iterable[_Item],
    in_flight: int = _IN_FLIGHT,
) -> Generator[_Result, None, None]:
    """Run a function over items and yield results as they come, in any order.

    At most `in_flight` items are handed out at a time. If the caller stops early, or is
    interrupted, what has not begun is canceled.

    Raises
    ------
    Exception
        Whatever a task raises; those that are done are yielded first.
    """
    waiting: set[Future[_Result]] = set()
    source = iter(items)
    try:
        exhausted = False
        while True:
            while not exhausted and len(waiting) < in_flight:
                try:
                    waiting.add(executor.submit(function, next(source)))
                except StopIteration:
                    exhausted = True
            if not waiting:
                return
            done, waiting = wait(waiting, return_when=FIRST_COMPLETED)
            failed = [future for future in done if future.exception() is not None]
            for future in done:
                if future not in failed:
                    yield future.result()
            if failed:
                failed[0].result()
    finally:
        for future in waiting:
            future.cancel()
