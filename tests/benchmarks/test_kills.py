"""The full trial: fifty times kill -9 at random moments, as in ``tests/app/test_killed_program.py``."""

import os

import pytest

from tests.app.test_killed_program import trial


@pytest.mark.skipif(os.name == "nt", reason="Windows knows no kill -9")
def test_fifty_kills_lose_nothing_acknowledged(tmp_path):
    kills = int(os.environ.get("SWEEPBENCH_KILLS", "50"))
    acknowledged = trial(tmp_path, kills, seed=50, longest=3.0, say=lambda words: print(words, flush=True))
    print(f"{kills} kills, {acknowledged} acknowledged changes, none lost, none made twice")
    assert acknowledged > 10 * kills
