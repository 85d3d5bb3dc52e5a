"""A file whose numbers bear no unit, read again in the unit that the user knows."""

import numpy as np
import pytest

from core import steps
from core.errors import ConditionRefused
from core.reading import read_sweeps
from core.refine import refine
from core.sweep import CURRENT_UNITS, Sweep
from core.workspace import Workspace
from tests.core.workspaces import MODEL

VOLTAGE = np.linspace(-0.1, 1.1, 25)
NUMBERS = 1e3 * MODEL.current(VOLTAGE)  # 21 or so: mA cm⁻², or mA, or µA of something small


def file_of(heading, area=""):
    rows = "\n".join(f"{v:.4f}\t{j:.8f}" for v, j in zip(VOLTAGE, NUMBERS, strict=True))
    return f"{area}{heading}{rows}\n".encode()


def loaded(content, name="bare.txt"):
    empty = Workspace("w", "test")
    return steps.apply(empty, steps.add_sweeps(empty, read_sweeps(content, name), source="0" * 64, source_name=name))


@pytest.mark.parametrize("area", ["", "Area: 0.16 cm2\n"])
@pytest.mark.parametrize("unit", CURRENT_UNITS)
def test_it_is_the_sweep_that_a_heading_with_this_unit_would_have_given(unit, area):
    workspace = loaded(file_of("", area))
    (entry,) = workspace.entries
    assert workspace.entry(entry).reading.read_unit in CURRENT_UNITS and "units" in workspace.assumed(entry)
    step = steps.set_current_unit(workspace, entry, unit)
    changed = steps.apply(workspace, step)
    quantity = "Current density" if CURRENT_UNITS[unit][1] == "density" else "Current"
    (told,) = read_sweeps(file_of(f"Voltage (V)\t{quantity} ({unit})\n", area), "told.txt")
    sweep = changed.sweep(entry)
    np.testing.assert_allclose(sweep.current, told.current, rtol=1e-12)
    assert (sweep.per_area, sweep.read_as, sweep.area) == (told.per_area, told.read_as, told.area)
    assert changed.conditions(entry).file_area == told.conditions.file_area
    assert "units" not in changed.assumed(entry)
    assert any(unit in note for note in sweep.notes)
    undone = steps.apply(changed, steps.inverse(workspace, step))
    assert undone.records() == workspace.records()
    np.testing.assert_array_equal(undone.sweep(entry).current, workspace.sweep(entry).current)


def test_changing_it_twice_leaves_no_trace_of_the_first():
    (sweep,) = read_sweeps(file_of(""), "bare.txt")
    once, twice = sweep.with_unit("A"), sweep.with_unit("µA").with_unit("A")
    np.testing.assert_allclose(twice.current, once.current, rtol=1e-15)
    assert (twice.notes, twice.per_area, twice.read_as) == (once.notes, once.per_area, once.read_as)


def test_all_sweeps_of_the_file_follow_and_their_models_go():
    content = file_of("") + b"\n" + file_of("")
    workspace = loaded(content)
    first, second = workspace.entries
    other = steps.add_sweeps(workspace, read_sweeps(file_of(""), "other.txt"), source="1" * 64, source_name="other.txt")
    workspace = steps.apply(workspace, other)
    (third,) = workspace.entries.keys() - {first, second}
    for entry in (first, third):
        workspace = steps.apply(workspace, steps.record_refinement(workspace, entry, refine(workspace.sweep(entry))))
    changed = steps.apply(workspace, steps.set_current_unit(workspace, first, "µA"))
    assert changed.sweep(first).current.max() == pytest.approx(NUMBERS.max() * 1e-6)
    assert changed.sweep(second).current.max() == pytest.approx(NUMBERS.max() * 1e-6)
    assert changed.sweep(third).current.max() == workspace.sweep(third).current.max()
    assert changed.fit(first).model is None and changed.fit(third).model is not None


def test_a_file_that_says_its_unit_is_read_in_that_unit():
    workspace = loaded(file_of("Voltage (V)\tCurrent (mA)\n"))
    (entry,) = workspace.entries
    with pytest.raises(ConditionRefused, match=r"says in which unit.*\.$"):
        steps.set_current_unit(workspace, entry, "A")
    (bare,) = read_sweeps(file_of(""), "bare.txt")
    with pytest.raises(ConditionRefused, match=r"“kA”\.$"):
        bare.with_unit("kA")


def test_the_unit_is_kept_with_the_reading():
    (sweep,) = read_sweeps(file_of(""), "bare.txt")
    assert Sweep.from_dict(sweep.to_dict()).read_unit == sweep.read_unit != ""
    older = sweep.to_dict()
    del older["read_unit"]
    assert Sweep.from_dict(older).read_unit == ""
