"""A run in one file to hand on: a zip of its folder with a manifest that gives the SHA-256 of everything in it."""

from __future__ import annotations

import hashlib
import json
import os
import tempfile
import zipfile
import zlib
from collections.abc import Iterator
from pathlib import Path, PurePosixPath
from typing import IO, Any

from benchrun.archive import schema
from benchrun.archive.meta import utc_now
from benchrun.archive.read import ArchiveReader, open_archive
from benchrun.errors import BenchrunError, DiskError, FolderError

MANIFEST = "manifest.json"
#: Version of the manifest; a reader refuses a later one.
VERSION = 1
LONGEST_MANIFEST = 1 << 24
_CHUNK = 1 << 20
#: What zipfile raises for what is damaged, encrypted, or packed in a way that it does not know.
DAMAGED = (zipfile.BadZipFile, zlib.error, OSError, EOFError, NotImplementedError, RuntimeError, ValueError)


def pack(folder: Path, target: Path) -> Path:
    """Write the run in `folder` to the new file `target`, its archive as one sound file, and return `target`.

    Everything stands below the run folder's name, so that unpacking gives a run folder again. Raises FolderError where
    `target` is there already or the archive is not sound, DiskError where it cannot be written.
    """
    _require_free(target)
    with open_archive(folder) as archive, tempfile.TemporaryDirectory(prefix="benchrun-pack-") as place:
        snapshot = Path(place) / schema.FILE_NAME
        archive.copy_to(snapshot)
        with open_archive(snapshot) as copied:
            if problems := copied.check():
                raise FolderError(
                    f"{folder}: its archive is not sound ({problems[0]}). `benchrun archive repair {folder}` recovers "
                    "what can be read; pack that"
                )
            about = _about(copied)
        files = {schema.FILE_NAME: snapshot, **dict(_others(folder, target))}
        _write(target, folder.resolve().name, about, files)
    return target


def _about(archive: ArchiveReader) -> dict[str, Any]:
    meta = archive.meta
    return {
        "benchrun-pack": VERSION,
        "title": meta.title,
        "run_id": meta.run_id,
        "state": meta.state,
        "readings": archive.count,
        "schedule_hash": meta.schedule_hash,
        "digest": archive.digest(),
        "packed_utc": utc_now(),
    }


def _others(folder: Path, target: Path) -> Iterator[tuple[str, Path]]:
    """Yield every file of a run folder but the archive, by its name in it; links and hidden files are left out."""
    for path in sorted(folder.rglob("*")):
        name = path.relative_to(folder)
        left_out = name.name.startswith(schema.FILE_NAME) or any(part.startswith(".") for part in name.parts)
        if path.is_file() and not path.is_symlink() and not left_out and path.resolve() != target.resolve():
            yield name.as_posix(), path


def _write(target: Path, run: str, about: dict[str, Any], files: dict[str, Path]) -> None:
    """Write the zip beside its place, and let it take that only where nothing came there meanwhile."""
    temporary: Path | None = None
    try:
        target.parent.mkdir(parents=True, exist_ok=True)
        handle, name = tempfile.mkstemp(prefix=f".{target.name}.", dir=target.parent)
        temporary = Path(name)
        with os.fdopen(handle, "wb") as file:
            _fill(file, run, about, files)
        _take_place(temporary, target)
    except OSError as error:
        raise DiskError(f"{target}: could not be written ({error.strerror or error}). Choose another place") from error
    finally:
        if temporary is not None:
            temporary.unlink(missing_ok=True)


def _fill(file: IO[bytes], run: str, about: dict[str, Any], files: dict[str, Path]) -> None:
    with zipfile.ZipFile(file, "w", zipfile.ZIP_DEFLATED) as packed:
        records = [_added(packed, f"{run}/{name}", path) for name, path in files.items()]
        packed.writestr(f"{run}/{MANIFEST}", json.dumps({**about, "files": records}, indent=2) + "\n")
    file.flush()
    os.fsync(file.fileno())


def _take_place(temporary: Path, target: Path) -> None:
    """Give a file its name, which nothing must have. Raises FolderError, OSError."""
    temporary.chmod(0o644)
    try:
        os.link(temporary, target)
    except FileExistsError:
        _require_free(target)
    except OSError:  # a disk without hard links
        _require_free(target)
        temporary.replace(target)


def _require_free(target: Path) -> None:
    if target.exists():
        raise FolderError(f"{target}: is there already, and nothing is overwritten. Choose another file with --to")


def _added(packed: zipfile.ZipFile, name: str, path: Path) -> dict[str, Any]:
    """Put one file into the zip and return its line of the manifest."""
    info = zipfile.ZipInfo.from_file(path, name, strict_timestamps=False)
    info.compress_type = zipfile.ZIP_DEFLATED
    with path.open("rb") as source, packed.open(info, "w", force_zip64=True) as sink:
        size, sha256 = _through(source, sink)
    return {"name": name, "bytes": size, "sha256": sha256}


def _through(source: IO[bytes], sink: IO[bytes] | None = None, most: int | None = None) -> tuple[int, str]:
    """Read to the end, or to just beyond `most` bytes, into `sink`; return how many there were and their SHA-256."""
    sha, size = hashlib.sha256(), 0
    while (most is None or size <= most) and (part := source.read(_CHUNK)):
        sha.update(part)
        size += len(part)
        if sink is not None:
            sink.write(part)
    return size, sha.hexdigest()


def check_pack(path: Path) -> list[str]:
    """Return everything that is wrong with a packed run, in words; [] for a sound one. Raises FolderError for none."""
    if not path.is_file():
        raise FolderError(f"{path}: there is no packed run here")
    try:
        with zipfile.ZipFile(path) as packed:
            return list(_problems(packed))
    except DAMAGED as error:
        return [f"it is no zip, or damaged as a whole: {error}"]


def _problems(packed: zipfile.ZipFile) -> Iterator[str]:
    entries = packed.infolist()
    manifest, records = _manifest(packed, entries)
    if manifest is None:
        yield f"it has no {MANIFEST} that can be read: it was not packed by benchrun, or is damaged"
        return
    if manifest.get("benchrun-pack") != VERSION:
        yield f"it was packed by a later benchrun (version {manifest.get('benchrun-pack')!r:.20}): update benchrun"
        return
    names = [entry.filename for entry in entries if not entry.filename.endswith(f"/{MANIFEST}")]
    for name in sorted({name for name in names if names.count(name) > 1}):
        yield f"{name} is in it more than once"
    for name in sorted(set(names) - records.keys()):
        yield f"{name} is in it, and not in its manifest"
    yield from filter(None, (_problem_of(packed, name, record, names) for name, record in records.items()))
    yield from _archive_problems(packed, manifest, records)


def _manifest(
    packed: zipfile.ZipFile, entries: list[zipfile.ZipInfo]
) -> tuple[dict[str, Any] | None, dict[str, dict[str, Any]]]:
    """Return the manifest and its records by name, None where there is none that makes sense."""
    found = [entry for entry in entries if PurePosixPath(entry.filename).name == MANIFEST]
    if len(found) != 1 or found[0].file_size > LONGEST_MANIFEST:
        return None, {}
    try:
        manifest = json.loads(packed.read(found[0]))
        return manifest, {str(one["name"]): one for one in manifest["files"]}
    except (*DAMAGED, TypeError, KeyError, RecursionError):
        return None, {}


def _problem_of(packed: zipfile.ZipFile, name: str, record: dict[str, Any], names: list[str]) -> str:
    if name not in names:
        return f"{name} is in its manifest, and not in it"
    try:
        with packed.open(name) as source:
            size, sha256 = _through(source, most=int(record["bytes"]))
    except DAMAGED as error:
        return f"{name} cannot be unpacked: {error}"
    if (size, sha256) != (record["bytes"], record.get("sha256")):
        return f"{name}: its SHA-256 is not the one in the manifest: it was changed after it was packed"
    return ""


def _archive_problems(
    packed: zipfile.ZipFile, manifest: dict[str, Any], records: dict[str, dict[str, Any]]
) -> Iterator[str]:
    names = [name for name in records if PurePosixPath(name).name == schema.FILE_NAME]
    if len(names) != 1:
        yield f"it holds {len(names)} archives, and should hold one"
        return
    with tempfile.TemporaryDirectory(prefix="benchrun-pack-") as place:
        copy = Path(place) / schema.FILE_NAME
        try:
            with packed.open(names[0]) as source, copy.open("wb") as sink:
                _through(source, sink, int(records[names[0]]["bytes"]))
            with open_archive(copy) as archive:
                problems = archive.check()
                if not problems and archive.digest() != manifest.get("digest"):
                    problems = ["its readings are not those that the manifest names"]
        except (*DAMAGED, BenchrunError) as error:
            problems = [f"cannot be opened: {error}"]
    yield from (f"{names[0]}: {problem}" for problem in problems)
