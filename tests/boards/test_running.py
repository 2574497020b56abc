"""Tasks by any executor: results in order, no more in hand than asked, nothing left behind."""

from __future__ import annotations

import threading
from concurrent.futures import Executor, Future, ThreadPoolExecutor

import pytest

from biasband.boards.running import in_order


class Unhurried(Executor):
    """An executor that does nothing until a result is asked for, and remembers what it was given."""

    def __init__(self) -> None:
        self.given: list[Lazy] = []

    def submit(self, work, /, *arguments):
        future = Lazy(work, *arguments)
        self.given.append(future)
        return future


class Lazy(Future):
    """Works when its result is asked for, unless it was cancelled."""

    def __init__(self, work, *arguments) -> None:
        super().__init__()
        self.work, self.arguments = work, arguments

    def result(self, timeout=None):
        result = self.work(*self.arguments)
        self.set_result(result)
        return result


def square(task: int) -> int:
    return task * task


def fails_at_three(task: int) -> int:
    if task == 3:
        raise ArithmeticError("task three")
    return task


@pytest.mark.parametrize("ahead", [1, 2, 5, 100])
@pytest.mark.parametrize("tasks", [0, 1, 7])
def test_results_come_in_the_order_of_the_tasks(tasks, ahead):
    assert list(in_order(square, tasks, executor=Unhurried(), ahead=ahead)) == [k * k for k in range(tasks)]
    assert list(in_order(square, tasks)) == [k * k for k in range(tasks)]


def test_results_come_in_order_though_the_first_task_ends_last():
    later = [threading.Event() for _ in range(3)]

    def backwards(task: int) -> int:
        if task < 2:
            assert later[task + 1].wait(10)  # seconds; it takes none
        later[task].set()
        return task

    with ThreadPoolExecutor(3) as threads:
        assert list(in_order(backwards, 3, executor=threads, ahead=3)) == [0, 1, 2]


@pytest.mark.parametrize("ahead", [1, 2, 5])
def test_no_more_is_given_than_was_taken_and_is_ahead(ahead):
    executor = Unhurried()
    results = in_order(square, 20, executor=executor, ahead=ahead)
    assert executor.given == []  # nothing is wanted yet
    for taken in range(1, 21):
        next(results)
        assert len(executor.given) == min(taken - 1 + ahead, 20)


def test_without_an_executor_a_task_is_done_when_it_is_wanted():
    done = []
    results = in_order(done.append, 5)
    assert done == []
    next(results)
    assert done == [0]


def test_what_is_in_hand_is_taken_back_when_no_more_is_wanted():
    executor = Unhurried()
    results = in_order(square, 20, executor=executor, ahead=4)
    assert [next(results), next(results)] == [0, 1]
    results.close()
    assert [future.cancelled() for future in executor.given] == [False, False, True, True, True]


@pytest.mark.parametrize("executor", [None, "threads", "unhurried"])
def test_exception_of_a_task_comes_out_in_its_turn(executor):
    with ThreadPoolExecutor(2) as threads:
        by = {None: None, "threads": threads, "unhurried": Unhurried()}[executor]
        results = in_order(fails_at_three, 10, executor=by, ahead=3)
        assert [next(results) for _ in range(3)] == [0, 1, 2]
        with pytest.raises(ArithmeticError, match="task three"):
            next(results)
        assert list(results) == []


def test_after_an_exception_nothing_more_is_worked_on():
    executor = Unhurried()
    with pytest.raises(ArithmeticError, match="task three"):
        list(in_order(fails_at_three, 10, executor=executor, ahead=3))
    assert len(executor.given) == 6  # three taken, the one that failed, and two ahead of it
    assert [future.cancelled() for future in executor.given[4:]] == [True, True]


def test_task_that_is_waited_for_is_taken_back_when_the_wait_is_interrupted():
    def interrupted(task: int) -> int:
        raise KeyboardInterrupt

    executor = Unhurried()
    with pytest.raises(KeyboardInterrupt):
        next(in_order(interrupted, 5, executor=executor, ahead=2))
    assert all(future.cancelled() for future in executor.given)
