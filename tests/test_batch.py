"""Many pairs at once, with whatever executor."""

from __future__ import annotations

from concurrent.futures import Executor, Future, ProcessPoolExecutor, ThreadPoolExecutor
from multiprocessing import get_context
from pathlib import Path

import numpy as np
import pytest
from simulate import observed

import relorbit
from relorbit.batch import Outcome, solve_file, solve_many
from relorbit.errors import InputError, Undetermined
from relorbit.orbit.elements import Elements

TRUE = Elements(12.0, 2000.0, 0.4, 1.0, 50.0, 60.0, 120.0)


class OneAfterAnother(Executor):
    """Runs at once, in this thread; says how often it was asked and whether it was closed."""

    def __init__(self) -> None:
        self.asked, self.closed = 0, False

    def submit(self, fn, /, *args, **kwargs) -> Future:
        self.asked += 1
        future: Future = Future()
        try:
            future.set_result(fn(*args, **kwargs))
        except BaseException as error:
            future.set_exception(error)
        return future

    def shutdown(self, wait: bool = True, *, cancel_futures: bool = False) -> None:
        self.closed = True


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    for number in range(3):
        epoch = np.linspace(1990.0, 2020.0, 30)
        pair = observed(TRUE, epoch, 0.02, np.random.default_rng(number), name=f"Invented {number}")
        pair.write(tmp_path / f"pair{number}.ecsv")
    few = observed(TRUE, np.array([1990.0, 2000.0]), 0.02, np.random.default_rng(9))
    few.write(tmp_path / "few.ecsv")
    (tmp_path / "broken.csv").write_text("epoch,theta,rho\n2000.0,north,1.0\n", encoding="utf-8")
    return tmp_path


def everything(folder: Path) -> list[Path]:
    names = ["pair1.ecsv", "broken.csv", "pair0.ecsv", "few.ecsv", "missing.ecsv", "pair2.ecsv"]
    return [folder / name for name in names]


def check(outcomes: list[Outcome], folder: Path) -> None:
    assert [outcome.path for outcome in outcomes] == [str(path) for path in everything(folder)]
    good = [outcomes[k] for k in (0, 2, 5)]
    assert [one.solution.pair for one in good] == ["Invented 1", "Invented 0", "Invented 2"]
    assert all(one.error is None for one in good)
    assert [type(outcomes[k].error) for k in (1, 3, 4)] == [InputError, Undetermined, InputError]
    assert all(outcomes[k].solution is None for k in (1, 3, 4))
    assert "broken.csv, line 2, column theta" in str(outcomes[1].error)
    assert outcomes[3].error.code == "too-few-measures"


def test_every_file_has_its_outcome_in_the_order_given(folder: Path) -> None:
    executor = OneAfterAnother()
    check(list(solve_many(everything(folder), executor=executor)), folder)
    assert executor.asked == 6
    assert not executor.closed  # an executor that is passed in is left open


def test_an_outcome_is_what_solving_the_file_alone_gives(folder: Path) -> None:
    (outcome,) = solve_many([folder / "pair0.ecsv"], executor=OneAfterAnother())
    alone = relorbit.solve(relorbit.read(folder / "pair0.ecsv"))
    assert outcome.solution.to_dict() == alone.to_dict()
    assert solve_file(folder / "pair0.ecsv").solution.to_dict() == alone.to_dict()


def test_with_processes_errors_keep_what_they_carry(folder: Path) -> None:
    with ProcessPoolExecutor(2, mp_context=get_context("spawn")) as pool:
        outcomes = list(solve_many(everything(folder), executor=pool))
    check(outcomes, folder)
    broken, few = outcomes[1].error, outcomes[3].error
    assert (broken.line, broken.column) == (2, "theta")
    assert few.known == {"numbers": 4, "unknowns": 7}


def test_with_threads_the_answers_are_the_same(folder: Path) -> None:
    one = list(solve_many(everything(folder), executor=OneAfterAnother()))
    with ThreadPoolExecutor(2) as pool:
        other = list(solve_many(everything(folder), executor=pool))
    check(other, folder)
    for k in (0, 2, 5):
        assert other[k].solution.to_dict() == one[k].solution.to_dict()


def test_options_go_to_every_pair(folder: Path) -> None:
    paths = [folder / f"pair{number}.ecsv" for number in range(3)]
    outcomes = solve_many(paths, executor=OneAfterAnother(), hold={"e": 0.4}, passage_near=2050.0)
    for outcome in outcomes:
        assert outcome.solution.elements.e == 0.4
        assert abs(outcome.solution.elements.T - 2050.0) <= 6.1


def test_progress_is_told_once_for_each_file(folder: Path) -> None:
    told: list[str] = []
    outcomes = list(
        solve_many(
            everything(folder),
            executor=OneAfterAnother(),
            on_done=lambda outcome: told.append(outcome.path),
        )
    )
    assert sorted(told) == sorted(outcome.path for outcome in outcomes)


def test_no_files_are_no_trouble() -> None:
    assert list(solve_many([], executor=OneAfterAnother())) == []


def test_a_fault_is_not_hidden(folder: Path) -> None:
    outcomes = solve_many([folder / "pair0.ecsv"], executor=OneAfterAnother(), no_such_option=1)
    with pytest.raises(TypeError, match="no_such_option"):
        list(outcomes)
