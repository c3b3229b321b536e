"""One job on many items, in as many processes as there are processors; an interrupt ends all of them at once."""

from __future__ import annotations

import os
import signal
import threading
from collections.abc import Callable, Collection, Iterator, Sequence
from concurrent.futures import ProcessPoolExecutor
from contextlib import contextmanager, suppress
from functools import partial
from multiprocessing import active_children
from multiprocessing.process import BaseProcess
from typing import TypeVar

Item = TypeVar("Item")
Answer = TypeVar("Answer")

#: Between two interrupts of a worker that has not ended.
_AGAIN_S = 0.05

#: Most processes: what every system lets a pool have.
_MOST_WORKERS = 61


def processors() -> int:
    """How many this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


def side_by_side(
    job: Callable[[Item], Answer],
    items: Sequence[Item],
    workers: int | None = None,
    follow: Callable[[Iterator[Answer]], Iterator[Answer]] = iter,
) -> list[Answer]:
    """Do a job on every item.

    Parameters
    ----------
    job : callable
        A function of a module, or a ``partial`` of one, that raises nothing; it travels to other processes, as do items
        and answers.
    items : sequence
        What it is done on.
    workers : int, optional
        Processes; by default as many as there are processors, and no more than items. One works in this process.
    follow : callable
        Passes the answers on one by one, to show progress.

    Returns
    -------
    list
        Answers in the order of the items, whatever the order they were given in.
    """
    count = min(workers or processors(), len(items), _MOST_WORKERS)
    if count < 2:
        return list(follow(map(job, items)))
    others = set(active_children())
    with _Interrupts() as interrupts, ProcessPoolExecutor(count, initializer=_answer_interrupts) as pool:
        try:
            answers = pool.map(partial(_in_worker, job), items)
            with interrupts.let_through():
                return list(follow(answers))
        except BaseException:
            # Whoever stops the run does not want to wait for what is being computed. A terminal interrupts the
            # workers, too; from elsewhere the signal comes to this process alone.
            with _interrupted(set(active_children()) - others):
                pool.shutdown(cancel_futures=True)
            raise


class _Interrupts:
    """Keeps an interrupt of this process waiting, but for while it is let through.

    While processes start it would be lost, or told by one of them; while they end it would leave one behind. A handler
    and no mask: a library's own threads take the signals that this thread masks.
    """

    def __init__(self) -> None:
        self._process = os.getpid()
        self._waiting = False
        self._through = False
        # Handlers are for the first thread alone; and who ignores interrupts, or handles them, goes on to do so.
        is_first = threading.current_thread() is threading.main_thread()
        self._ours = is_first and signal.getsignal(signal.SIGINT) is signal.default_int_handler

    def __enter__(self) -> _Interrupts:
        if self._ours:
            signal.signal(signal.SIGINT, self._note)
        return self

    def __exit__(self, kind: object, error: object, traceback: object) -> None:
        if self._ours:
            signal.signal(signal.SIGINT, signal.default_int_handler)
        if self._waiting and kind is None:
            raise KeyboardInterrupt

    @contextmanager
    def let_through(self) -> Iterator[None]:
        """Let one interrupt through, also one that waits."""
        self._through = True
        try:
            if self._waiting:
                raise KeyboardInterrupt
            yield
        finally:
            self._through = False

    def _note(self, *_: object) -> None:
        if os.getpid() != self._process:
            # A worker that has not come to its own handler yet: the signal is for its first job.
            _stop()
            return
        self._waiting = True
        if self._through:
            self._through = False
            raise KeyboardInterrupt


@contextmanager
def _interrupted(workers: Collection[BaseProcess]) -> Iterator[None]:
    """Interrupt workers again and again until what is done meanwhile is over.

    Once is not enough: a process forgets the signals that reach it before it has run at all.
    """
    over = threading.Event()

    def tell() -> None:
        while True:
            for process in workers:
                if process.exitcode is None:
                    _interrupt(process.pid)
            if over.wait(_AGAIN_S):
                return

    teller = threading.Thread(target=tell, daemon=True)
    teller.start()
    try:
        yield
    finally:
        over.set()
        teller.join()


def _interrupt(worker: int | None) -> None:
    # Elsewhere the call would kill the worker, perhaps in the middle of an answer, for whose end the pool then waits.
    if worker is not None and os.name == "posix":
        with suppress(ProcessLookupError):
            os.kill(worker, signal.SIGINT)


#: Of a worker: whether it is at work, and whether it was told to stop.
_at_work = False
_stopped = False


def _answer_interrupts() -> None:
    """In a worker: an interrupt ends what it computes, but not the worker, which answers and is dismissed."""
    if signal.getsignal(signal.SIGINT) is not signal.SIG_IGN:
        signal.signal(signal.SIGINT, _stop)


def _stop(*_: object) -> None:
    global _stopped
    _stopped = True
    if _at_work:
        raise KeyboardInterrupt


def _in_worker(job: Callable[[Item], Answer], item: Item) -> Answer:
    global _at_work
    _at_work = True
    try:
        if _stopped:
            raise KeyboardInterrupt
        return job(item)
    finally:
        _at_work = False
