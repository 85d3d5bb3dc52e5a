"""Some two thousand spoilt files, small ones; ``tests/benchmarks/test_fuzz.py`` reads a hundred thousand."""

from contextlib import closing

import pytest

from core.store import Store
from tests.core.mutations import keep_promise, spoilt

BATCH = 350


@pytest.fixture(scope="module")
def store(tmp_path_factory):
    with closing(Store(tmp_path_factory.mktemp("spoilt"))) as store:
        yield store


@pytest.mark.parametrize("first", range(10**6, 10**6 + 6 * BATCH, BATCH))
def test_spoilt_files_are_read_or_refused_in_a_sentence(store, first):
    outcomes = {keep_promise(spoilt(number, sheets=0.005, archives=0.12, short=True), store) for number in range(first, first + BATCH)}
    assert outcomes == {"read", "refused"}  # an input that is never read, or never refused, tests nothing

