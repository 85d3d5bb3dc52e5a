"""Writes the sample sweeps of the Saltpan line, an invented pilot line, from their truth parameters.

    python sample_sweeps/make.py              the same bytes as in this folder, every time
    python sample_sweeps/make.py --tables     prints the two truth tables of README.md

The spreadsheet needs openpyxl, which comes with the ``test`` extra (``pip install -e ".[test]"``).
Units: V, A cm⁻², Ω cm², cm², K; the files carry what each of the line's benches writes.
"""

from __future__ import annotations

import codecs
import io
import re
import sys
import zipfile
import zlib
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from core.diode import OneDiode

SEED = 4417
PIXEL_AREA = 0.16  # [cm²] of the line's test pixels, K…
LOT_AREA = 0.09  # [cm²] of the pixels in the rest trial, R…
LOT_FOLDER = "rest_trial"
COMPLIANCE = 5e-3  # [A] source-meter limit that somebody left set for K26
LEVELS = (0.1, 0.3, 0.6, 1.0, 1.2)  # [suns] of the K33 series

# Barrier of K21: a counter-diode with a leak beside it, in series with the cell.
BARRIER_SATURATION = 5e-4  # [A cm⁻²]
BARRIER_SLOPE = 0.045  # [V]
BARRIER_LEAK = 60.0  # [Ω cm²]


@dataclass(frozen=True)
class Truth:
    """What is behind one sweep, before noise.

    Attributes
    ----------
    file, device, group : str
    model : OneDiode
    area : float
        True area [cm²]; ``area_in_file`` says whether the file gives it.
    direction : "forward" or "reverse"
    suns : float
        Irradiance in units of 1000 W m⁻²; zero in the dark.
    barrier : bool
        The curve is the model with the counter-diode in series: not a one-diode curve.
    floor, relative : float
        Noise: standard deviation √(floor² + (relative·J)²), floor in A cm⁻².
    story : str
    """

    file: str
    device: str
    model: OneDiode
    area: float = PIXEL_AREA
    direction: str = "forward"
    suns: float = 1.0
    group: str = ""
    barrier: bool = False
    area_in_file: bool = True
    floor: float = 4e-6
    relative: float = 5e-4
    story: str = ""

    def current(self, voltage):
        """Noise-free current density [A cm⁻²] at each voltage [V], shape (n,)."""
        if not self.barrier:
            return self.model.current(voltage)
        # The drop over the barrier fixes the current, the current fixes the voltage: tabulate, turn round.
        drop = np.linspace(-0.25, 0.9, 40_001)
        through = BARRIER_SATURATION * -np.expm1(-drop / BARRIER_SLOPE) + drop / BARRIER_LEAK
        terminal = self.model.voltage(-through) + drop
        return np.interp(voltage, terminal, -through)

    def measured(self, voltage, stream: np.random.Generator):
        """Current density with the noise of the bench [A cm⁻²], shape (n,)."""
        clean = self.current(voltage)
        return clean + np.hypot(self.floor, self.relative * clean) * stream.standard_normal(len(clean))


def cell(photocurrent, diode_voltage, ideality, series, shunt) -> OneDiode:
    """A one-diode cell; photocurrent in mA cm⁻², J0 such that the diode alone reaches ``diode_voltage`` [V].

    J0 is rounded to three digits, so that the table in the README is the truth itself.
    """
    slope = OneDiode(0, 1, ideality, series, shunt).slope_voltage
    saturation = 1e-3 * photocurrent / np.expm1(diode_voltage / slope)
    return OneDiode(1e-3 * photocurrent, float(f"{saturation:.2e}"), ideality, series, shunt)


def _series() -> list[Truth]:
    full = cell(22.0, 1.10, 1.55, 3.4, 5200)
    return [
        Truth(
            "K33_levels.tsv",
            "K33",
            OneDiode(round(suns * full.photocurrent, 7), full.saturation_current, 1.55, 3.4, 5200),
            suns=suns,
            story="light-intensity series: only Jph changes",
        )
        for suns in LEVELS
    ]


def _dark(model: OneDiode, shunt: float) -> OneDiode:
    return OneDiode(0.0, model.saturation_current, model.ideality, model.series_resistance, shunt)


_FORWARD = cell(22.5, 1.105, 1.75, 4.6, 2300)
_REVERSE = cell(22.6, 1.130, 1.45, 3.2, 4200)
_SILICON = cell(36.0, 0.620, 1.10, 0.65, 6000)
_BARRIER = cell(21.4, 1.080, 1.60, 3.0, 1800)

SINGLES: tuple[Truth, ...] = (
    Truth("K07_fwd.csv", "K07", _FORWARD, story="the good cell, from short circuit"),
    Truth("K07_rev.csv", "K07", _REVERSE, direction="reverse", story="the same cell, coming back: hysteresis"),
    Truth("K07_dark.csv", "K07", _dark(_REVERSE, 4e5), suns=0, floor=4e-8, relative=4e-3, story="its dark sweep"),
    Truth("K11.csv", "K11", cell(21.8, 1.06, 1.65, 3.6, 240), direction="reverse", story="shunted"),
    Truth("K15.txt", "K15", cell(22.1, 1.09, 1.60, 14.0, 3100), story="high series resistance"),
    Truth("S02.xlsx", "S02", _SILICON, area=4.0, floor=3e-6, relative=2e-4, story="the silicon reference cell"),
    Truth("S02.xlsx", "S02", _dark(_SILICON, 6000), 4.0, suns=0, floor=4e-8, relative=2e-3, story="its dark sweep"),
    Truth("K21.csv", "K21", _BARRIER, barrier=True, area_in_file=False, story="S-shaped, with the barrier below"),
    Truth("K21.csv", "K21", _BARRIER, PIXEL_AREA, "reverse", barrier=True, area_in_file=False, story="its way back"),
    Truth(
        "K26.csv",
        "K26",
        cell(21.2, 1.07, 1.70, 4.2, 1500),
        area=0.25,
        area_in_file=False,
        floor=2.5e-4,
        relative=6e-3,
        story="noisy, and cut off at the compliance of 5 mA",
    ),
    *_series(),
)

# Rest over the brine tray: group, then medians of Jph [mA cm⁻²], diode voltage [V], n, Rs, Rsh.
GROUPS = (
    ("no rest", 21.3, 1.055, 1.80, 4.0, 1300),
    ("rest 20 s", 21.8, 1.080, 1.68, 3.9, 2100),
    ("rest 40 s", 22.0, 1.105, 1.58, 4.1, 3000),
    ("rest 80 s", 21.9, 1.110, 1.56, 8.5, 2900),
)
ODD = {
    "R02-5": "a scratch: Rsh is 95 Ω cm²",
    "R05-3": "a loose clip: Rs is 24 Ω cm²",
    "R06-2": "half under the mask: Jph is 12.9 mA cm⁻²",
}


def _lot() -> tuple[Truth, ...]:
    stream = np.random.default_rng([SEED, 1])
    pixels = []
    for number, (group, photocurrent, diode_voltage, ideality, series, shunt) in enumerate(GROUPS):
        for index in range(12):
            name = f"R{2 * number + 1 + index // 6:02d}-{index % 6 + 1}"
            scatter = stream.standard_normal(5)
            values = [
                round(photocurrent + 0.20 * scatter[0], 2),
                diode_voltage + 0.006 * scatter[1],
                round(ideality + 0.03 * scatter[2], 3),
                round(series * np.exp(0.09 * scatter[3]), 2),
                round(shunt * np.exp(0.25 * scatter[4]), 0),
            ]
            if name == "R02-5":
                values[4] = 95.0
            if name == "R05-3":
                values[3] = 24.0
            if name == "R06-2":
                values[0] = 12.9
            model = cell(*map(float, values))
            file = f"{LOT_FOLDER}/{name}.txt"
            pixels.append(Truth(file, name, model, LOT_AREA, group=group, story=ODD.get(name, "")))
    return tuple(pixels)


LOT: tuple[Truth, ...] = _lot()


def steps(*stops: float) -> np.ndarray:
    """Voltages from the first stop to the last: start, step, stop, step, stop, … in volts."""
    parts = [np.array([stops[0]])]
    for step, stop in zip(stops[1::2], stops[2::2], strict=True):
        start = parts[-1][-1]
        parts.append(start + step * np.arange(1, round((stop - start) / step) + 1))
    return np.round(np.concatenate(parts), 6)


def lines(rows: Iterable[Sequence[str]], separator: str) -> str:
    return "".join(separator.join(row) + "\n" for row in rows)


def comma_bench(truth: Truth, voltage, stream) -> bytes:
    """First bench: commas, conditions line by line, density; short lines, Unix line ends."""
    dark = truth.suns == 0
    head = [
        ("device", truth.device),
        ("light", "off" if dark else "on"),
        ("irradiance (mW/cm2)", f"{100 * truth.suns:g}"),
        ("area (cm2)", f"{truth.area}"),
        ("temperature (C)", "25"),
        ("scan direction", truth.direction),
        ("scan rate (mV/s)", "50"),
    ]
    pattern = "{:.5e}" if dark else "{:.4f}"
    values = 1e3 * truth.measured(voltage, stream)
    rows = [(f"{v:.4f}", pattern.format(j)) for v, j in zip(voltage, values)]
    return (lines(head, ",") + "\n" + lines([("voltage (V)", "current density (mA/cm2)"), *rows], ",")).encode()


def decimal_comma_bench(truth: Truth, voltage, stream) -> bytes:
    """Second bench: decimal comma, semicolons, Windows-1252, Windows line ends."""
    head = (
        f"Sample: {truth.device}\nAperture area: {truth.area} cm²\nLamp: 100,0 mW/cm²\nPlate temperature: 25,0 °C\n"
        f"Scan direction: {truth.direction}\nScan rate: 100 mV/s\n"
    ).replace("0.16", "0,160")
    rows = [(f"{v:.3f}", f"{1e3 * j:.4f}") for v, j in zip(voltage, truth.measured(voltage, stream))]
    table = "Voltage U (V);Current density J (mA/cm²)\n" + lines(rows, ";").replace(".", ",")
    return (head + table).replace("\n", "\r\n").encode("cp1252")


def long_header_bench(truth: Truth, voltage, stream) -> bytes:
    """Third bench: UTF-16, tabs, a long header; amperes into the cell, so that the photocurrent is negative."""
    head = [
        ("Record of one sweep", "Saltpan line, bench 3"),
        ("Record number", "0412"),
        ("Cell", truth.device),
        ("Substrate", "glass 25 mm × 25 mm"),
        ("Layer sequence", "glass / front contact / electron layer / absorber / hole layer / metal"),
        ("Active area", f"{truth.area} cm²"),
        ("Illumination", "on"),
        ("Irradiance", "1000 W/m²"),
        ("Cell temperature", "25.0 °C"),
        ("Sweep direction", truth.direction),
        ("Sweep rate", "0.05 V/s"),
        ("Settling time", "20 ms"),
        ("Readings averaged", "4"),
        ("Current limit", "20 mA"),
        ("Sign", "current into the cell is positive"),
        ("Preconditioning", "60 s in light at open circuit"),
        ("Air humidity", "31 %"),
        ("Remark", "second metal run, thin fingers"),
    ]
    read_back = voltage + 2e-4 * stream.standard_normal(len(voltage))
    current = -truth.area * truth.measured(read_back, stream)
    rows = [
        (f"{number}", f"{0.2 * number:.1f}", f"{v:.5f}", f"{i:.5e}")
        for number, (v, i) in enumerate(zip(read_back, current), start=1)
    ]
    table = [("Point", "Time (s)", "Voltage (V)", "Current (A)"), *rows]
    text = lines(head, "\t") + "\n" + lines(table, "\t")
    return codecs.BOM_UTF16_LE + text.replace("\n", "\r\n").encode("utf-16-le")


def bare_table(truths: Sequence[Truth], voltage, stream) -> bytes:
    """By hand: one line of column names, forward and reverse under each other, nothing else."""
    there, back = truths
    rows = [(f"{v:.3f}", f"{1e3 * j:.4f}") for v, j in zip(voltage, there.measured(voltage, stream))]
    rows += [(f"{v:.3f}", f"{1e3 * j:.4f}") for v, j in zip(voltage[::-1], back.measured(voltage[::-1], stream))]
    return lines([("V (V)", "J (mA/cm2)"), *rows], ",").encode()


def millivolt_bench(truth: Truth, voltage, stream) -> bytes:
    """Hand-held tester: mV and mA, knows no area, cuts the current off at its limit."""
    head = [("device", truth.device), ("light", "on"), ("current limit (mA)", f"{1e3 * COMPLIANCE:g}")]
    current = np.clip(truth.area * truth.measured(voltage, stream), -COMPLIANCE, COMPLIANCE)
    rows = [(f"{1e3 * v:.0f}", f"{1e3 * i:.4f}") for v, i in zip(voltage, current)]
    return (lines(head, ",") + lines([("Voltage (mV)", "Current (mA)"), *rows], ",")).encode()


def stacked_levels(truths: Sequence[Truth], stream) -> bytes:
    """Filter wheel: one block a light level under a common header, finer steps near open circuit."""
    head = [("Cell", truths[0].device), ("Aperture area (cm2)", f"{PIXEL_AREA}"), ("Temperature (C)", "25")]
    text = lines([*head, ("Scan direction", "forward"), ("Scan rate (mV/s)", "50")], "\t")
    for truth in truths:
        voltage = steps(-0.1, 0.05, 0.7, 0.02, 0.9, 0.01, 1.2)
        rows = [(f"{v:.3f}", f"{1e3 * j:.4f}") for v, j in zip(voltage, truth.measured(voltage, stream))]
        rows = [row for row in rows if float(row[0]) < truth.model.landmarks().voc + 0.1]
        text += "\n" + lines([("Irradiance (suns)", f"{truth.suns:g}")], "\t")
        text += lines([("Voltage (V)", "Current density (mA/cm2)"), *rows], "\t")
    return text.encode()


def lot_bench(truth: Truth, voltage, stream) -> bytes:
    """Row tester of the rest trial: remark lines, then spaces; milliamperes."""
    head = (
        f"# device: {truth.device}\n# group: {truth.group}\n# light: on\n# irradiance: 100 mW/cm2\n"
        f"# area: {truth.area} cm2\n# temperature: 25 C\n# scan rate: 200 mV/s\nvoltage[V] current[mA]\n"
    )
    values = 1e3 * truth.area * truth.measured(voltage, stream)
    return (head + "".join(f"{v:7.4f} {i:9.5f}\n" for v, i in zip(voltage, values))).encode()


def workbook(light: Truth, dark: Truth, stream) -> bytes:
    """Reference bench: a spreadsheet with a sheet a sweep and one of remarks; volts and amperes."""
    import openpyxl  # only the maker needs it; the workbench reads spreadsheets without

    book = openpyxl.Workbook()
    for truth, voltage in ((light, steps(-0.1, 0.01, 0.72)), (dark, steps(-0.3, 0.02, 0.3, 0.01, 0.70))):
        sheet = book.create_sheet("dark" if truth is dark else "light")
        for row in (
            ("Device", truth.device),
            ("Area (cm2)", truth.area),
            ("Temperature (C)", 25),
            ("Light", "off" if truth is dark else "on"),
            ("Irradiance (mW/cm2)", 100 * truth.suns),
            ("Scan direction", truth.direction),
            (),
            ("Voltage (V)", "Current (A)"),
        ):
            sheet.append(row)
        for v, j in zip(voltage, truth.measured(voltage, stream)):
            sheet.append((float(v), float(f"{truth.area * j:.5e}")))
    book.remove(book.worksheets[0])
    remarks = book.create_sheet("remarks")
    remarks.append(("The line's silicon reference cell, measured each Monday before the first coating run.",))
    raw = io.BytesIO()
    book.save(raw)
    return _timeless(raw.getvalue())


def _timeless(data: bytes) -> bytes:
    """The same spreadsheet without clock or library version, stored rather than packed: the same bytes anywhere."""
    out = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(data)) as source, zipfile.ZipFile(out, "w", zipfile.ZIP_STORED) as target:
        for name in sorted(source.namelist(), key=lambda name: (name != "[Content_Types].xml", name)):
            content = source.read(name)
            content = re.sub(rb"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\dZ", b"2000-01-03T08:00:00Z", content)
            content = re.sub(rb"<AppVersion>[^<]*</AppVersion>", b"", content)
            entry = zipfile.ZipInfo(name, date_time=(2000, 1, 3, 8, 0, 0))
            entry.create_system = 0  # otherwise Windows and the rest write different bytes
            target.writestr(entry, content)
    return out.getvalue()


def files() -> dict[str, bytes]:
    """Every data file: name relative to this folder → content."""

    def stream(name: str) -> np.random.Generator:
        # One stream a file, so that a change in one file leaves the others as they are.
        return np.random.default_rng([SEED, zlib.crc32(name.encode())])

    of: dict[str, list[Truth]] = {}
    for truth in SINGLES:
        of.setdefault(truth.file, []).append(truth)
    up = steps(-0.1, 0.01, 1.22)
    plans = {
        "K07_fwd.csv": lambda s: comma_bench(*of["K07_fwd.csv"], up, s),
        "K07_rev.csv": lambda s: comma_bench(*of["K07_rev.csv"], up[::-1], s),
        "K07_dark.csv": lambda s: comma_bench(*of["K07_dark.csv"], steps(-0.3, 0.02, 0.6, 0.01, 1.24), s),
        "K11.csv": lambda s: decimal_comma_bench(*of["K11.csv"], steps(-0.1, 0.05, 0.5, 0.01, 1.14)[::-1], s),
        "K15.txt": lambda s: long_header_bench(*of["K15.txt"], steps(-0.1, 0.01, 1.18), s),
        "S02.xlsx": lambda s: workbook(*of["S02.xlsx"], s),
        "K21.csv": lambda s: bare_table(of["K21.csv"], steps(-0.1, 0.02, 1.3), s),
        "K26.csv": lambda s: millivolt_bench(*of["K26.csv"], steps(-0.1, 0.01, 1.16), s),
        "K33_levels.tsv": lambda s: stacked_levels(of["K33_levels.tsv"], s),
    }
    made = {name: plan(stream(name)) for name, plan in plans.items()}
    lot_steps = steps(-0.1, 0.025, 0.6, 0.0125, 1.2)
    return made | {pixel.file: lot_bench(pixel, lot_steps, stream(pixel.file)) for pixel in LOT}


def truth_table(truths: Sequence[Truth], last: str) -> str:
    """Truth as a Markdown table, as README.md carries it; ``last`` names the last column."""
    text = f"| file | device | sweep | area | Jph | J0 | n | Rs | Rsh | {last} |\n" + "| --- " * 10 + "|\n"
    for truth in truths:
        model, light = truth.model, f"{truth.suns:g} sun" if truth.suns else "dark"
        text += (
            f"| {truth.file} | {truth.device} | {truth.direction}, {light} | {truth.area} "
            f"| {1e3 * model.photocurrent:.4g} | {1e3 * model.saturation_current:.2e} | {model.ideality:g} "
            f"| {model.series_resistance:g} | {model.shunt_resistance:g} "
            f"| {', '.join(filter(None, (truth.group, truth.story)))} |\n"
        )
    return text


def write(folder: Path) -> None:
    """Writes every data file below ``folder``."""
    for name, content in files().items():
        path = folder / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(content)


if __name__ == "__main__":
    if "--tables" in sys.argv[1:]:
        # Bytes, because a Windows console may not know ² or Ω.
        sys.stdout.buffer.write((truth_table(SINGLES, "story") + "\n" + truth_table(LOT, "group")).encode())
    else:
        write(Path(__file__).parent)
