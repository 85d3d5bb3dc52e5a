"""Some two thousand spoilt files, small ones; ``tests/benchmarks/test_fuzz.py`` reads a hundred thousand."""

from contextlib import closing

import pytest

from core.checks import check
from core.errors import UnreadableFile
from core.reading import read_sweeps
from core.store import Store
from tests.core.mutations import Damage, damaged, keep_promise, rewritten, spoilt

BATCH = 350
# Findings that say only that a sweep is short, or ends early: no warning that its points are none.
OF_SHORT_SWEEPS = {"points", "knee", "open circuit", "short circuit"}


@pytest.fixture(scope="module")
def store(tmp_path_factory):
    with closing(Store(tmp_path_factory.mktemp("spoilt"))) as store:
        yield store


@pytest.mark.parametrize("first", range(10**6, 10**6 + 6 * BATCH, BATCH))
def test_spoilt_files_are_read_or_refused_in_a_sentence(store, first):
    outcomes = {keep_promise(spoilt(number, sheets=0.005, archives=0.12, short=True), store) for number in range(first, first + BATCH)}
    assert outcomes == {"read", "refused"}  # an input that is never read, or never refused, tests nothing


def misread(one: Damage, allowed: int) -> bool:
    """Whether a file is read as points that it does not have, without a warning."""
    try:
        sweeps = read_sweeps(one.data, one.name)
    except UnreadableFile:
        return False
    return any(
        one.untrue(sweep) > max(allowed, 0.2 * sweep.voltage.size)
        and all(f.severity == "note" or f.severity == "caution" and f.name in OF_SHORT_SWEEPS for f in check(sweep))
        for sweep in sweeps
    )


@pytest.mark.parametrize("first", range(0, 2000, 500))
def test_what_is_read_from_a_damaged_file_are_its_points_or_a_check_warns(first):
    # Each of up to eight cuts and overwritten bytes can leave another number; a digit that was overwritten says nothing.
    wrong = [number for number in range(first, first + 500) if misread(damaged(number), allowed=8)]
    assert len(wrong) <= 1, wrong  # headings and rows can be damaged in a way that fits together


@pytest.mark.parametrize("first", range(0, 1500, 500))
def test_what_is_read_from_numbers_in_other_conventions_are_its_points_or_a_check_warns(first):
    assert [number for number in range(first, first + 500) if misread(rewritten(number), allowed=0)] == []


def test_most_files_in_other_conventions_are_read():
    read = 0
    for number in range(300):
        one = rewritten(number)
        try:
            read += all(one.untrue(sweep) == 0 for sweep in read_sweeps(one.data, one.name))
        except UnreadableFile as refusal:
            assert str(refusal).endswith(".")
    assert read > 220
