"""Where a report comes from: the files behind it and the programs that made it."""

from __future__ import annotations

import platform
from collections.abc import Sequence
from importlib import metadata

from core.workspace import Workspace

_PACKAGES = ("sweepbench", "numpy", "scipy", "pandas")


def versions() -> dict[str, str]:
    """Name and version of what computed, Python last."""
    found = {}
    for package in _PACKAGES:
        try:
            found[package] = metadata.version(package)
        except metadata.PackageNotFoundError:
            found[package] = "not installed as a package"
    return {**found, "Python": platform.python_version()}


def files_behind(workspace: Workspace, entries: Sequence[str]) -> list[tuple[str, str, list[str]]]:
    """Name, SHA-256 and the names of the sweeps read from it, for each original file."""
    behind: dict[tuple[str, str], list[str]] = {}
    for entry in (workspace.entry(entry_id) for entry_id in entries):
        behind.setdefault((entry.source_name, entry.source or ""), []).append(entry.name)
    return [(name or "no file", sha256, sweeps) for (name, sha256), sweeps in behind.items()]
