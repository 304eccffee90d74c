"""Independent tasks give the same here, in other processes and on a Dask scheduler, also when one dies."""

from functools import partial

import pytest
import task_functions as work

from fvcheck.errors import FieldError, FvcheckError, SetupError
from fvcheck.tasks import each_done, run_tasks


@pytest.fixture(params=["here", "processes", "dask"])
def where(request):
    if request.param == "here":
        return {}
    if request.param == "processes":
        return {"workers": 2}
    return {"scheduler": request.getfixturevalue("scheduler")}


def test_results_come_in_the_order_of_the_items(where):
    seen = []
    assert run_tasks(work.square, range(7), progress=seen.append, **where) == [n * n for n in range(7)]
    assert seen == [7] * 7


def test_no_items_give_no_results(where):
    assert run_tasks(work.square, [], **where) == []


def test_our_errors_stand_for_results_with_all_their_parts(where):
    two, three = run_tasks(work.refuse_odd, [2, 3], **where)
    assert two == 2
    assert type(three) is FieldError
    assert (three.what, three.where, three.mend) == ("3 is odd", "here", "Take another.")
    assert str(three) == "3 is odd (here). Take another."


def test_other_exceptions_are_raised(where):
    with pytest.raises(ZeroDivisionError, match="by 1"):
        run_tasks(work.fail, [1], **where)


def test_what_a_task_prints_does_not_disturb(where):
    assert run_tasks(work.noisy, [1, 2], **where) == [1, 2]


@pytest.mark.parametrize("where", ["processes", "dask"], indirect=True)
def test_a_worker_that_is_killed_is_survived(where, tmp_path):
    paths = [str(tmp_path / f"{n}") for n in range(3)]
    assert run_tasks(work.die_once, paths, **where) == [True] * 3


def test_a_task_that_kills_each_process_fails_alone():
    found = run_tasks(work.die, range(3), workers=2)
    assert (found[0], found[2]) == (0, 2)
    assert isinstance(found[1], FvcheckError)
    assert "signal 9" in str(found[1])


def test_a_task_that_takes_too_long_is_ended_and_fails_alone():
    # a process takes a fraction of a second to begin
    found = run_tasks(work.sleep_at_one, range(4), workers=2, limit=5.0)
    assert [found[n] for n in (0, 2, 3)] == [0, 2, 3]
    assert isinstance(found[1], FvcheckError) and "longer than 5 s" in str(found[1])


@pytest.mark.parametrize("given", [{}, {"workers": 0}, {"workers": 1, "limit": 0.0}])
def test_a_limit_needs_a_process_and_a_time(given):
    with pytest.raises(SetupError, match="limit"):
        run_tasks(work.square, [1], **{"limit": 1.0, **given})


def test_leaving_early_ends_the_processes():
    for _ in each_done(work.square, range(50), workers=2):
        break


def test_what_cannot_be_sent_is_told():
    with pytest.raises(SetupError, match="another process"):
        run_tasks(lambda n: n, [1], workers=1)
    with pytest.raises(SetupError, match="another process"):
        run_tasks(work.square, [lambda: 1], workers=1)


def test_a_partial_of_a_function_is_sent(where):
    assert run_tasks(partial(pow, 2), [3, 4], **where) == [8, 16]


def test_a_scheduler_that_does_not_answer_is_told(monkeypatch):
    pytest.importorskip("distributed")
    monkeypatch.setattr("fvcheck.tasks._PATIENCE", 1.0)
    with pytest.raises(SetupError, match="no Dask scheduler answers"):
        run_tasks(work.square, [1], scheduler="tcp://127.0.0.1:9")


def test_workers_and_a_scheduler_exclude_each_other():
    with pytest.raises(SetupError, match="scheduler"):
        run_tasks(work.square, [1], workers=1, scheduler="tcp://127.0.0.1:9")
    with pytest.raises(SetupError, match="workers"):
        run_tasks(work.square, [1], workers=-1)
