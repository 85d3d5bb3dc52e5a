"""Real files, spoilt: each input has a number, and the number alone decides what it is.

Texts, workbooks and workspace files are cut, doubled, spliced and overwritten as bytes; in half of the workbooks
and workspace files the parts inside are spoilt instead and packed again, so that the damage reaches
what lies behind the unpacking. Half of those workspace files agree with their own hashes all the same.
"""

from __future__ import annotations

import hashlib
import io
import json
import random
import re
import tempfile
import zipfile
from contextlib import closing
from copy import deepcopy
from dataclasses import dataclass
from functools import cache
from pathlib import Path

import numpy as np

from core import steps
from core.archive import unpack
from core.checks import check
from core.errors import StoreFailed, UnreadableFile
from core.metrics import measure
from core.reading import read_sweeps
from core.store import Store
from core.sweep import Sweep
from tests.core.workspaces import MODEL, counted_ids, refinement

SAMPLES = Path(__file__).parents[2] / "sample_sweeps"
LONGEST = 200_000  # bytes of a mutated text
NAMES = ("a.csv", "K07_fwd.txt", "", "x.xlsx", "_d", "dark.csv", "1", "fwd 2", "../\x00/\n", "a" * 5000)
FRAGMENTS = (
    b",", b";", b"\t", b"\n\n", b"\r", b" ", b'"', b"nan", b"inf", b"9.9e37", b"1e400", b"1e308", b"-1e308", b"1e-320",
    b"\x00", b"\xff\xfe", b"\xe2\x88\x92", b"V (V)", b"mA/cm2", b"Area: ", b"T = ", b"(", b"]", b":", b"=", b"#", b"dark",
    b"reverse", b"9" * 400, b"1_0", b"Cells in series: 1e9", b"Irradiance: nan", b"\xd9\xa3", b"\xe2\x80\xae", b"\x1b[31m",
    b"((((" * 2000, b"[" * 5000, b"a " * 5000, b"V/" * 3000, b"\n" * 3000, b"Area: 1e-300 cm2\n", b"Temperature: -400 C\n",
)  # fmt: skip
STRANGE = (
    None, True, -1, 0, 1e308, -1e308, 1e-320, 10**400, "", "x" * 10_000, "<b>", "=1+1", "\u202e\x00", [], {}, [[]], {"": None},
    [1, "2"], "1", "light", "inf",
)  # fmt: skip


@dataclass(frozen=True)
class Input:
    """One input: what reads it ("sweeps" or "archive"), its bytes, its file name."""

    reader: str
    data: bytes
    name: str


@dataclass(frozen=True)
class Damage:
    """A file whose rows are damaged below a sound heading, and what it read before."""

    data: bytes
    name: str
    sound: tuple[Sweep, ...]

    def untrue(self, sweep: Sweep) -> int:
        """How many points of a sweep are none of the sound file's, whatever their sign."""
        kin = [one for one in self.sound if one.per_area == sweep.per_area]
        if not kin:
            return sweep.voltage.size
        volts, amps = (np.abs(np.concatenate([getattr(one, axis) for one in kin])) for axis in ("voltage", "current"))
        near = np.isclose(np.abs(sweep.voltage)[:, None], volts, rtol=1e-9, atol=1e-12)
        return int(np.sum(~np.any(near & np.isclose(np.abs(sweep.current)[:, None], amps, rtol=1e-9, atol=1e-15), axis=1)))


def damaged(number: int) -> Damage:
    """The text of this number with its rows cut, doubled and overwritten, but not spliced: each row that is left was there."""
    chance = random.Random(number)
    name, data = chance.choice(_sound_texts())
    lines = data.split(b"\n")
    first = next(n for n, line in enumerate(lines) if re.match(rb"\s*[-+\d]", line))
    head, rows = b"\n".join(lines[:first]) + b"\n", b"\n".join(lines[first : first + 60])
    return Damage(head + _bytes(rows, chance, None), name, tuple(read_sweeps(data, name)))


def rewritten(number: int) -> Damage:
    """A sample sweep in the numbers and headings of some other bench, thousands signs included."""
    chance = random.Random(number)
    name, data = chance.choice(_sound_texts())
    sweep = read_sweeps(data, name)[0]
    delimiter, decimal = chance.choice((";", "\t", "|", ",", "  ")), chance.choice(".,")
    signs = [sign for sign in (",", ".", "'", "’", " ", "\u2009", "\u202f", "\u00a0") if sign != decimal]
    sign, digits = chance.choice(signs), chance.randint(0, 3)
    volts, amps = (("mV", 1e3), ("µA", 1e6)) if chance.random() < 0.7 else (("V", 1.0), ("nA", 1e9))
    if volts[0] == "V":
        digits = max(2, digits)
    unit = amps[0] + ("/cm²" if sweep.per_area else "")
    heading = chance.choice(("V ({}){}J ({})", "Spannung ({}){}Strom ({})", "Voltage ({}){}Current ({})", "")).format(volts[0], delimiter, unit)

    def text(sign: str, decimal: str, delimiter: str, heading: str) -> bytes:
        def write(value: float) -> str:
            return f"{value:,.{digits}f}".translate({ord(","): sign, ord("."): decimal})

        rows = (write(volts[1] * v) + delimiter + write(amps[1] * i) for v, i in zip(sweep.voltage, sweep.current, strict=True))
        return "\n".join([heading, *rows]).encode()

    plain = text("", ".", "\t", heading.replace(delimiter, "\t"))
    return Damage(text(sign, decimal, delimiter, heading), "a.txt", tuple(read_sweeps(plain, "a.txt")))


@cache
def _sound_texts() -> tuple[tuple[str, bytes], ...]:
    """The sample sweeps under their names, and one each with semicolons and decimal commas, and with blanks."""
    paths = [path for path in sorted(SAMPLES.iterdir()) if path.suffix in {".csv", ".txt", ".tsv"}]
    found = [(path.name, path.read_bytes()) for path in paths]
    # Single bytes of UTF-16 are no characters; the same text in UTF-8 loses rows and not its meaning.
    found = [(name, data.decode("utf-16").encode() if data.startswith(b"\xff\xfe") else data) for name, data in found]
    name, data = next(one for one in found if one[0] == "K07_fwd.csv")
    found.append((name, data.replace(b",", b";").replace(b".", b",")))
    found.append((name, data.replace(b",", b"   ").replace(b"\n", b"\r\n")))
    return tuple(found)


def spoilt(number: int, *, sheets: float = 0.03, archives: float = 0.17, short: bool = False) -> Input:
    """The input of this number.

    ``sheets`` and ``archives`` are the shares of workbooks and workspace files; ``short`` texts have few lines.
    """
    chance = random.Random(number)
    share = chance.random()
    if share < sheets:
        data = chance.choice(workbooks())
        data = _repacked(data, chance) if chance.random() < 0.5 else _bytes(data, chance, workbooks())
        return Input("sweeps", data, chance.choice(NAMES))
    if share < sheets + archives:
        data = workspace_file()
        kind = chance.random()
        if kind < 0.3:
            data = _bytes(data, chance, (data,))
        else:
            data = _repacked(data, chance) if kind < 0.5 else _honest(data, chance)
        return Input("archive", data, "")
    originals = _short_texts() if short else texts()
    return Input("sweeps", _bytes(chance.choice(originals), chance, originals)[:LONGEST], chance.choice(NAMES))


@cache
def texts() -> tuple[bytes, ...]:
    """The sample sweeps, and the same as other benches would have written them."""
    paths = [path for path in sorted(SAMPLES.iterdir()) if path.suffix in {".csv", ".txt", ".tsv"}]
    paths += sorted((SAMPLES / "rest_trial").iterdir())[:2]
    found = [path.read_bytes() for path in paths]
    decimals = found[0].replace(b",", b";").replace(b".", b",")
    spaces = found[1].replace(b",", b"   ").replace(b"\n", b"\r\n")
    text = found[2].decode("utf-8")
    return (*found, decimals, spaces, text.encode("utf-16"), text.encode("utf-16-le"), text.encode("latin-1", "replace"))


@cache
def _short_texts() -> tuple[bytes, ...]:
    return tuple(b"\n".join(text.split(b"\n")[:36]) for text in texts())


@cache
def workbooks() -> tuple[bytes, ...]:
    from tests.core.reading import test_spreadsheets as own

    sheet = [["Device", "Q"], [], *own.ROWS[:15]]
    return ((SAMPLES / "S02.xlsx").read_bytes(), own.workbook({"fwd": sheet, "Notes": [["x"]], "rev dark": sheet}))


@cache
def workspace_file() -> bytes:
    """An exported workspace with every kind of record in it, the same bytes each time."""
    ids = counted_ids("fuzz")
    with tempfile.TemporaryDirectory() as folder, closing(Store(Path(folder))) as store:
        workspace = store.current(store.create("fuzz"))

        def commit(step: steps.Step) -> None:
            nonlocal workspace
            workspace = store.commit(workspace.id, step, workspace.revision)

        for name in ("K07_fwd.csv", "K07_dark.csv", "K11.csv"):
            data = (SAMPLES / name).read_bytes()
            sweeps, source = read_sweeps(data, name), store.keep_file(data, name)
            commit(steps.add_sweeps(workspace, sweeps, source=source, source_name=name, new_id=ids))
        first, second, *_ = workspace.in_tray_order()
        commit(steps.record_refinement(workspace, first.id, refinement()))
        commit(steps.set_hold(workspace, first.id, "ideality", True))
        commit(steps.set_model(workspace, second.id, MODEL))
        return store.export(workspace.id)


def keep_promise(one: Input, store: Store) -> str:
    """Read an input as the program would; what came of it: "read" or "refused". Anything else is a failure."""
    return _import(one.data, store) if one.reader == "archive" else _read(one.data, one.name)


def _read(data: bytes, name: str) -> str:
    try:
        sweeps = read_sweeps(data, name)
    except UnreadableFile as error:
        assert str(error).endswith(".") and len(str(error)) < 1500, str(error)
        return "refused"
    assert sweeps
    for sweep in sweeps:
        rising = np.diff(sweep.voltage)
        assert sweep.voltage.size == sweep.current.size >= 3
        assert np.isfinite(sweep.voltage).all() and np.isfinite(sweep.current).all()
        assert np.all(rising >= 0) if sweep.direction == "forward" else np.all(rising <= 0)
        assert sweep.name
    check(sweeps[0])
    return "read"


def _import(data: bytes, store: Store) -> str:
    before = store.workspaces()
    try:
        new = store.import_archive(data)
    except StoreFailed as refusal:
        assert len(str(refusal)) < 600, str(refusal)
        assert store.workspaces() == before
        return "refused"
    workspace = store.current(new)
    for entry in workspace.entries:
        sweep = workspace.sweep(entry)
        assert np.isfinite(sweep.current).all()
        check(sweep)
        measure(sweep)
    # What was let in can be handed on and comes in again.
    assert unpack(store.export(new)).workspace.records() == workspace.records()
    store.delete(new)
    return "read"


def _bytes(data: bytes, chance: random.Random, originals: tuple[bytes, ...] | None) -> bytes:
    for _ in range(chance.randint(1, 8)):
        place, end = sorted((chance.randint(0, len(data)), chance.randint(0, len(data))))
        match chance.randrange(5 if originals is None else 6):
            case 0:
                data = data[:place] + chance.choice(FRAGMENTS) + data[place:]
            case 1:
                data = data[:place] + data[min(end, place + 300) :]
            case 2:
                data = data[:place] + data[place : place + 200] * 2 + data[place + 200 :]
            case 3:
                data = data[:place] + bytes([chance.randrange(256)]) + data[place + 1 :]
            case 4:
                old, new = chance.choice((b",", b".", b"\n", b"\t", b";")), chance.choice(FRAGMENTS)
                data = data.replace(old, new, 500 if len(new) < 100 else 3)
            case 5:
                data = data[:place] + chance.choice(originals)[end:]
    return data


def _members(data: bytes) -> dict[str, bytes]:
    with zipfile.ZipFile(io.BytesIO(data)) as opened:
        return {name: opened.read(name) for name in opened.namelist()}


def _zipped(members: dict[str, bytes]) -> bytes:
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w", zipfile.ZIP_DEFLATED, compresslevel=1) as opened:
        for name, content in members.items():
            opened.writestr(name, content)
    return buffer.getvalue()


def _repacked(data: bytes, chance: random.Random) -> bytes:
    """One part of a zip spoilt as bytes, or left out."""
    members = _members(data)
    name = chance.choice(sorted(members))
    if chance.random() < 0.1:
        del members[name]
    else:
        members[name] = _bytes(members[name], chance, (members[name],))[: 10 * LONGEST]
    return _zipped(members)


def _honest(data: bytes, chance: random.Random) -> bytes:
    """A workspace file whose records or points are spoilt, and whose manifest and hashes agree with that."""
    members = _members(data)
    body = json.loads(members["workspace.json"])
    for _ in range(chance.randint(1, 3)):
        if chance.random() < 0.5:
            _spoil(body, chance)
            continue
        path = chance.choice([name for name in sorted(members) if name.startswith("readings/")])
        reading = json.loads(members.pop(path))
        _spoil(reading, chance)
        text = json.dumps(reading, sort_keys=True, separators=(",", ":"), ensure_ascii=False).encode()
        digest = hashlib.sha256(text).hexdigest()
        members[f"readings/{digest}.json"] = text
        body = json.loads(json.dumps(body).replace(path[len("readings/") : -len(".json")], digest))
    members["workspace.json"] = json.dumps(body).encode()
    manifest = json.loads(members.pop("manifest.json"))
    manifest["members"] = [
        {"path": path, "size": len(content), "sha256": hashlib.sha256(content).hexdigest()}
        for path, content in members.items()
    ]
    if chance.random() < 0.1:
        _spoil(manifest, chance)
    return _zipped({"manifest.json": json.dumps(manifest).encode(), **members})


def _spoil(tree: dict | list, chance: random.Random) -> None:
    """Replace, remove or add one value somewhere in a tree of JSON."""
    while True:
        keys = sorted(tree) if isinstance(tree, dict) else range(len(tree))
        if not keys:
            return
        key = chance.choice(keys)
        below = tree[key]
        if isinstance(below, dict | list) and below and chance.random() < 0.85:
            tree = below
            continue
        match chance.randrange(4):
            case 0 if isinstance(tree, dict):
                del tree[key]
            case 1 if isinstance(tree, dict):
                tree[chance.choice(("more", "id", "", "voltage"))] = deepcopy(chance.choice(STRANGE))
            case 2 if isinstance(below, int | float) and not isinstance(below, bool) and abs(below) < 1e300:
                tree[key] = below * chance.choice((-1, 1e6, 1e-6, 1e200))
            case _:
                tree[key] = deepcopy(chance.choice(STRANGE))  # or the next to be spoilt would be that one
        return
