"""Reading and importing under fire: many thousand spoilt files in a process with little memory and little time for each.

``SWEEPBENCH_INPUTS`` sets how many (100,000), ``SWEEPBENCH_FIRST`` the number of the first. ``pytest -s`` shows the
progress. What fails is named by its number: ``python -m tests.benchmarks.test_fuzz NUMBER 1`` repeats it.
"""

import os
import signal
import subprocess
import sys
import tempfile
import time
import traceback
from collections import Counter
from contextlib import closing
from pathlib import Path

import pytest

from core.store import Store
from tests.core.mutations import keep_promise, spoilt

INPUTS = int(os.environ.get("SWEEPBENCH_INPUTS", "100000"))
FIRST = int(os.environ.get("SWEEPBENCH_FIRST", "0"))
MEMORY = 3 * 2**30  # bytes of address space, numpy's own threads included; most of it is never touched
SECONDS = 40  # for one input; opening one workbook may take 30
REPORT = 2000


class TooSlow(BaseException):
    """Not an Exception, so that nobody catches it on the way."""


def computed() -> float:
    """Seconds of computing, that of the processes which open workbooks included: a busy machine does not count."""
    return sum(os.times()[:4])


def run(first: int, count: int) -> int:
    import resource

    resource.setrlimit(resource.RLIMIT_AS, (MEMORY, MEMORY))

    def too_slow(*_):
        raise TooSlow

    signal.signal(signal.SIGALRM, too_slow)
    outcomes, failures = Counter(), 0
    slowest = {"text": (0.0, -1), "workbook": (0.0, -1), "archive": (0.0, -1)}
    begin = time.perf_counter()
    with tempfile.TemporaryDirectory() as folder:
        store = Store(Path(folder) / "0")
        for number in range(first, first + count):
            one = spoilt(number)
            kind = "archive" if one.reader == "archive" else "workbook" if one.data[:2] == b"PK" else "text"
            started = computed()
            signal.setitimer(signal.ITIMER_REAL, SECONDS)
            try:
                outcomes[kind, keep_promise(one, store)] += 1
            except (Exception, TooSlow):
                failures += 1
                print(f"input {number} ({kind}) broke the promise:\n{traceback.format_exc()}", flush=True)
            finally:
                signal.setitimer(signal.ITIMER_REAL, 0)
            slowest[kind] = max(slowest[kind], (computed() - started, number))
            if (number - first + 1) % REPORT == 0 or number == first + count - 1:
                # The deleted workspaces would pile up for 30 days.
                store.close()
                store = Store(Path(folder) / str(number))
                peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
                print(
                    f"{number - first + 1} inputs in {time.perf_counter() - begin:.0f} s: "
                    + ", ".join(f"{kind} {what} {n}" for (kind, what), n in sorted(outcomes.items()))
                    + f"; failures {failures}; most computing "
                    + ", ".join(f"{kind} {took:.2f} s (#{n})" for kind, (took, n) in slowest.items())
                    + f"; peak {peak:.0f} MB",
                    flush=True,
                )
        with closing(store):
            pass
    return 1 if failures else 0


@pytest.mark.skipif(os.name == "nt", reason="no limits on memory and time there")
def test_spoilt_files_are_read_or_refused_within_time_and_memory():
    command = [sys.executable, "-m", "tests.benchmarks.test_fuzz", str(FIRST), str(INPUTS)]
    process = subprocess.Popen(command, cwd=Path(__file__).parents[2], stdout=subprocess.PIPE, text=True)
    try:
        said = []
        for line in process.stdout:
            print(line, end="", flush=True)
            said.append(line)
        assert process.wait() == 0, "".join(said[-60:])
        assert said[-1].startswith(f"{INPUTS} inputs")
    finally:
        process.kill()
        process.communicate()


if __name__ == "__main__":
    sys.exit(run(int(sys.argv[1]), int(sys.argv[2])))
