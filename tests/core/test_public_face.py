"""What ``core`` offers, and what it must not know of."""

import ast
import subprocess
import sys
from pathlib import Path

import pytest

import core

ROOT = Path(core.__file__).parent
BROWSER_SIDE = {"app", "dash", "dash_ag_grid", "plotly", "flask", "werkzeug", "waitress"}


def test_core_offers_what_it_promises():
    promised = "OneDiode Landmarks Sweep read_sweeps measure first_guess refine FitSettings Refinement".split()
    assert set(promised) <= set(core.__all__)
    assert len(set(core.__all__)) == len(core.__all__)
    assert [name for name in core.__all__ if not hasattr(core, name)] == []


def test_the_promised_names_take_what_they_promise():
    model = core.OneDiode(
        photocurrent=0.02, saturation_current=1e-12, ideality=1.5, series_resistance=2.0, shunt_resistance=1e3
    )
    assert (model.series_cells, model.temperature) == (1, 298.15)
    assert isinstance(model.landmarks(), core.Landmarks)
    sweep = core.Sweep([0.0, 0.5, 1.0], model.current([0.0, 0.5, 1.0]), per_area=True)
    for name in "per_area area direction lit irradiance temperature scan_rate name notes".split():
        assert hasattr(sweep, name)
    assert sweep.under(core.Conditions(area=0.1)).area == 0.1
    for name in "jsc voc jmp vmp pmp fill_factor efficiency".split():
        assert isinstance(getattr(core.measure(sweep), name), core.Quantity)
    core.FitSettings(model="one diode", weights="uniform", loss="linear", window=None, excluded=(), hold=frozenset())


def test_every_error_that_core_raises_on_purpose_is_offered_and_has_one_root():
    raised = {name for name, value in vars(core.errors).items() if isinstance(value, type)}
    assert raised <= set(core.__all__)
    assert all(issubclass(getattr(core, name), core.SweepbenchError) for name in raised)


def imported_by(path):
    """Top-level names of the modules that a file imports; relative imports stay inside core."""
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            yield from (alias.name.split(".")[0] for alias in node.names)
        elif isinstance(node, ast.ImportFrom) and node.level == 0:
            yield node.module.split(".")[0]


@pytest.mark.parametrize("path", sorted(ROOT.rglob("*.py")), ids=lambda path: str(path.relative_to(ROOT)))
def test_no_module_of_core_imports_the_browser_side(path):
    assert not BROWSER_SIDE & set(imported_by(path))


def test_importing_core_loads_nothing_of_the_browser_side():
    code = "import core, sys; print(*{name.split('.')[0] for name in sys.modules})"
    loaded = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout.split()
    assert "core" in loaded
    assert not BROWSER_SIDE & set(loaded)
