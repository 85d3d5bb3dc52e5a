"""The report: one file that asks for nothing, says everything, and shows words from files as words."""

import math
import re
from dataclasses import replace
from datetime import datetime, timedelta, timezone
from html.parser import HTMLParser
from pathlib import Path
from xml.etree import ElementTree

import numpy as np
import pytest

import core
from app.fitted import fits_of
from app.mechanisms import MECHANISMS, loss_names
from app.report import report_page
from app.report.drawing import Drawing, Scale
from app.report.figures import Shown, curves, difference_bars, ladder, rungs_of
from app.report.methods import METHODS
from app.report.numbers import interval_text
from app.report.reporting import reporting_items
from app.telling import Telling
from core import steps
from core.comparing import losses
from core.errors import StepRefused
from core.profile import Interval
from core.refine import FitSettings, refine
from core.shares import difference_shares
from tests.app.benches import (
    AMPERES,
    CELL,
    IN_THE_DARK,
    LIT,
    OTHER,
    REVERSE,
    WITH_ERRORS,
    bench,
)

MADE = datetime(2026, 3, 1, 14, 5, tzinfo=timezone(timedelta(hours=1)))
ENDLESS = {"meta", "br"}
# Every element that may load something, and every attribute that may name it; none of them has a place in a report.
LOADERS = set("script link img iframe object embed audio video source base form image use foreignobject".split())


class Page(HTMLParser):
    """What a browser would make of a report."""

    def __init__(self, page):
        super().__init__()
        self.tags, self.attributes, self.open, self.words, self.ids = [], [], [], [], []
        self.feed(page)
        self.close()
        assert self.open == []

    def handle_starttag(self, tag, attributes):
        self.tags.append(tag)
        self.attributes += attributes
        self.ids += [value for name, value in attributes if name == "id"]
        if tag not in ENDLESS:
            self.open.append(tag)

    def handle_startendtag(self, tag, attributes):
        self.handle_starttag(tag, attributes)
        if tag not in ENDLESS:
            self.open.pop()

    def handle_endtag(self, tag):
        assert self.open.pop() == tag

    def handle_data(self, words):
        if self.open and self.open[-1] != "style":
            self.words.append(words)

    @property
    def text(self):
        return re.sub(r"\s+", " ", " ".join(self.words))


def page_of(workspace, entries, **choices):
    return Page(report_page(workspace, entries, made=MADE, telling=Telling(**choices)))


def refined(*sweeps, gap=1.6):
    workspace, entries = bench(*sweeps)
    for entry in entries:
        sweep = workspace.sweep(entry)
        start = replace(CELL if sweep.per_area else CELL.scaled(0.1), photocurrent=CELL.photocurrent if sweep.lit else 0.0)
        workspace = steps.apply(workspace, steps.record_refinement(workspace, entry, refine(sweep, start)))
    if gap:
        workspace = steps.apply(workspace, steps.set_band_gap(workspace, entries[0], gap))
    return workspace, entries


@pytest.fixture(scope="module")
def full():
    """Three devices: one with both directions and a dark sweep, one without an area."""
    workspace, entries = refined(LIT, REVERSE, IN_THE_DARK, AMPERES, OTHER)
    return workspace, entries, page_of(workspace, entries)


def test_nothing_is_asked_of_any_host_and_nothing_runs(full):
    page = full[2]
    assert set(page.tags) & LOADERS == set()
    named = dict(page.attributes)
    assert named["content"] and not any(name.startswith("on") or name in ("src", "srcset", "style") for name, _ in page.attributes)
    assert all(value.startswith("#") for name, value in page.attributes if name in ("href", "xlink:href"))
    urls = [value for _, value in page.attributes if "url(" in (value or "")]
    assert urls and all(re.fullmatch(r"url\(#[\w-]+\)", url) for url in urls)
    policy = next(value for name, value in page.attributes if name == "content" and "default-src" in value)
    assert policy.startswith("default-src 'none';") and "unsafe" not in policy


def test_the_style_sheet_loads_nothing_either():
    sheet = (Path(__file__).parents[2] / "app" / "report" / "report.css").read_text(encoding="utf-8")
    assert "url(" not in sheet and "@import" not in sheet and "@page" in sheet and "break-inside: avoid" in sheet


def test_what_is_pointed_at_inside_the_page_is_there_once(full):
    page = full[2]
    assert len(page.ids) == len(set(page.ids))
    inside = [value for _, value in page.attributes if value and re.match(r"(url\()?#", value)]
    wanted = {re.sub(r"url\(#|\)|^#", "", value) for value in inside if not re.fullmatch(r"#[0-9a-fA-F]{3,6}", value)}
    assert wanted and wanted <= set(page.ids)


def test_words_from_files_stay_words():
    hostile = '<script>alert(1)</script>"\'&<img src=x onerror=alert(1)>'
    workspace, (entry, other) = refined(replace(LIT, header={"lamp type": hostile, "filter AM1.5": hostile}, notes=(hostile,)), REVERSE)
    (device,) = workspace.devices.values()
    workspace = replace(
        workspace,
        name=hostile,
        devices={device.id: replace(device, name=hostile, group=hostile)},
        entries={e.id: replace(e, name=hostile + e.id, source_name=hostile) for e in workspace.entries.values()},
        derived={},
    )
    page = page_of(workspace, [entry], pair=(entry, other))
    assert set(page.tags) & LOADERS == set()
    assert "onerror" not in {name for name, _ in page.attributes}
    assert page.text.count(hostile) > 10


def test_it_says_when_it_was_made_and_by_what(full):
    text = full[2].text
    assert "Made 01 March 2026, 14:05 UTC+0100" in text
    for name in ("sweepbench", "numpy", "scipy", "pandas", "Python"):
        assert re.search(rf"{name} \d+\.\d+", text)


def test_files_are_named_with_their_hash():
    workspace, (entry,) = bench(LIT)
    workspace = replace(workspace, entries={entry: replace(workspace.entries[entry], source="ab" * 32, source_name="bench 3/a.csv")})
    text = page_of(workspace, [entry]).text
    assert "bench 3/a.csv" in text and "ab" * 32 in text


def test_numbers_stand_with_their_uncertainties(full):
    workspace, entries, page = full
    found = workspace.refined(entries[0])
    assert re.search(r"22\.\d+\(\d\)", page.text)  # Jsc
    interval = interval_text(fits_of(workspace, entries[0])[0].intervals["ideality"])
    assert interval in page.text and " … " in interval
    assert "fit noise only" in page.text
    assert f"points used {found.points}" in page.text and "uniform weights" in page.text


@pytest.mark.parametrize(
    ("interval", "words"),
    [
        (Interval(1.58012, 1.61988), "1.580 … 1.620"),
        (Interval(1.2812e-10, 1.5734e-10), "1.28 … 1.57·10⁻¹⁰"),
        (Interval(4100.0, math.inf, True, False), "> 4100"),
        (Interval(0.0, 0.52, False, True), "< 0.52"),
        (Interval(0.0, math.inf, False, False), "not determined"),
    ],
)
def test_an_interval_shows_where_it_is_open(interval, words):
    assert interval_text(interval) == words


def test_a_direction_is_never_shown_without_the_other():
    workspace, (_, reverse, dark) = refined(LIT, REVERSE, IN_THE_DARK)
    text = page_of(workspace, [reverse]).text
    assert "2 sweeps" in text and "hysteresis" in text
    assert "3 sweeps" in page_of(workspace, [reverse, dark]).text


def test_assumed_conditions_are_marked_until_they_are_confirmed():
    workspace, (entry,) = bench(LIT)
    before = page_of(workspace, [entry])
    everything = ["temperature", "irradiance", "series_cells"]
    workspace = steps.apply(workspace, steps.confirm_conditions(workspace, entry, everything))
    after = page_of(workspace, [entry])

    def marked(page):
        return page.attributes.count(("class", "assumed"))

    assert marked(before) == 5 and marked(after) == 0  # three conditions, two of them in the reporting table too


def test_losses_are_told_from_the_given_gap_or_from_an_assumed_one():
    given, (entry,) = refined(LIT, gap=1.6)
    text = page_of(given, [entry]).text
    assert "a band gap of 1.6 eV" in text and "External radiative efficiency" in text
    assumed, (entry,) = refined(LIT, gap=None)
    text = page_of(assumed, [entry]).text
    assert "an assumed band gap" in text and "External radiative efficiency implied" not in text


def test_two_devices_are_set_against_each_other_unasked_and_more_only_on_demand(full):
    workspace, entries, three = full
    assert "Why the difference" not in three.text
    two = page_of(workspace, [entries[0], entries[4]])
    assert "Why the difference" in two.text and "pair" in two.ids
    chosen = page_of(workspace, entries, pair=(entries[0], entries[1]))
    assert "A forward and A reverse" in chosen.text and "Why the difference" in chosen.text


@pytest.mark.parametrize(("other", "reason"), [(AMPERES, "has no area"), (IN_THE_DARK, "dark sweep")])
def test_a_pair_that_cannot_be_compared_says_why(other, reason):
    workspace, (a, b) = refined(LIT, other)
    page = page_of(workspace, [a, b], pair=(a, b))
    assert reason in page.text and "Why the difference" not in page.text


def test_a_sweep_that_is_gone_is_refused_with_a_sentence():
    workspace, (entry,) = bench(LIT)
    with pytest.raises(StepRefused):
        report_page(workspace, [entry, "gone"], made=MADE)


def test_the_reporting_table_reads_the_header_and_marks_what_is_missing():
    header = {
        "Lamp type": "xenon, class AAA", "Lamp": "100 mW/cm2", "Spectral filter": "AM1.5G", "Reference cell": "Si, KG5",
        "Settling time": "20 ms", "Preconditioning": "60 s in light", "Aperture area": "0.1 cm2", "Steady-state power": "19.8 %",
    }  # fmt: skip
    workspace, entries = bench(replace(LIT, header=header, scan_rate=0.05, assumed=frozenset()), OTHER)
    items = {item.name: item for item in reporting_items(workspace, entries[:1])}
    said = {name: item.values[0][0] for name, item in items.items()}
    assert said["light source"] == "Lamp type: xenon, class AAA"
    assert said["spectrum"] == "Spectral filter: AM1.5G"
    assert said["how irradiance was set"] == "Reference cell: Si, KG5"
    assert said["delay"] == "Settling time: 20 ms"
    assert said["preconditioning"] == "Preconditioning: 60 s in light"
    assert said["area"] == "0.1 cm², aperture area"
    assert said["stabilised output"] == "Steady-state power: 19.8 %"
    assert (said["scan rate"], said["temperature"], said["irradiance"]) == ("50 mV s⁻¹", "25 °C", "100 mW cm⁻²")
    assert said["number of devices"] == "1 in this report, 2 in the workspace"
    assert not any(item.missing or item.assumed for item in items.values())
    both = {item.name: item for item in reporting_items(workspace, entries)}
    assert both["delay"].missing and both["delay"].values[1] == ("missing", ("other",))
    assert both["temperature"].assumed and "not said" in both["area"].values[1][0]


def test_what_the_user_states_fills_the_table_where_the_files_are_silent():
    workspace, entries = bench(replace(LIT, header={"Settling time": "20 ms"}), OTHER)
    for name, text in (("delay", "5 ms"), ("light_source", "xenon, class AAA"), ("area_kind", "aperture")):
        workspace = steps.apply(workspace, steps.state(workspace, name, text))
    items = {item.name: item for item in reporting_items(workspace, entries)}
    assert [words for words, _ in items["delay"].values] == ["Settling time: 20 ms", "5 ms"]
    assert items["light source"].values[0][0] == "xenon, class AAA" and not items["light source"].missing
    assert items["area"].values[0][0].endswith("aperture area") and items["spectrum"].missing
    assert items["delay"].stated == {"5 ms"} and items["light source"].stated == {"xenon, class AAA"}
    assert page_of(workspace, entries).text.count("stated by the user") == 3  # light source, kind of area, and one delay


def test_every_source_is_cited_as_core_cites_it():
    folder = Path(core.__file__).parent
    cited = " ".join(re.sub(r"\s+", " ", path.read_text(encoding="utf-8")) for path in folder.glob("*.py"))
    assert [source for method in METHODS for source in method.sources if source not in cited] == []


def test_methods_are_those_that_were_used(full):
    assert "Detailed-balance limit" in full[2].text and "Refining" in full[2].text
    workspace, (dark,) = bench(IN_THE_DARK)
    text = page_of(workspace, [dark]).text
    assert "Detailed-balance limit" not in text and "Robust loss" not in text and "Figures of merit" in text


def test_weights_from_the_file_are_named_in_settings_and_caption():
    workspace, (entry,) = bench(WITH_ERRORS)
    found = refine(WITH_ERRORS, CELL, FitSettings(weights="from the file"))
    workspace = steps.apply(workspace, steps.record_refinement(workspace, entry, found))
    text = page_of(workspace, [entry]).text
    assert "weights from the file" in text and "χ² per degree of freedom" in text
    assert "the standard deviations in the file" in text


def test_pictures_are_sound_svg_with_text_as_text():
    shown = [Shown("one <b>", LIT, CELL), Shown("two", REVERSE, None)]
    picture = ElementTree.fromstring(curves(shown, "p"))
    assert [e.text for e in picture.iter("{http://www.w3.org/2000/svg}text")][:2] == ["one <b>", "two"]
    marks = [e for e in picture.iter("{http://www.w3.org/2000/svg}circle") if e.get("r") == "1.9"]
    assert len(marks) == len(LIT.voltage) + len(REVERSE.voltage)


def bars_of(picture, hue):
    """Left edge and width of the bars in a colour."""
    rects = ElementTree.fromstring(picture).iter("{http://www.w3.org/2000/svg}rect")
    return [(float(r.get("x")), float(r.get("width"))) for r in rects if r.get("fill") == hue]


def test_rungs_of_the_ladder_have_the_lengths_of_the_losses_and_meet():
    shares = losses(LIT, CELL, 1.6)
    order = sorted(shares.by_mechanism, key=shares.by_mechanism.get)
    picture = ladder(1e3 * shares.start, 1e3 * shares.end, rungs_of(shares, loss_names(False)), "l", limit_name="limit", device_name="device")
    hue = {m.parameter: m.hue for m in MECHANISMS}
    rungs = [bars_of(picture, hue[name])[0] for name in order]
    lengths = np.array([-shares.by_mechanism[name] for name in order])
    widths = np.array([width for _, width in rungs])
    np.testing.assert_allclose(widths / widths.sum(), lengths / lengths.sum(), atol=1e-3)
    for (left, _), (below, width) in zip(rungs, rungs[1:], strict=False):
        assert below + width == pytest.approx(left, abs=0.03)
    assert list(lengths) == sorted(lengths, reverse=True)


def test_bars_of_a_difference_point_to_the_side_of_their_sign():
    shares = difference_shares(CELL, replace(CELL, series_resistance=8.0, photocurrent=0.023))
    picture = difference_bars(shares, loss_names(False), "d", "title")
    hue = {m.parameter: m.hue for m in MECHANISMS}
    (gain_left, gain), = bars_of(picture, hue["photocurrent"])
    (loss_left, loss), = bars_of(picture, hue["series_resistance"])
    assert loss_left + loss == pytest.approx(gain_left, abs=0.02) and gain > 0 and loss > 0


def test_each_mechanism_keeps_its_hatch():
    shares = losses(LIT, CELL, 1.6)
    picture = ladder(1e3 * shares.start, 1e3 * shares.end, rungs_of(shares, loss_names(False)), "l", limit_name="limit", device_name="device")
    names = re.findall(r'<pattern id="l-(\w+)"', picture)
    assert len(names) == len({m.hatch for m in MECHANISMS if m.hatch})


@pytest.mark.parametrize(
    ("scale", "ticks"),
    [
        (Scale(-0.1, 1.2, 0, 100), [0, 0.2, 0.4, 0.6, 0.8, 1, 1.2]),
        (Scale(0, 5e-3, 0, 100), [0, 1e-3, 2e-3, 3e-3, 4e-3, 5e-3]),
        (Scale(2e-7, 40, 0, 100, log=True), [1e-6, 1e-4, 1e-2, 1]),
    ],
)
def test_ticks_are_round(scale, ticks):
    assert scale.ticks(7) == pytest.approx(ticks)


def test_a_line_breaks_where_there_is_no_value():
    drawing = Drawing(10, 10, "t", "n")
    drawing.curve(np.array([0.0, 1, 2, 3, 4]), np.array([0.0, 1, math.nan, 3, 4]))
    assert 'd="M0 0L1 1M3 3L4 4"' in drawing.svg()


@pytest.mark.parametrize("sweep", [
    replace(LIT, current=-np.abs(LIT.current)),
    replace(LIT, voltage=LIT.voltage[:3], current=LIT.current[:3]),
    replace(LIT, current=np.full_like(LIT.current, 1e-3)),
    replace(IN_THE_DARK, current=np.zeros_like(IN_THE_DARK.current)),
], ids=["no power", "three points", "flat", "dead"])  # fmt: skip
def test_a_poor_sweep_gets_a_report_all_the_same(sweep):
    workspace, (entry,) = bench(sweep)
    assert "Checks" in page_of(workspace, [entry]).text
