"""The files' way into the server: drops come in as batches, originals and exports go out.

Every answer is JSON, or the file that was asked for; errors are JSON {"sentence": …}.
"""

from __future__ import annotations

import hashlib
import io
import re
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any
from urllib.parse import unquote

import flask
from werkzeug.datastructures import FileStorage

from core import steps
from core.errors import StaleRevision, StepRefused, SweepbenchError
from core.first_guess import first_guess
from core.reading import read_sweeps
from core.store import Store
from core.sweep import Sweep
from core.workspace import Workspace

from . import exports
from .answers import sentence_for, speak_plainly
from .places import SAMPLE_SWEEPS
from .telling import telling_of

MOST_FILES_A_REQUEST = 100
TRIES = 50  # at adding to a workspace that others change meanwhile

SAMPLE_SUFFIXES = frozenset({".csv", ".dat", ".ods", ".tsv", ".txt", ".xls", ".xlsx"})


@dataclass(frozen=True)
class Dropped:
    """A file as it came: its name, with the folders of the drop before it, and its bytes."""

    name: str
    data: bytes

    @cached_property
    def digest(self) -> str:
        return hashlib.sha256(self.data).hexdigest()


_ReadFile = tuple[Dropped, list[Sweep]]


def register(server: flask.Flask, store: Store) -> None:
    """Put the routes of files on a server."""
    routes = flask.Blueprint("files", __name__, url_prefix="/files")
    speak_plainly(routes)

    @routes.post("/<workspace_id>")
    def take_drop(workspace_id: str) -> flask.Response:
        return flask.jsonify(add_files(store, workspace_id, _dropped(flask.request.files.getlist("files"))))

    @routes.post("/samples/<workspace_id>")
    def open_samples(workspace_id: str) -> flask.Response:
        return flask.jsonify(add_files(store, workspace_id, samples()))

    @routes.get("/originals/<digest>")
    def hand_out_original(digest: str) -> flask.Response:
        return _download(store.file(digest), flask.request.args.get("name", "") or digest[:12])

    @routes.get("/export/<workspace_id>")
    def hand_out_workspace(workspace_id: str) -> flask.Response:
        name = store.current(workspace_id).name or "workspace"
        return _download(store.export(workspace_id), f"{name}.sweepbench.zip", "application/zip")

    @routes.post("/import")
    def take_workspace() -> flask.Response:
        given = list(_dropped(flask.request.files.getlist("files")))
        if len(given) != 1:
            raise StepRefused("Choose one exported workspace file to open.")
        return flask.jsonify(workspace=store.import_archive(given[0].data))

    @routes.get("/report/<workspace_id>")
    def hand_out_report(workspace_id: str) -> flask.Response:
        workspace = store.current(workspace_id)
        return _export(exports.report_file(workspace, _chosen(workspace), telling_of(flask.request.args)))

    @routes.get("/table/<workspace_id>.<kind>")
    def hand_out_table(workspace_id: str, kind: str) -> flask.Response:
        workspace = store.current(workspace_id)
        table = flask.request.args.get("table", "")
        return _export(exports.table_file(workspace, _chosen(workspace), kind, table, telling_of(flask.request.args)))

    @routes.get("/parameters/<workspace_id>.json")
    def hand_out_parameters(workspace_id: str) -> flask.Response:
        workspace = store.current(workspace_id)
        return _export(exports.parameters_file(workspace, _chosen(workspace)))

    @routes.get("/points/<workspace_id>/<entry>.csv")
    def hand_out_points(workspace_id: str, entry: str) -> flask.Response:
        return _export(exports.points_file(store.current(workspace_id), entry))

    server.register_blueprint(routes)


def add_files(store: Store, workspace_id: str, files: Iterable[Dropped]) -> dict[str, Any]:
    """Read files and add their sweeps to a workspace, all in one step.

    A file that cannot be read is refused by itself. One that is in the workspace already, byte
    for byte, is left out.

    Returns
    -------
    dict
        ``revision``; ``added``, a list of {file, entries}; ``refused``, a list of {file, sentence};
        ``already``, a list of names.
    """
    new, repeated = _without_repeats(files, _sources(store.current(workspace_id)))
    read, unreadable = _read(new)
    for dropped, _ in read:
        store.keep_file(dropped.data, dropped.name)

    revision, batch = _commit(store, workspace_id, read)
    return {
        "revision": revision,
        "added": batch.added,
        "refused": unreadable + batch.refused,
        "already": repeated + batch.already,
        "show": batch.show,
    }


def samples() -> Iterator[Dropped]:
    """The sample sweeps that ship with the program."""
    for path in sorted(SAMPLE_SWEEPS.rglob("*")):
        if path.is_file() and path.suffix.lower() in SAMPLE_SUFFIXES:
            yield Dropped(path.relative_to(SAMPLE_SWEEPS).as_posix(), path.read_bytes())


def safe_name(name: str) -> str:
    """A file name that every system takes, without folders."""
    name = re.split(r"[/\\]", name)[-1]
    name = re.sub(r'[\x00-\x1f\x7f<>:"|?*]', "_", name).lstrip(". ")
    name = name[:80] + name[80:][-40:]  # the end, because it tells the kind of file
    name = name.rstrip(". ") or "file"
    reserved = re.fullmatch(r"(?i)(con|prn|aux|nul|com\d|lpt\d)(\..*)?", name)
    return f"_{name}" if reserved else name


def _dropped(uploads: list[FileStorage]) -> Iterator[Dropped]:
    if not uploads:
        raise StepRefused("No file arrived. Drop the files once more.")
    if len(uploads) > MOST_FILES_A_REQUEST:
        raise StepRefused(f"More than {MOST_FILES_A_REQUEST} files arrived at once. Drop fewer at a time.")
    return (Dropped(_shown_name(upload.filename or ""), upload.read()) for upload in uploads)


def _shown_name(given: str) -> str:
    """The name as the user knows it; percent-encoding carries any letter and the folders through a form."""
    parts = re.split(r"[/\\]", unquote(given))
    parts = ["".join(c for c in part if c.isprintable()).strip() for part in parts]
    return "/".join(part for part in parts if part not in ("", ".", ".."))[-250:] or "unnamed file"


def _read(files: Iterable[Dropped]) -> tuple[list[_ReadFile], list[dict[str, str]]]:
    """What reading gave, and the files that could not be read, with a sentence each."""
    read, refused = [], []
    for dropped in files:
        try:
            read.append((dropped, read_sweeps(dropped.data, dropped.name)))
        except Exception as error:  # one bad file, even one that meets a bug, must not take the others along
            refused.append({"file": dropped.name, "sentence": sentence_for(error)})
    return read, refused


def _without_repeats(files: Iterable[Dropped], known: frozenset[str]) -> tuple[list[Dropped], list[str]]:
    """Files whose bytes are new, each once, and the names of the others."""
    new: dict[str, Dropped] = {}
    already = []
    for dropped in files:
        if dropped.digest in known or dropped.digest in new:
            already.append(dropped.name)
        else:
            new[dropped.digest] = dropped
    return list(new.values()), already


def _sources(workspace: Workspace) -> frozenset[str]:
    return frozenset(entry.source for entry in workspace.entries.values() if entry.source is not None)


@dataclass(slots=True)
class _Batch:
    """The one step that adds a batch, and what it does with each file."""

    put: dict[str, dict[str, Any]] = field(default_factory=dict)
    added: list[dict[str, Any]] = field(default_factory=list)
    refused: list[dict[str, str]] = field(default_factory=list)
    already: list[str] = field(default_factory=list)
    show: str | None = None  # what the page turns to: the first lit sweep, else the first

    @property
    def step(self) -> steps.Step:
        count = len(self.put["entries"])
        return {"label": "add sweep" if count == 1 else f"add {count} sweeps", "put": self.put}


def _one_step(workspace: Workspace, read: list[_ReadFile]) -> _Batch:
    """Add file after file, each to the devices of those before it, and fold the steps into one."""
    batch = _Batch()
    for dropped, sweeps in read:
        if steps.already_loaded(workspace, dropped.digest):  # another tab was quicker
            batch.already.append(dropped.name)
            continue
        try:
            step = steps.add_sweeps(workspace, sweeps, source=dropped.digest, source_name=dropped.name)
            workspace = steps.apply(workspace, step)
        except SweepbenchError as error:
            batch.refused.append({"file": dropped.name, "sentence": str(error)})
            continue
        for kind, records in step["put"].items():
            batch.put.setdefault(kind, {}).update(records)
        for entry in step["put"].get("entries", ()):
            workspace = _with_first_guess(workspace, entry, batch)
            if batch.show is None or (workspace.sweep(entry).lit and not workspace.sweep(batch.show).lit):
                batch.show = entry
        batch.added.append({"file": dropped.name, "entries": list(step["put"].get("entries", ()))})
    return batch


def _with_first_guess(workspace: Workspace, entry: str, batch: _Batch) -> Workspace:
    """Lay a first curve over a new sweep, so that there is something to drag at once."""
    try:
        step = steps.set_model(workspace, entry, first_guess(workspace.sweep(entry)))
    except SweepbenchError:
        return workspace  # a sweep without a curve is still a sweep; the button says why
    batch.put.setdefault("fits", {}).update(step["put"].get("fits", {}))
    return steps.apply(workspace, step)


def _commit(store: Store, workspace_id: str, read: list[_ReadFile]) -> tuple[int, _Batch]:
    """Add to whatever is current: adding is right after any change of others."""
    for _ in range(TRIES):
        workspace = store.current(workspace_id)
        batch = _one_step(workspace, read)
        if not batch.put:
            return workspace.revision, batch
        try:
            return store.commit(workspace_id, batch.step, workspace.revision).revision, batch
        except StaleRevision:
            continue
    raise StepRefused("The workspace was changed all the time, so the files were not added. Drop them once more.")


def _chosen(workspace: Workspace) -> list[str]:
    return exports.chosen(workspace, flask.request.args.get("entries", ""))


def _export(export: exports.Export) -> flask.Response:
    return _download(export.data, export.name, export.mimetype)


def _download(data: bytes, name: str, mimetype: str = "application/octet-stream") -> flask.Response:
    return flask.send_file(io.BytesIO(data), mimetype, as_attachment=True, download_name=safe_name(name))
