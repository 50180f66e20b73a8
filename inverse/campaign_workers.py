"""Sharing out blocks of runs among workers: processes of this machine, or anything else with `submit`.

A worker that dies takes nothing with it: its block is tried once more, then run by run with nothing else
under way, so that the run that kills workers is the only one to fail. This module loads nothing heavy: every
worker imports it first.
"""

import contextlib
import multiprocessing
import multiprocessing.connection
import os
import queue
import signal
import threading
from collections import deque
from collections.abc import Callable, Iterator
from concurrent.futures import BrokenExecutor, ProcessPoolExecutor
from dataclasses import dataclass, field, replace
from typing import Any, Protocol

from finback.campaign_block import Answer, Block, Record, compute, failed

ONE_THREAD = ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS", "VECLIB_MAXIMUM_THREADS")
TARGET = 1.5  # s of work in a block: long beside sending it, short beside losing it
FIRST, MOST = 4, 400  # runs in a block before it is known how long one takes, and at the most
SMOOTHING = 0.3  # share that the last block has in what a run is thought to take
AHEAD = 2  # blocks under way for each worker, so that none waits for its next
DIED = "the worker that computed it died, twice: of too little memory, or killed"


class Future(Protocol):
    """What `submit` returns."""

    def add_done_callback(self, function: Callable[[Any], object], /) -> object:
        """Call the function with this future once it is done."""

    def result(self) -> Any:
        """Return what was computed, or raise what went wrong."""


class Pool(Protocol):
    """Anything that computes blocks elsewhere: an executor of concurrent.futures, a client of dask."""

    @property
    def size(self) -> int:
        """How many blocks it computes at a time."""

    def submit(self, function: Callable[[Block], Answer], block: Block, /) -> Future:
        """Have a block computed."""

    def renew(self) -> None:
        """Start again after a worker has died, where that is needed."""

    def close(self) -> None:
        """End all work, finished or not."""


class Processes:
    """Worker processes of this machine, each with one thread for its matrices."""

    def __init__(self, size: int) -> None:
        self.size = size
        self._others = set(multiprocessing.active_children())
        self._start()

    def _start(self) -> None:
        context = multiprocessing.get_context("spawn")  # a fork would copy locks that other threads hold
        self._executor = ProcessPoolExecutor(self.size, context, initializer=_begin)

    def submit(self, function: Callable[[Block], Answer], block: Block, /) -> Future:
        """Have a block computed."""
        with _one_thread():
            return self._executor.submit(function, block)

    def renew(self) -> None:
        """Start new processes where one has died."""
        self._executor.shutdown(wait=False, cancel_futures=True)
        self._start()

    def close(self) -> None:
        """End the processes at once, whatever they are at."""
        self._executor.shutdown(wait=False, cancel_futures=True)
        for process in set(multiprocessing.active_children()) - self._others:
            process.terminate()


@contextlib.contextmanager
def _one_thread() -> Iterator[None]:
    """Have processes that are started meanwhile use one thread for their matrices: more would only wait."""
    before = {name: os.environ.get(name) for name in ONE_THREAD}
    os.environ.update(dict.fromkeys(ONE_THREAD, "1"))
    try:
        yield
    finally:
        for name, value in before.items():
            if value is None:
                os.environ.pop(name, None)
            else:
                os.environ[name] = value


def _begin() -> None:
    """Leave interrupts to the parent, and end when it ends, however that came about."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    parent = multiprocessing.parent_process()
    if parent is not None:
        threading.Thread(target=_end_with, args=(parent.sentinel,), daemon=True).start()


def _end_with(sentinel: int) -> None:
    multiprocessing.connection.wait([sentinel])
    os._exit(1)


class Cluster:
    """The workers of a dask cluster, by its client."""

    def __init__(self, client: Any) -> None:
        self._client = client

    @property
    def size(self) -> int:
        """How many blocks its workers compute at a time."""
        return max(1, int(sum(self._client.nthreads().values())))

    def submit(self, function: Callable[[Block], Answer], block: Block, /) -> Future:
        """Have a block computed; dask itself tries again no block whose worker died."""
        future: Future = self._client.submit(function, block, pure=False, retries=0)
        return future

    def renew(self) -> None:
        """Do nothing: the cluster replaces its workers itself."""

    def close(self) -> None:
        """Leave the cluster; what it has not finished is dropped with the futures."""
        self._client.close()


@dataclass(frozen=True, slots=True)
class _Sent:
    block: Block
    attempt: int = 0


Waiting = tuple[_Sent, int, Any]
"""A block that is done, the number it was sent under, and its future."""


@dataclass
class Dispatcher:
    """Keeps the workers of a pool busy with blocks, and hands back what they find.

    `take`: returns the next block of at most so many runs, None at the end. `size`: runs in a block, None
    for as many as take a second or two.
    """

    pool: Pool
    take: Callable[[int], Block | None]
    size: int | None = None
    _answers: "queue.SimpleQueue[Waiting]" = field(default_factory=queue.SimpleQueue)
    _again: deque[_Sent] = field(default_factory=deque)
    _suspects: deque[_Sent] = field(default_factory=deque)
    _under_way: dict[int, Future] = field(default_factory=dict)  # a cluster drops what nobody holds
    _sent: int = 0
    _seconds: float | None = None
    _ended: bool = False

    def answers(self) -> Iterator[tuple[Block, tuple[Record, ...]]]:
        """Yield each block with its records, in the order in which they are finished."""
        while True:
            self._feed()
            if not self._under_way:
                return
            sent, number, future = self._answers.get()
            del self._under_way[number]
            try:
                answer = future.result()
            except Exception as error:  # noqa: BLE001  # whatever a cluster raises: the block is lost
                yield from self._lost(sent, error)
                continue
            self._learn(sent, answer)
            yield sent.block, answer.records

    def _feed(self) -> None:
        while self._again and len(self._under_way) < AHEAD * self.pool.size:
            self._send(self._again.popleft())
        if self._suspects:  # alone, or others would be blamed
            if not self._under_way:
                self._send(self._suspects.popleft())
            return
        while not self._ended and len(self._under_way) < AHEAD * self.pool.size:
            block = self.take(self._wanted())
            self._ended = block is None
            if block is not None:
                self._send(_Sent(block))

    def _send(self, sent: _Sent) -> None:
        try:
            future = self.pool.submit(compute, sent.block)
        except BrokenExecutor:  # a worker has died since, and its blocks are still to come back
            self.pool.renew()
            future = self.pool.submit(compute, sent.block)
        self._sent += 1
        number = self._sent
        self._under_way[number] = future
        future.add_done_callback(lambda done: self._answers.put((sent, number, done)))

    def _wanted(self) -> int:
        if self.size is not None:
            return self.size
        if self._seconds is None:
            return FIRST
        return max(1, min(MOST, int(TARGET / self._seconds)))

    def _learn(self, sent: _Sent, answer: Answer) -> None:
        a_run = max(answer.seconds / max(len(sent.block.runs), 1), 1e-6)
        before = a_run if self._seconds is None else self._seconds
        self._seconds = before + SMOOTHING * (a_run - before)

    def _lost(self, sent: _Sent, error: Exception) -> Iterator[tuple[Block, tuple[Record, ...]]]:
        """Have a lost block computed again: whole, then run by run; give a run up that was lost alone."""
        if isinstance(error, BrokenExecutor) and not self._under_way:
            self.pool.renew()
        runs = sent.block.runs
        if sent.attempt == 0:
            self._again.append(replace(sent, attempt=1))
        elif sent.attempt == 1:
            self._suspects.extend(_Sent(replace(sent.block, runs=(run,)), attempt=2) for run in runs)
        else:
            yield sent.block, tuple(failed(key, DIED, lasting=False) for key, *_ in runs)
