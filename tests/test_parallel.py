"""One job on many items: the answers of a plain loop, in its order, and an end at an interrupt."""

from __future__ import annotations

import os
import signal
import time
from collections.abc import Iterator
from multiprocessing import active_children

import pytest

from realize.parallel import _Interrupts, processors, side_by_side


def square(number: int) -> int:
    return number * number


def slower_at_first(number: int) -> int:
    time.sleep(0.02 * (number < 2))
    return number


def where(_: int) -> int:
    return os.getpid()


def for_ever(number: int) -> int:
    while number:
        number += 1
    return number


@pytest.mark.parametrize("workers", [1, 2, 200, None])
@pytest.mark.parametrize("count", [0, 1, 2, 9])
def test_the_answers_are_those_of_a_loop(workers: int | None, count: int) -> None:
    assert side_by_side(square, range(count), workers) == [number**2 for number in range(count)]


def test_the_answers_are_in_the_order_of_the_items() -> None:
    assert side_by_side(slower_at_first, range(6), 2) == list(range(6))


def test_one_worker_is_this_process_and_several_are_others() -> None:
    assert side_by_side(where, range(3), 1) == [os.getpid()] * 3
    assert side_by_side(where, range(1), 2) == [os.getpid()]
    assert os.getpid() not in side_by_side(where, range(4), 2)


def test_there_is_a_processor() -> None:
    assert 1 <= processors() <= (os.cpu_count() or 1)


class StopError(Exception):
    pass


@pytest.mark.parametrize("ended", [KeyboardInterrupt, StopError])
def test_what_ends_the_run_ends_the_workers_at_once_also_those_that_would_never_end(
    ended: type[BaseException],
) -> None:
    def give_up(answers: Iterator[int]) -> Iterator[int]:
        yield next(answers)
        raise ended

    before = set(active_children())
    with pytest.raises(ended):
        side_by_side(for_ever, [0, 1, 1, 1, 1, 1, 1], 2, give_up)
    assert set(active_children()) <= before


def interrupt_this_process(answers: Iterator[int]) -> Iterator[int]:
    yield next(answers)
    os.kill(os.getpid(), signal.SIGINT)
    yield from answers


def test_an_interrupt_is_one_wherever_it_comes_and_answered_as_before_afterwards() -> None:
    with pytest.raises(KeyboardInterrupt):
        side_by_side(for_ever, [0, 1, 1, 1], 2, interrupt_this_process)
    assert signal.getsignal(signal.SIGINT) is signal.default_int_handler
    assert side_by_side(square, range(4), 2) == [0, 1, 4, 9]
    assert signal.getsignal(signal.SIGINT) is signal.default_int_handler


def test_an_interrupt_while_processes_start_or_end_waits_until_they_have() -> None:
    interrupts = _Interrupts()
    done = []
    with pytest.raises(KeyboardInterrupt), interrupts:
        os.kill(os.getpid(), signal.SIGINT)
        done.append("started")
        with interrupts.let_through():
            done.append("not reached")
    assert done == ["started"]
    with pytest.raises(KeyboardInterrupt), _Interrupts() as others:
        with others.let_through():
            done.append("worked")
        os.kill(os.getpid(), signal.SIGINT)
        done.append("ended")
    assert done == ["started", "worked", "ended"]


def test_who_ignores_interrupts_goes_on_to_do_so() -> None:
    before = signal.signal(signal.SIGINT, signal.SIG_IGN)
    try:
        assert side_by_side(square, range(4), 2, interrupt_this_process) == [0, 1, 4, 9]
    finally:
        signal.signal(signal.SIGINT, before)


def test_a_worker_that_forgot_its_first_interrupt_is_told_again(monkeypatch: pytest.MonkeyPatch) -> None:
    """As one does that was not run yet when it came."""
    sent: list[int | None] = []

    def forgotten_at_first(worker: int | None) -> None:
        sent.append(worker)
        if sent.count(worker) > 1 and worker is not None:
            os.kill(worker, signal.SIGINT)

    def give_up(answers: Iterator[int]) -> Iterator[int]:
        yield next(answers)
        raise StopError

    monkeypatch.setattr("realize.parallel._interrupt", forgotten_at_first)
    with pytest.raises(StopError):
        side_by_side(for_ever, [0, 1, 1], 2, give_up)
    assert max(map(sent.count, sent)) > 1
