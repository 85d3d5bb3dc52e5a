"""One workspace as one file: a zip that other programs, and other people, can read too.

Inside (UTF-8 JSON throughout):

- ``manifest.json``: ``format``, ``schema`` and, for every other member, ``path``, ``size`` and ``sha256``;
- ``workspace.json``: ``schema``, ``name``, and the records of ``devices``, ``entries``, ``fits`` and ``statements``
  by id, in the units of core;
- ``readings/<sha256>.json``: the points of each sweep as read, its text hashing to its name; entries name it as
  ``reading``;
- ``originals/<sha256>/<name>``: the files as they were dropped, byte for byte; entries name them as ``source``.

The undo history stays behind. The same workspace always gives the same bytes.
"""

from __future__ import annotations

import hashlib
import io
import json
import re
import zipfile
import zlib
from collections.abc import Mapping
from typing import Any, NamedTuple

from .applying import changed
from .errors import StoreFailed, SweepbenchError
from .records import canonical, reading_from_record, reading_record
from .tray_steps import clean_name
from .workspace import KINDS, Workspace

FORMAT = "sweepbench workspace"
SCHEMA = 1
LARGEST_TOTAL = 2**30  # bytes, unpacked
LARGEST_COUNT = 100_000  # members
# Text packs to a tenth, rarely a fiftieth; an archive that swells more than this is made to do harm.
_LARGEST_RATIO = 200
_ALWAYS_ALLOWED = 64 * 2**20  # bytes, unpacked

_EPOCH = (1980, 1, 1, 0, 0, 0)  # the earliest a zip can say: equal content gives equal bytes
_HEX = "[0-9a-f]{64}"
_READING = re.compile(f"readings/({_HEX})\\.json")
_ORIGINAL = re.compile(f"originals/({_HEX})/([^/\\\\:\\x00-\\x1f]+)")


class Contents(NamedTuple):
    """What an archive holds: the workspace, texts of its readings by id, and name and bytes of files by SHA-256."""

    workspace: Workspace
    readings: Mapping[str, str]
    files: Mapping[str, tuple[str, bytes]]


def pack(contents: Contents) -> bytes:
    """The archive of a workspace."""
    workspace, readings, files = contents
    members = {
        "workspace.json": json.dumps(
            {"schema": SCHEMA, "name": workspace.name, **workspace.records()},
            sort_keys=True, indent=1, ensure_ascii=False, allow_nan=False,
        ).encode()
    }  # fmt: skip
    for name, text in sorted(readings.items()):
        members[f"readings/{name}.json"] = text.encode()
    for sha256, (name, content) in sorted(files.items()):
        members[f"originals/{sha256}/{_safe(name)}"] = content
    listing = [
        {"path": path, "size": len(content), "sha256": hashlib.sha256(content).hexdigest()}
        for path, content in members.items()
    ]
    manifest = json.dumps({"format": FORMAT, "schema": SCHEMA, "members": listing}, indent=1, ensure_ascii=False)
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w", zipfile.ZIP_DEFLATED) as archive:
        for path, content in {"manifest.json": manifest.encode(), **members}.items():
            archive.writestr(zipfile.ZipInfo(path, _EPOCH), content, zipfile.ZIP_DEFLATED, 1)  # quick
    return buffer.getvalue()


def unpack(data: bytes) -> Contents:
    """What an archive holds; the workspace has no id yet.

    Raises
    ------
    StoreFailed
        If the data are not such an archive, a newer one, damaged, or larger than an honest one can be.
    """
    try:
        with zipfile.ZipFile(io.BytesIO(data)) as archive:
            members = _members(archive, len(data))
        readings = _readings(members)
        return Contents(_workspace(members, readings), readings, _files(members))
    except (zipfile.BadZipFile, zlib.error, EOFError, NotImplementedError, RuntimeError, OSError) as problem:
        raise StoreFailed(
            "The file is not a workspace file, or it is damaged: it cannot be unpacked. Nothing was changed."
        ) from problem
    except (SweepbenchError, ValueError, LookupError, TypeError, AttributeError, ArithmeticError) as problem:
        if isinstance(problem, StoreFailed):
            raise
        detail = f"it lacks {problem}." if isinstance(problem, KeyError) else str(problem)
        raise StoreFailed(f"The workspace file is damaged: {detail[:300]} Nothing was changed.") from problem


def _members(archive: zipfile.ZipFile, packed: int) -> dict[str, bytes]:
    """Every member, checked against the limits before and the manifest after it is unpacked."""
    infos = archive.infolist()
    total = sum(info.file_size for info in infos)
    if len(infos) > LARGEST_COUNT or total > LARGEST_TOTAL or total > max(_ALWAYS_ALLOWED, _LARGEST_RATIO * packed):
        raise StoreFailed(
            f"The workspace file would unpack to {len(infos)} parts of {total / 2**20:.0f} MB in all, more than is "
            "sensible. Nothing was changed."
        )
    sizes = {info.filename: info.file_size for info in infos}
    if len(sizes) != len(infos) or "manifest.json" not in sizes:
        raise StoreFailed("The file is not a workspace file: it has no manifest of its own. Nothing was changed.")
    manifest = _parsed(_unpacked(archive, "manifest.json"))
    if not isinstance(manifest, dict) or manifest.get("format") != FORMAT:
        raise StoreFailed("The file is not a workspace file of Sweepbench. Nothing was changed.")
    _refuse_newer(manifest["schema"])
    listed = {row["path"]: row for row in manifest["members"]}
    if listed.keys() | {"manifest.json"} != sizes.keys():
        raise ValueError("its parts are not those that its manifest lists.")
    members = {}
    for path, row in listed.items():
        if path != "workspace.json" and not _READING.fullmatch(path) and not _honest(path):
            raise ValueError(f"it has a part of a kind that does not belong there ({path[:80]!r}).")
        content = _unpacked(archive, path)
        if len(content) != row["size"]:
            raise ValueError(f"the part {path[:120]} is not what was written.")
        members[path] = _hashing_to(row["sha256"], content, path)
    return members


def _unpacked(archive: zipfile.ZipFile, path: str) -> bytes:
    info = archive.getinfo(path)
    if info.compress_type not in (zipfile.ZIP_STORED, zipfile.ZIP_DEFLATED):
        raise ValueError(f"the part {path[:120]} is packed by an unusual method.")
    with archive.open(info) as member:
        return member.read(info.file_size + 1)  # bounded: a part may hold far more than it declares


def _workspace(members: Mapping[str, bytes], readings: Mapping[str, str]) -> Workspace:
    body = _parsed(members["workspace.json"])
    _refuse_newer(body["schema"])
    if not isinstance(body["name"], str):
        raise TypeError("its name is not a text.")
    sweeps = {name: reading_from_record(_parsed(text)) for name, text in readings.items()}
    workspace = changed(Workspace("", clean_name(body["name"])), {kind: body[kind] for kind in KINDS}, sweeps)
    canonical(workspace.records())  # refuses numbers that are none
    for entry in workspace.entries:
        reading_record(workspace.sweep(entry))  # refuses conditions that cannot be, or that leave no finite points
    originals = {found[1] for path in members if (found := _ORIGINAL.fullmatch(path))}
    if any(entry.source not in originals for entry in workspace.entries.values() if entry.source is not None):
        raise ValueError("an original file is missing from it.")
    return workspace


def _readings(members: Mapping[str, bytes]) -> dict[str, str]:
    readings = {}
    for path, content in members.items():
        if found := _READING.fullmatch(path):
            readings[found[1]] = _hashing_to(found[1], content, path).decode()
    return readings


def _files(members: Mapping[str, bytes]) -> dict[str, tuple[str, bytes]]:
    files = {}
    for path, content in members.items():
        if found := _ORIGINAL.fullmatch(path):
            files[found[1]] = (found[2], _hashing_to(found[1], content, path))
    return files


def _hashing_to(sha256: str, content: bytes, path: str) -> bytes:
    if hashlib.sha256(content).hexdigest() != sha256:
        raise ValueError(f"the part {path[:120]} is not what was written.")
    return content


def _parsed(content: bytes | str) -> Any:
    try:
        return json.loads(content, parse_constant=_refuse_constant)
    except RecursionError as problem:
        raise ValueError("its text is nested beyond measure.") from problem


def _refuse_constant(name: str) -> float:
    raise ValueError(f"it holds {name} where a number must stand.")


def _refuse_newer(schema: Any) -> None:
    if not isinstance(schema, int) or schema < 1:
        raise ValueError("it does not say its version.")
    if schema > SCHEMA:
        raise StoreFailed(
            f"The workspace file was written by a newer version of Sweepbench (format {schema}; this version "
            f"reads up to {SCHEMA}). Install the newer version. Nothing was changed."
        )


def _honest(path: str) -> bool:
    found = _ORIGINAL.fullmatch(path)
    return found is not None and found[2] not in (".", "..")


def _safe(name: str) -> str:
    """The name as a single path component that every system can unpack."""
    name = re.sub(r'[/\\:*?"<>|\x00-\x1f\x7f]', "_", name).strip(" .")
    return name[-120:] or "original"
