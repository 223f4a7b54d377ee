"""The job foreman: states, order, progress, stopping, and workers that die."""

import multiprocessing
import textwrap
import time

import pytest

from curvebank_web.jobs import Registry

TASKS = """
    import os, time
    from pathlib import Path
    from curvebank.errors import SheetError

    def double(*, value, progress):
        progress(0.5, "half way")
        return 2 * value

    def slow(*, seconds, progress):
        for n in range(int(seconds * 100)):
            progress(n / (seconds * 100), f"step {n}")
            time.sleep(0.01)

    def deaf(*, seconds, progress):
        time.sleep(seconds)

    def die(*, progress):
        os._exit(9)

    def bad_sheet(*, progress):
        raise SheetError("Scan it again.", code="truncated", path="$.sheet")

    def bug(*, progress):
        raise ZeroDivisionError("inside")

    def swallow(*, mark, progress):
        try:
            for n in range(1000):
                progress(n / 1000, "")
                time.sleep(0.01)
        finally:
            Path(mark).write_text("left")

    TASKS = {f.__name__: f for f in (double, slow, deaf, die, bad_sheet, bug, swallow)}
"""


@pytest.fixture(scope="module")
def tasks(tmp_path_factory):
    """A module of tasks that workers can import."""
    import sys

    folder = tmp_path_factory.mktemp("tasks")
    (folder / "tasks_of_this_test.py").write_text(textwrap.dedent(TASKS))
    sys.path.insert(0, str(folder))
    yield "tasks_of_this_test"
    sys.path.remove(str(folder))


@pytest.fixture(scope="module")
def foreman(tasks):
    foreman = Registry(1, tasks=tasks, grace_s=0.3)
    yield foreman
    foreman.close()


def ended(foreman, job, seconds=60):
    assert foreman.wait(job, seconds), (job.state, job.text)
    return job


def until(condition, seconds=60):
    end = time.monotonic() + seconds
    while not condition():
        assert time.monotonic() < end
        time.sleep(0.01)


def test_a_job_runs_and_hands_its_value_over(foreman):
    kept = []
    job = foreman.submit("double", "double-21", {"value": 21}, on_done=lambda job, value: kept.append(value))
    assert ended(foreman, job).state == "done" and kept == [42] and (job.share, job.text) == (1.0, "Done")
    assert foreman.get(job.id) is job and foreman.get("nothing") is None


def test_progress_is_seen_from_outside(foreman):
    job = foreman.submit("slow", "slow-1", {"seconds": 5})
    until(lambda: job.share > 0.05 and job.text.startswith("step "))
    assert job.state == "running"
    foreman.cancel(job)
    assert ended(foreman, job).state == "cancelled" and job.text == "Stopped" and job.share < 1


def test_one_works_while_the_others_wait_in_line(foreman):
    first = foreman.submit("slow", "line-1", {"seconds": 30})
    until(lambda: first.state == "running")
    second = foreman.submit("double", "line-2", {"value": 1})
    third = foreman.submit("double", "line-3", {"value": 1})
    urgent = foreman.submit("double", "line-0", {"value": 1}, first=True)
    assert [foreman.place(j) for j in (first, urgent, second, third)] == [0, 1, 2, 3]
    foreman.cancel(third)
    assert third.state == "cancelled" and foreman.place(third) == 0
    foreman.cancel(first)
    assert [ended(foreman, j).state for j in (first, urgent, second)] == ["cancelled", "done", "done"]


def test_the_same_key_is_worked_on_once_until_it_has_ended(foreman):
    first = foreman.submit("slow", "same", {"seconds": 30})
    assert foreman.submit("slow", "same", {"seconds": 30}) is first
    foreman.cancel(first)
    assert foreman.submit("double", "same", {"value": 1}) is not first
    ended(foreman, first)


def test_a_library_error_keeps_its_code_and_words(foreman):
    job = ended(foreman, foreman.submit("bad_sheet", "bad", {}))
    assert job.state == "failed" and job.error == {"code": "truncated", "message": "Scan it again.", "path": "$.sheet"}


def test_a_fault_of_the_program_is_told_in_short(foreman):
    job = ended(foreman, foreman.submit("bug", "bug", {}))
    assert job.state == "failed" and job.error["code"] == "internal" and "ZeroDivision" not in job.error["message"]


def test_a_worker_that_dies_fails_its_job_and_no_other(foreman):
    job = foreman.submit("die", "die", {})
    after = foreman.submit("double", "after", {"value": 2})
    assert ended(foreman, job).error["code"] == "worker-died"
    assert ended(foreman, after).state == "done"


def test_a_task_that_does_not_listen_is_ended(foreman):
    job = foreman.submit("deaf", "deaf", {"seconds": 600})
    until(lambda: job.state == "running")
    foreman.cancel(job)
    assert ended(foreman, job, 30).state == "cancelled"
    assert ended(foreman, foreman.submit("double", "next", {"value": 1})).state == "done"


def test_a_result_that_cannot_be_kept_is_a_failure(foreman):
    def refuse(job, value):
        raise OSError("disk full")

    job = ended(foreman, foreman.submit("double", "unkept", {"value": 1}, on_done=refuse))
    assert job.state == "failed" and job.error["code"] == "not-kept" and "disk full" in job.error["message"]


def test_ended_jobs_are_forgotten_in_the_end(foreman, monkeypatch):
    monkeypatch.setattr("curvebank_web.jobs.KEPT", 2)
    jobs = [ended(foreman, foreman.submit("double", f"many-{n}", {"value": n})) for n in range(6)]
    assert foreman.get(jobs[0].id) is None and foreman.get(jobs[-1].id) is jobs[-1]


def test_closing_stops_the_work_and_the_processes(tasks, tmp_path):
    before = {p.pid for p in multiprocessing.active_children()}
    foreman = Registry(1, tasks=tasks)
    running = foreman.submit("swallow", "a", {"mark": str(tmp_path / "mark")})
    waiting = foreman.submit("double", "b", {"value": 1})
    until(lambda: running.share > 0)
    assert {p.pid for p in multiprocessing.active_children()} - before
    foreman.close()
    assert (running.state, waiting.state) == ("cancelled", "cancelled")
    assert (tmp_path / "mark").read_text() == "left"
    assert not {p.pid for p in multiprocessing.active_children()} - before
