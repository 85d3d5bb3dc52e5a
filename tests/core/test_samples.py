"""The sample sweeps: made again they are the same, and read they are what their README says."""

import importlib.util
import sys
from collections import Counter
from pathlib import Path

import numpy as np
import pytest

from core.metrics import measure
from core.reading import read_sweeps

FOLDER = Path(__file__).parents[2] / "sample_sweeps"
DATA_SUFFIXES = {".csv", ".txt", ".tsv", ".xlsx"}


def _load_maker():
    """The maker is a script in a folder of data, not a module of a package."""
    spec = importlib.util.spec_from_file_location("sample_sweeps_make", FOLDER / "make.py")
    module = importlib.util.module_from_spec(spec)
    sys.modules[spec.name] = module  # dataclasses look their module up
    spec.loader.exec_module(module)
    return module


make = _load_maker()
TRUTHS = (*make.SINGLES, *make.LOT)
FILES = sorted({truth.file for truth in TRUTHS})


def read(file):
    return read_sweeps((FOLDER / file).read_bytes(), file)


def pairs(file):
    """Each sweep of a file beside its truth; both stand in the order of the file."""
    return list(zip(read(file), [truth for truth in TRUTHS if truth.file == file], strict=True))


def density(sweep, truth):
    """Current density [A cm⁻²], with the true area where the file gives a current without one."""
    return sweep.current if sweep.per_area else sweep.current / truth.area


def test_making_the_samples_again_gives_the_same_bytes(tmp_path):
    pytest.importorskip("openpyxl")
    make.write(tmp_path)
    made = {path.relative_to(tmp_path).as_posix(): path.read_bytes() for path in tmp_path.rglob("*") if path.is_file()}
    kept = {
        path.relative_to(FOLDER).as_posix(): path.read_bytes()
        for path in FOLDER.rglob("*")
        if path.suffix in DATA_SUFFIXES
    }
    assert sorted(made) == sorted(kept) == FILES
    assert [name for name in made if made[name] != kept[name]] == []


def test_the_folder_holds_only_data_readme_and_maker():
    others = {
        path.name
        for path in FOLDER.rglob("*")
        if path.is_file() and path.suffix not in DATA_SUFFIXES and "__pycache__" not in path.parts
    }
    assert others == {"README.md", "make.py"}
    assert sum(path.stat().st_size for path in FOLDER.rglob("*") if path.suffix in DATA_SUFFIXES) < 1_500_000


def test_readme_carries_the_truth():
    readme = (FOLDER / "README.md").read_text(encoding="utf-8")
    assert make.truth_table(make.SINGLES, "story") in readme
    assert make.truth_table(make.LOT, "group") in readme


@pytest.mark.parametrize("file", FILES)
def test_every_sweep_reads_as_its_truth_says(file):
    for sweep, truth in pairs(file):
        assert sweep.device == truth.device
        assert sweep.direction == truth.direction
        assert sweep.lit == (truth.suns > 0)
        assert sweep.area == (truth.area if truth.area_in_file else None)
        assert sweep.irradiance == pytest.approx(0.1 * truth.suns, rel=1e-9)
        assert sweep.temperature == pytest.approx(298.15)
        assert np.all(np.diff(sweep.voltage) * (1 if truth.direction == "forward" else -1) > 0)


@pytest.mark.parametrize("file", FILES)
def test_every_point_lies_within_noise_and_digits_of_its_truth(file):
    for sweep, truth in pairs(file):
        clean = truth.current(sweep.voltage)
        if file == "K26.csv":
            limit = make.COMPLIANCE / truth.area
            clean = np.clip(clean, -limit, limit)
        # Half a last digit: 0.1 µA of 0.09 cm² at worst; the voltage is written to 10 µV or better than its step.
        rounding = 1e-7 if truth.suns else 0.0
        noise = np.hypot(truth.floor, truth.relative * clean) + rounding
        # 5.5 standard deviations: one in 26 million points of normal noise lies outside.
        assert np.max(np.abs(density(sweep, truth) - clean) / noise) < 5.5


@pytest.mark.parametrize("file", [file for file in FILES if file != "K26.csv"])
def test_measured_jsc_and_voc_are_those_of_the_truth(file):
    for sweep, truth in pairs(file):
        if not truth.suns:
            continue
        metrics = measure(sweep)
        # Five of its own standard uncertainties, and a little for the bend within a local fit.
        jsc, voc = float(truth.current(0.0)), truth.model.landmarks().voc
        assert metrics.jsc.value == pytest.approx(jsc, abs=5 * metrics.jsc.uncertainty + 5e-6)
        # The barrier carries no current at Voc: that of the cell holds for K21 too.
        assert metrics.voc.value == pytest.approx(voc, abs=5 * metrics.voc.uncertainty + 2e-4)
        assert metrics.jsc.uncertainty < 3e-5 and metrics.voc.uncertainty < 1e-3


def test_quantities_are_kept_as_the_files_give_them():
    assert {sweep.read_as for sweep in read("K07_fwd.csv") + read("K11.csv") + read("K21.csv")} == {"density"}
    assert {sweep.read_as for sweep in read("K15.txt") + read("S02.xlsx") + read("K26.csv")} == {"current"}


def test_scan_rates_are_read_in_volts_per_second():
    rates = {"K07_rev.csv": 0.05, "K11.csv": 0.1, "K15.txt": 0.05, "K33_levels.tsv": 0.05, "rest_trial/R05-3.txt": 0.2}
    for file, rate in rates.items():
        assert [sweep.scan_rate for sweep in read(file)] == pytest.approx([rate] * len(read(file)))


def test_conditions_that_a_file_leaves_out_are_assumed():
    for file in ("K21.csv", "K26.csv"):
        assert all({"temperature", "irradiance"} <= sweep.assumed for sweep in read(file))
    for file in ("K07_fwd.csv", "K11.csv", "K15.txt", "S02.xlsx", "K33_levels.tsv", "rest_trial/R01-1.txt"):
        assert all(not {"temperature", "irradiance"} & sweep.assumed for sweep in read(file))


def test_turned_sign_is_told():
    (sweep,) = read("K15.txt")
    assert any("sign" in note.lower() for note in sweep.notes)


def test_compliance_hides_the_short_circuit_current_of_k26():
    ((sweep, truth),) = pairs("K26.csv")
    stuck = np.isclose(sweep.current, make.COMPLIANCE)
    assert stuck[sweep.voltage < 0.8].all() and not stuck[sweep.voltage > 0.9].any()
    assert truth.area * truth.model.landmarks().jsc > 1.05 * make.COMPLIANCE


def test_k21_bends_the_other_way_beyond_open_circuit():
    """One diode falls ever more steeply; the barrier makes the fall slow down again."""
    for truth in (truth for truth in make.SINGLES if truth.barrier):
        slope = np.diff(truth.current(np.array([0.50, 0.55, 0.85, 0.90, 1.20, 1.25])))[::2]
        assert slope[1] < slope[0] and slope[1] < slope[2] < 0


def test_barrier_leaves_the_open_circuit_voltage_of_k21_alone():
    truth = next(truth for truth in make.SINGLES if truth.barrier)
    assert float(truth.current(truth.model.landmarks().voc)) == pytest.approx(0, abs=1e-7)


def test_k07_shows_hysteresis():
    forward, reverse = (truth.model.landmarks() for truth in make.SINGLES[:2])
    assert reverse.pmp > 1.05 * forward.pmp


def test_light_series_differs_in_photocurrent_alone():
    series = [truth for truth in make.SINGLES if truth.device == "K33"]
    assert [truth.model.photocurrent / truth.suns for truth in series] == pytest.approx([0.022] * 5)
    assert len({(t.model.saturation_current, t.model.ideality, t.model.shunt_resistance) for t in series}) == 1


def test_rest_trial_has_48_pixels_in_four_groups_that_the_header_names():
    groups = Counter()
    for truth in make.LOT:
        (sweep,) = read(truth.file)
        assert {key.lower(): value for key, value in sweep.header.items()}["group"] == truth.group
        groups[truth.group] += 1
    assert groups == {"no rest": 12, "rest 20 s": 12, "rest 40 s": 12, "rest 80 s": 12}


def test_rest_trial_has_three_odd_pixels_that_stand_apart():
    powers = {truth.device: (truth.group, truth.model.landmarks().pmp) for truth in make.LOT}
    medians = {group: np.median([p for g, p in powers.values() if g == group]) for group, _ in powers.values()}
    assert {name for name, (group, power) in powers.items() if power < 0.75 * medians[group]} == set(make.ODD)
