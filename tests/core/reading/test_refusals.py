"""Files that hold no sweep: one clear sentence each that says what, where and what to do."""

import io
import zipfile

import numpy as np
import pytest

from core.errors import UnreadableFile
from core.reading import limits, read_sweeps


def zipped(name):
    stream = io.BytesIO()
    with zipfile.ZipFile(stream, "w") as archive:
        archive.writestr(name, "0.1,0.2\n")
    return stream.getvalue()


CURVE = "\n".join(f"{v:.3f},{2 - v:.3f}" for v in np.arange(0, 1, 0.02))


@pytest.mark.parametrize(
    ("data", "says"),
    [
        (b"", "the file is empty"),
        (b" \n\n\t\n", "nothing but blank lines"),
        (b"\x89PNG\r\n\x1a\n" + bytes(100), "picture (PNG)"),
        (b"\xff\xd8\xff\xe0" + bytes(100), "picture (JPEG)"),
        (b"%PDF-1.7\n1 0 obj\n", "PDF"),
        (zipped("K07.csv"), "zip archive"),
        (zipped("word/document.xml"), "text document"),
        (b"PK\x03\x04" + bytes(50), "damaged"),
        (bytes(range(256)) * 20, "binary"),
        (b"<!DOCTYPE html><table><tr><td>1</td></tr></table>", "web page"),
        (b"<?xml version='1.0'?><a>1</a>", "XML"),
        (b'{"voltage": [0, 1]}', "JSON"),
        (b"Dear colleague,\nhere are the results.\n", "no table of numbers"),
        (b"1.0\n2.0\n3.0\n4.0\n", "only one column"),
        (b"V (V),I (A)\n0.1,0.2\n0.2,0.1\n", "only 2 rows"),
        (b"V (V),I (A)\n0.1,0\n0.2,0\n0.3,0\n", "current is zero at every voltage"),
        (b"V (V),I (A)\n0.5,0.1\n0.5,0.2\n0.5,0.3\n", "voltage never changes"),
        (b"0.5,0.1\n0.5,0.2\n0.5,0.3\n", "the same number, 0.5, in every row"),
        (b"V,I\n" + b"".join(b"0,%02d,21,%02d\n" % (i, 90 - i) for i in range(9)), "mark decimals as well"),
        (b"Time (s),Power (W)\n0,1\n1,2\n2,3\n", "name no columns of voltage and current"),
        (b"V (V);I (A)\n" + b"".join(b"0;%d;0;0%d\n" % (i, 90 - i) for i in range(9)) + b"1;0;-0;1\n", "only two different values"),
        (b"V (V)\tI (A)\n" + b"".join(b"%d\t0.%d\t0.02\n" % (i, i) for i in range(1, 9)), "headings only 2"),
        (b"V (mV);I (mA)\n" + "".join(f"{i};5\u06630000\n" for i in range(9)).encode(), "no table of numbers"),
        (b"V (kV),I (mA)\n-100,22\n500,21\n900,-3\n", "voltage above 5e+05 V"),
        (b"V (V),J (kA/cm2)\n-0.1,2200\n0.5,2100\n0.9,-30\n", "density above 2.1e+06 A cm"),
        (b"V (V),I (kA)\n-0.1,2200\n0.5,2100\n0.9,-30\n", "current above 2.1e+06 A,"),
        (b"V (V),I (A)\n0.1,9.9e37\n0.2,9.9e37\n0.3,9.9e37\n0.4,1\n", "numbers"),
    ],
)
def test_one_sentence(data, says):
    with pytest.raises(UnreadableFile) as caught:
        read_sweeps(data, "folder/K07.csv")
    text = str(caught.value)
    assert says in text
    assert text.startswith("K07.csv") and text.endswith(".") and "\n" not in text and ".." not in text


def test_the_first_of_many_broken_rows_is_named():
    rows = CURVE.split("\n")
    rows[10:30] = [row.replace(",", ",x") for row in rows[10:30]]
    with pytest.raises(UnreadableFile) as caught:
        read_sweeps(("V (V),I (A)\n" + "\n".join(rows)).encode(), "a.csv")
    assert caught.value.line == 12
    assert "20 rows" in str(caught.value)


def test_a_voltage_that_jumps_about_is_no_sweep():
    shuffled = np.random.default_rng(1).permutation(100)
    text = "V (V),I (A)\n" + "\n".join(f"{i / 50},{2 - i / 50}" for i in shuffled)
    with pytest.raises(UnreadableFile, match="without sweeping"):
        read_sweeps(text.encode(), "a.csv")


def test_limits_each_have_their_sentence():
    for data, says in (
        (b"1" * (limits.MAX_BYTES + 1), "MB"),
        ((b"1 " * 100 + b"\n") * (limits.MAX_CELLS // 100 + 1), "cells"),
        (b"1\n" * 20_000 + b"1," * 900 + b"\n", "cells"),
        (b"1,2," * limits.MAX_COLUMNS + b"\n", "columns"),
        (b"some words\n" * (limits.MAX_TEXT_LINES + 1), "lines of words"),
        (b"0,1\n.1,.9\n.2,.8\n.3,.7\n.4,.6\n.5,.5\n.6,.4\n" * (limits.MAX_SWEEPS + 1), "sweeps"),
    ):
        with pytest.raises(UnreadableFile, match=f"more than .*{says}"):
            read_sweeps(data, "large.csv")


def test_a_part_that_is_no_sweep_does_not_lose_the_others():
    zeros = "\n".join(f"{v:.2f},0" for v in np.arange(0, 1, 0.05))
    [sweep] = read_sweeps(f"V (V),I (A)\n{CURVE}\n\n{zeros}\n".encode(), "a.csv")
    assert len(sweep.voltage) == 50
    assert any("left out" in note and "zero" in note for note in sweep.notes)
