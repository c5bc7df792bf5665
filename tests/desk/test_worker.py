"""Work off the window's thread: results, errors, progress, cancelling."""

from __future__ import annotations

import threading
import time

import pytest

from relorbit.desk.worker import Outcome, Worker
from relorbit.errors import InputError, Undetermined

PATIENCE_S = 20.0


@pytest.fixture
def worker():
    worker = Worker()
    yield worker
    worker.cancel()
    assert worker.wait(PATIENCE_S)


def run(worker: Worker, work, label: str = "solve") -> Outcome:
    outcomes: list[Outcome] = []
    worker.start(label, work, outcomes.append)
    return finish(worker, outcomes)


def finish(worker: Worker, outcomes: list[Outcome]) -> Outcome:
    end = time.monotonic() + PATIENCE_S
    while not outcomes and time.monotonic() < end:
        worker.poll()
        time.sleep(0.001)
    assert len(outcomes) == 1, "no outcome, or more than one"
    return outcomes[0]


def test_a_result_comes_through_poll_on_the_callers_thread(worker):
    threads = []
    finished = threading.Event()

    def work(report):
        threads.append(threading.current_thread())
        finished.set()
        return 42

    outcomes = []
    worker.start("solve", work, lambda one: outcomes.append((one, threading.current_thread())))
    assert finished.wait(PATIENCE_S) and worker.wait(PATIENCE_S)
    assert worker.busy and worker.label == "solve" and not outcomes  # nothing without poll
    worker.poll()
    assert outcomes == [(Outcome("solve", 42), threading.current_thread())]
    assert threads[0] is not threading.current_thread()
    assert not worker.busy and worker.label is None


def test_what_an_observer_can_mend_is_an_error_and_the_rest_a_fault(worker):
    def refuses(report):
        raise InputError("too few measures")

    def undetermined(report):
        raise Undetermined("the arc is too short")

    def breaks(report):
        return 1 / 0

    assert str(run(worker, refuses).error) == "too few measures"
    assert run(worker, undetermined).error.reason == "the arc is too short"
    outcome = run(worker, breaks)
    assert isinstance(outcome.fault, ZeroDivisionError) and outcome.error is None
    assert run(worker, lambda report: "next").result == "next"


def test_progress(worker):
    go, seen = threading.Semaphore(0), []

    def work(report):
        for k in (0.25, 0.75):
            report(k)
            assert go.acquire(timeout=PATIENCE_S)
        return None

    outcomes = []
    worker.start("solve", work, outcomes.append)
    assert worker.share == 0.0
    for expected in (0.25, 0.75):
        end = time.monotonic() + PATIENCE_S
        while worker.share != expected and time.monotonic() < end:
            worker.poll()
        seen.append(worker.share)
        go.release()
    assert seen == [0.25, 0.75]
    assert finish(worker, outcomes).result is None


def test_cancel_ends_a_job_at_its_next_report(worker):
    begun, rounds, outcomes = threading.Event(), [], []

    def work(report):
        while True:
            report(0.5)
            rounds.append(1)
            begun.set()
            time.sleep(0.001)

    worker.start("solve", work, outcomes.append)
    assert begun.wait(PATIENCE_S)
    worker.cancel()
    assert finish(worker, outcomes) == Outcome("solve", cancelled=True)
    assert worker.wait(PATIENCE_S)
    done = len(rounds)
    time.sleep(0.02)
    assert len(rounds) == done


def test_a_job_that_ends_while_it_is_cancelled_brings_no_result(worker):
    go, outcomes = threading.Event(), []

    def work(report):
        assert go.wait(PATIENCE_S)
        return "too late"

    worker.start("solve", work, outcomes.append)
    worker.cancel()
    go.set()
    outcome = finish(worker, outcomes)
    assert outcome.cancelled and outcome.result is None


def test_one_outcome_only_and_nothing_is_left_for_the_next_job(worker):
    begun, outcomes = threading.Event(), []

    def work(report):
        while True:
            report(0.9)
            begun.set()

    worker.start("first", work, outcomes.append)
    assert begun.wait(PATIENCE_S)
    worker.cancel()
    worker.cancel()
    finish(worker, outcomes)
    later = run(worker, lambda report: "second", "second")
    worker.poll()
    assert [one.label for one in outcomes] == ["first"] and later.result == "second"


def test_one_job_at_a_time(worker):
    go, outcomes = threading.Event(), []
    worker.start("first", lambda report: go.wait(PATIENCE_S), outcomes.append)
    with pytest.raises(RuntimeError, match="a job is running"):
        worker.start("second", lambda report: None, outcomes.append)
    go.set()
    assert finish(worker, outcomes).label == "first"


def test_the_next_job_may_begin_when_one_is_done(worker):
    outcomes = []

    def on_done(outcome):
        outcomes.append(outcome)
        if len(outcomes) == 1:
            worker.start("second", lambda report: 2, on_done)

    worker.start("first", lambda report: 1, on_done)
    end = time.monotonic() + PATIENCE_S
    while len(outcomes) < 2 and time.monotonic() < end:
        worker.poll()
    assert [one.result for one in outcomes] == [1, 2]
    assert not worker.busy


def test_an_idle_worker_can_be_asked_anything():
    worker = Worker()
    worker.poll()
    worker.cancel()
    assert worker.wait(0.0) and not worker.busy
