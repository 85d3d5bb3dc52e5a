"""Files in: a mixed drop loses nothing and says one sentence for each file that it cannot take."""

import struct
import zlib
from pathlib import Path

import numpy as np

from core.diode import OneDiode
from tests.browser.tab import Tab


def write_sweep(path: Path, photocurrent: float = 0.021, low: float = -0.1) -> Path:
    voltage = np.arange(low, 1.13, 0.02)
    current = OneDiode(photocurrent, 2e-13, 1.7, 4.0, 1500).current(voltage) * 1e3
    rows = (f"{v:.4f},{j:.5f}" for v, j in zip(voltage, current, strict=True))
    path.parent.mkdir(exist_ok=True)
    path.write_text("Voltage (V),Current density (mA/cm2)\n" + "\n".join(rows) + "\n", encoding="utf-8")
    return path


def write_picture(path: Path) -> Path:
    """A PNG of one white pixel."""
    chunks = (
        (b"IHDR", struct.pack(">IIBBBBB", 1, 1, 8, 0, 0, 0, 0)),
        (b"IDAT", zlib.compress(b"\0\xff")),
        (b"IEND", b""),
    )
    body = b"".join(
        struct.pack(">I", len(data)) + kind + data + struct.pack(">I", zlib.crc32(kind + data)) for kind, data in chunks
    )
    path.write_bytes(b"\x89PNG\r\n\x1a\n" + body)
    return path


def write_text(path: Path, text: str) -> Path:
    path.write_text(text, encoding="utf-8")
    return path


def test_a_mixed_drop_loads_the_good_files_and_says_one_sentence_for_each_other(tab: Tab, files: Path):
    good = write_sweep(files / "good.csv")
    bad = {
        "empty.csv": write_text(files / "empty.csv", ""),
        "picture.png": write_picture(files / "picture.png"),
        "list.txt": write_text(files / "list.txt", "Take along:\nmask, gloves,\nand the brine tray.\n"),
    }
    never = write_sweep(files / "never.csv", 0.019, low=0.3)
    folder = files / "Monday"
    write_sweep(folder / "first.csv", 0.0215)
    write_sweep(folder / "second.csv", 0.0225)

    tab.drop(good, *bad.values(), never, folder)
    tab.until("rows", 4)
    tab.settle()

    said = tab.sentences()
    assert len(said) == len(bad)
    for name in bad:
        (sentence,) = [one for one in said if name in one]
        assert sentence.endswith(".") and "\n" not in sentence and len(sentence) > len(name) + 25
        assert not any(word in sentence for word in ("Traceback", "Error", "Exception"))
    loaded = {entry.source_name: entry for entry in tab.stored.entries.values()}
    assert set(loaded) == {"good.csv", "never.csv", "Monday/first.csv", "Monday/second.csv"}
    for entry in loaded.values():
        original = tab.store.file(entry.source)
        assert original == (files / entry.source_name).read_bytes()

    # A sweep that does not reach V = 0 is in the tray, marked, with a sentence and without a number.
    row = tab.find(f"#sweep-{loaded['never.csv'].id}")
    assert row.locator(".flag").inner_text() == "!"
    tab.choose(loaded["never.csv"].id)
    assert tab.metric("jsc", "measured") == "–"
    assert "V = 0" in tab.find("[data-metric=jsc]").get_attribute("title")
    assert sum("V = 0" in words for words in tab.find("#findings summary").all_inner_texts()) == 1

    tab.button("Dismiss").first.click()
    assert len(tab.sentences()) == len(bad) - 1

    # The same file again, this time by the picker.
    with tab.page.expect_file_chooser() as choosing:
        tab.button("add files").click()
    revision = tab.stored.revision
    more = write_sweep(files / "more.csv", 0.0205)
    choosing.value.set_files([good, more])
    tab.until("rows", 5)
    tab.settle()
    assert tab.sentences() == ["good.csv is in the tray already."]
    assert tab.stored.revision == revision + 1
    assert tab.stored.entries[tab.entry].source_name == "more.csv"

    write_sweep(files / "Tuesday" / "third.csv", 0.0195)
    with tab.page.expect_file_chooser() as choosing:
        tab.button("add folder").click()
    choosing.value.set_files(files / "Tuesday")
    tab.until("rows", 6)
    tab.settle()
    assert tab.stored.entries[tab.entry].source_name == "Tuesday/third.csv"


def test_names_from_files_show_as_they_are_and_run_nothing(tab: Tab, files: Path):
    wicked = "x <b>bold<b> <img src=x onerror=window.ran=1> %{x} y"
    write_sweep(files / f"{wicked}.csv")
    other = write_sweep(files / "other.csv", 0.02)
    tab.drop(files / f"{wicked}.csv", other)
    tab.until("rows", 2)
    tab.settle()
    assert wicked in tab.find("#tray-list .device-name").all_text_contents()
    for entry in tab.stored.in_tray_order():
        tab.choose(entry.id)
    assert tab.find("#tray-list b, #tray-list img, #bench-title b, #plot img").count() == 0
    assert tab.page.evaluate("window.ran") is None
