"""Workspaces as they stand before a test begins, put straight into the store."""

from __future__ import annotations

from app.places import SAMPLE_SWEEPS
from core import steps
from core.diode import OneDiode
from core.reading import read_sweeps
from core.store import Store

# Near the truth of the invented samples, and far enough from it that a drag has somewhere to go.
LIT, LIT_MODEL = "K07_rev.csv", OneDiode(0.0221, 2.5e-14, 1.6, 3.2, 2600)
DARK, DARK_MODEL = "K07_dark.csv", OneDiode(0.0, 2.5e-15, 1.5, 4.0, 3e5)
FEW = (LIT, "K11.csv", "K15.txt")


def add_sample(store: Store, workspace_id: str, name: str, model: OneDiode | None = None) -> list[str]:
    """Sample sweeps of one file in the tray, each with a model if one is given; returns their ids."""
    data, before = (SAMPLE_SWEEPS / name).read_bytes(), store.current(workspace_id)
    step = steps.add_sweeps(before, read_sweeps(data, name), source=store.keep_file(data, name), source_name=name)
    entries = list(step["put"]["entries"])
    after = store.commit(workspace_id, step, seen=before.revision)
    if model is not None:
        for entry in entries:
            after = store.commit(workspace_id, steps.set_model(after, entry, model), seen=after.revision)
    return entries
