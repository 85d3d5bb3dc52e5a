"""Whatever the bytes are: sweeps that keep their promises, or UnreadableFile, and nothing else."""

from pathlib import Path

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from core.checks import check
from core.errors import UnreadableFile
from core.reading import read_sweeps
from core.sweep import Sweep

FOLDER = Path(__file__).parents[3] / "sample_sweeps"
TEXTS = [path.read_bytes() for path in sorted(FOLDER.iterdir()) if path.suffix in {".csv", ".txt", ".tsv"}]
SHEETS = [path.read_bytes() for path in sorted(FOLDER.iterdir()) if path.suffix == ".xlsx"]
FRAGMENTS = [
    b",", b";", b"\t", b"\n\n", b"\r", b" ", b'"', b"nan", b"inf", b"9.9e37", b"1e400", b"1e308", b"-1e308", b"1e-320",
    b"\x00", b"\xff\xfe", b"\xe2\x88\x92", b"V (V)", b"mA/cm2", b"Area: ", b"T = ", b"(", b"]", b":", b"=", b"#", b"dark",
    b"reverse", b"9" * 400, b"1_0", b"Cells in series: 1e9", b"Irradiance: nan", b"\xd9\xa3",
]  # fmt: skip
NAMES = st.sampled_from(["a.csv", "K07_fwd.txt", "", "x.xlsx", "_d", "dark.csv", "1", "fwd 2", "../\x00/\n"])


@st.composite
def mutated(draw, originals):
    """A real file with bytes changed, cut, doubled, replaced, or spliced with another."""
    data = draw(st.sampled_from(originals))
    for _ in range(draw(st.integers(1, 8))):
        place, end = sorted(draw(st.tuples(*[st.integers(0, len(data))] * 2)))
        kind = draw(st.sampled_from(["put", "cut", "double", "byte", "replace", "splice"]))
        if kind == "put":
            data = data[:place] + draw(st.sampled_from(FRAGMENTS)) + data[place:]
        elif kind == "cut":
            data = data[:place] + data[min(end, place + 300) :]
        elif kind == "double":
            data = data[:place] + data[place : place + 200] * 2 + data[place + 200 :]
        elif kind == "byte":
            data = data[:place] + bytes([draw(st.integers(0, 255))]) + data[place + 1 :]
        elif kind == "replace":
            data = data.replace(draw(st.sampled_from([b",", b".", b"\n", b"\t", b";"])), draw(st.sampled_from(FRAGMENTS)), 500)
        else:
            data = data[:place] + draw(st.sampled_from(originals))[end:]
    return data[:200_000]


def promise(data, name):
    try:
        sweeps = read_sweeps(data, name)
    except UnreadableFile as error:
        assert str(error).endswith(".")
        return
    assert sweeps
    for sweep in sweeps:
        steps = np.diff(sweep.voltage)
        assert sweep.voltage.size == sweep.current.size >= 3
        assert np.all(np.isfinite(sweep.voltage)) and np.all(np.isfinite(sweep.current))
        assert np.all(steps >= 0) if sweep.direction == "forward" else np.all(steps <= 0)
        assert sweep.name
        assert Sweep.from_dict(sweep.to_dict()).name == sweep.name
        check(sweep)
    assert len({sweep.name for sweep in sweeps}) == len(sweeps)


@settings(max_examples=200, deadline=None)
@given(mutated(TEXTS), NAMES)
def test_mutated_text(data, name):
    promise(data, name)


@settings(max_examples=20, deadline=None)
@given(mutated(SHEETS), NAMES)
def test_mutated_spreadsheets(data, name):
    promise(data, name)


@settings(max_examples=100, deadline=None)
@given(st.binary(max_size=400) | st.text(alphabet="0123456789.,;-+eE\t \nVAm:=#", max_size=400).map(str.encode), NAMES)
def test_bytes_and_characters_at_random(data, name):
    promise(data, name)
