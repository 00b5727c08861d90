"""What a job says while it works; silent unless the caller listens."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterable, Sequence
from typing import Any, Protocol, TypeVar

from joblib import Parallel, delayed

#: More processes than this for each core only take memory.
_MOST_A_CORE = 4

Item = TypeVar("Item")
Result = TypeVar("Result")


class Talk(Protocol):
    """Where a job's progress goes."""

    def say(self, line: str, /) -> None:
        """Say one line, at the beginning or end of a stage."""

    def track(self, items: Iterable[Item], words: str, total: int, /) -> Iterable[Item]:
        """Pass items through while their number is shown."""
        ...


class Silent:
    """Says nothing."""

    def say(self, _line: str, /) -> None:
        """Say nothing."""

    def track(self, items: Iterable[Item], _words: str, _total: int, /) -> Iterable[Item]:
        """Pass items through."""
        return items


SILENT = Silent()


def each(
    function: Callable[..., Result], calls: Sequence[tuple[Any, ...]], *, jobs: int, talk: Talk, words: str
) -> list[Result]:
    """Results of a function for every tuple of arguments, in their order, in `jobs` processes.

    Every worker has one thread for linear algebra: spinning threads slow a small machine down many times.
    """
    jobs = min(jobs, len(calls), _MOST_A_CORE * (os.cpu_count() or 1))
    if jobs <= 1:
        return list(talk.track((function(*call) for call in calls), words, len(calls)))
    pool = Parallel(n_jobs=jobs, return_as="generator", inner_max_num_threads=1, backend="loky")
    return list(talk.track(pool(delayed(function)(*call) for call in calls), words, len(calls)))
