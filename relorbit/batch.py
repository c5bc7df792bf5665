"""Many pairs at once, with any `concurrent.futures.Executor`."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping
from concurrent.futures import Executor, ProcessPoolExecutor, as_completed
from contextlib import nullcontext
from dataclasses import dataclass
from os import PathLike, fspath
from typing import Any

from relorbit.errors import RelorbitError
from relorbit.measures.store import read_pair
from relorbit.solve.solution import Solution
from relorbit.solve.solver import solve


@dataclass(frozen=True)
class Outcome:
    """What became of one pair: its solution, or the error in words.

    Attributes
    ----------
    path : str
    solution : Solution or None
    error : RelorbitError or None
        `InputError` or `Undetermined`; any other exception is a fault and is raised.
    """

    path: str
    solution: Solution | None
    error: RelorbitError | None


def solve_file(path: str | PathLike[str], options: Mapping[str, Any] | None = None) -> Outcome:
    """Read one pair file and solve it with the keyword options of `solve`."""
    try:
        return Outcome(fspath(path), solve(read_pair(path), **(options or {})), None)
    except RelorbitError as error:
        return Outcome(fspath(path), None, error)


def solve_many(
    paths: Iterable[str | PathLike[str]],
    *,
    executor: Executor | None = None,
    on_done: Callable[[Outcome], None] | None = None,
    **options: Any,
) -> Iterator[Outcome]:
    """Solve many pair files, in the order given.

    Parameters
    ----------
    paths : iterable of path
    executor : Executor, optional
        Any that follows `concurrent.futures`, such as that of a dask cluster
        (``distributed.Client().get_executor()``, the extra ``cluster``); a pool of processes by
        default. An executor that is passed in is left open.
    on_done : callable, optional
        Called with each outcome as it comes in, in whatever order, in the calling thread.
    **options
        Keyword options of `relorbit.solve`.

    Yields
    ------
    Outcome
    """
    with nullcontext(executor) if executor is not None else ProcessPoolExecutor() as pool:
        futures = [pool.submit(solve_file, fspath(path), options) for path in paths]
        if on_done is not None:
            for future in as_completed(futures):
                on_done(future.result())
        for future in futures:
            yield future.result()
