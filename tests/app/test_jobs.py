"""Jobs, with real worker processes; the functions are ones that any process can import."""

import contextlib
import math
import multiprocessing
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from app.jobs import Jobs
from core.sweep import Conditions

LONG = 60.0  # [s], what a test waits for at most


@pytest.fixture(scope="module")
def jobs():
    with contextlib.closing(Jobs(workers=2)) as jobs:
        yield jobs


def test_every_item_gets_its_result(jobs):
    job = jobs.submit(math.gcd, [(12, n) for n in range(1, 40)], label="divisors")
    status = jobs.wait(job, LONG)
    assert (status.label, status.state, status.done, status.total) == ("divisors", "done", 39, 39)
    assert sorted(jobs.take(job)) == [(n - 1, math.gcd(12, n)) for n in range(1, 40)]


def test_results_are_handed_out_once_and_asking_for_the_status_takes_none(jobs):
    job = jobs.submit(math.sqrt, [(4.0,)], label="roots")
    jobs.wait(job, LONG)
    jobs.status(job)
    assert jobs.take(job) == [(0, 2.0)]
    assert jobs.take(job) == []


def test_an_item_that_fails_is_told_in_a_sentence_and_the_others_go_on(jobs, caplog):
    job = jobs.submit(Conditions, [(2.0,), (-1.0,), ("two",)], label="areas")
    status = jobs.wait(job, LONG)
    assert [index for index, _ in jobs.take(job)] == [0]
    told = {failure.index: failure.sentence for failure in status.failures}
    assert told[1].startswith("The area must be a number above zero")
    assert "log file" in told[2] and "Traceback" not in told[2]
    assert "Traceback" in caplog.text  # the bug is in the log


def test_arguments_and_results_that_cannot_travel_are_failures_of_their_item_alone(jobs):
    job = jobs.submit(iter, [([1],), (lambda: None, None), ((),)], label="unpicklable arguments")
    assert [failure.index for failure in jobs.wait(job, LONG).failures] == [1]
    job = jobs.submit(open, [(os.devnull,)], label="unpicklable result")
    assert len(jobs.wait(job, LONG).failures) == 1


def test_a_worker_that_dies_takes_only_its_own_item_along(jobs):
    job = jobs.submit(eval, [("40 + 2",), ("__import__('os')._exit(9)",), ("7",)], label="one dies")
    status = jobs.wait(job, LONG)
    assert status.state == "done"
    assert dict(jobs.take(job)) == {0: 42, 2: 7}
    assert [failure.index for failure in status.failures] == [1]
    assert "ended its process" in status.failures[0].sentence
    again = jobs.submit(math.sqrt, [(9.0,)] * 4, label="afterwards")
    assert jobs.wait(again, LONG).state == "done"


def test_cancelling_keeps_what_is_done_and_ends_what_never_would(tmp_path):
    begun = tmp_path / "begun"
    endless = f"open({str(begun)!r}, 'w').close() or __import__('time').sleep({10 * LONG})"
    with contextlib.closing(Jobs(workers=1)) as jobs:
        job = jobs.submit(eval, [("42",), (endless,), ("7",)], label="one is endless")
        give_up = time.monotonic() + LONG
        while not begun.exists() and time.monotonic() < give_up:
            jobs.wait(job, 0.02)
        jobs.cancel(job)
        status = jobs.wait(job, LONG)
        assert (status.state, status.done, status.total, status.failures) == ("cancelled", 1, 3, ())
        assert jobs.take(job) == [(0, 42)]
        after = jobs.submit(math.sqrt, [(4.0,)], label="the pool goes on")
        assert jobs.wait(after, LONG).state == "done"


def test_cancelling_a_finished_job_changes_nothing(jobs):
    job = jobs.submit(math.sqrt, [(4.0,)], label="roots")
    jobs.wait(job, LONG)
    jobs.cancel(job)
    assert jobs.status(job).state == "done"


def test_a_short_job_does_not_wait_behind_a_long_one():
    with contextlib.closing(Jobs(workers=1)) as jobs:
        long = jobs.submit(time.sleep, [(0.2,)] * 1000, label="long")
        short = jobs.submit(math.sqrt, [(4.0,)], label="short")
        assert jobs.wait(short, LONG).state == "done"
        assert jobs.status(long).state == "running"


def test_a_job_without_items_is_done(jobs):
    assert jobs.status(jobs.submit(math.sqrt, [], label="nothing")).state == "done"


def test_a_job_that_nobody_knows_is_lost_not_an_error(jobs):
    assert jobs.status("of an earlier run").state == "lost"
    assert jobs.take("of an earlier run") == []
    jobs.cancel("of an earlier run")


def test_closing_ends_the_workers_even_in_the_middle_and_starts_none_where_none_ran():
    before = set(multiprocessing.active_children())
    Jobs().close()
    jobs = Jobs(workers=1)
    started = jobs.submit(math.sqrt, [(1.0,)], label="started")
    jobs.submit(time.sleep, [(10 * LONG,)], label="endless")
    jobs.wait(started, LONG)
    assert set(multiprocessing.active_children()) - before
    jobs.close()
    jobs.close()
    assert not set(multiprocessing.active_children()) - before
    with pytest.raises(RuntimeError):
        jobs.submit(math.sqrt, [(1.0,)], label="too late")


SERVER_WITH_AN_IDLE_WORKER = """
import math, sys
from app.jobs import Jobs

if __name__ == "__main__":
    jobs = Jobs(workers=1)
    jobs.wait(jobs.submit(math.sqrt, [(4.0,)], label="roots"), 60)
    print("ready", flush=True)
    sys.stdin.read()
"""


@pytest.mark.skipif(os.name != "posix", reason="needs kill -9")
def test_workers_do_not_outlive_a_server_that_is_killed(tmp_path):
    script = tmp_path / "server.py"
    script.write_text(SERVER_WITH_AN_IDLE_WORKER)
    server = subprocess.Popen(
        [sys.executable, script],
        env=os.environ | {"PYTHONPATH": str(Path(__file__).parents[2])},
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        text=True,
    )
    with server:
        assert server.stdout.readline() == "ready\n"
        server.send_signal(signal.SIGKILL)
        # The worker shares the pipe, so its end comes only when both are gone.
        assert server.communicate(timeout=LONG)[0] == ""
