"""Outputs appear whole or not at all: a folder built beside its place, synced, then renamed in."""

from __future__ import annotations

import hashlib
import os
import re
import shutil
import tempfile
from collections.abc import Callable
from pathlib import Path

import pyarrow as pa
import pyarrow.parquet as pq

from projector.run.results import COLUMNS, RunResults

STALE_PREFIX = ".unfinished-"
ASIDE_PREFIX = ".earlier-"


def sync(path: Path) -> None:
    """Asks the disk to keep what was written; a failure is fatal, since a retry may lie."""
    handle = os.open(path, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)


def write_tables(results: RunResults, folder: Path) -> None:
    """Every result table as Parquet, units and meanings in the schema."""
    folder.mkdir()
    for name, frame in results.tables().items():
        write_table(name, frame, COLUMNS[name], folder / f"{name}.parquet")


def write_table(name: str, frame: object, columns: dict[str, tuple[str, str]], path: Path) -> None:
    """One table with its own schema: no library names or clocks in the metadata."""
    table = pa.Table.from_pandas(frame, preserve_index=False).replace_schema_metadata({"table": name})
    for i, field in enumerate(table.schema):
        unit, meaning = columns.get(field.name, ("-", ""))
        table = table.cast(table.schema.set(i, field.with_metadata({"unit": unit, "meaning": meaning})))
    pq.write_table(table, path, compression="zstd", version="2.6", row_group_size=1_000_000)


def file_digest(path: Path) -> str:
    """SHA-256 of a file."""
    return hashlib.sha256(path.read_bytes()).hexdigest()


OURS = re.compile(r"\.(?P<kind>unfinished|earlier)-(?P<owner>[0-9]+)-(?P<rest>.+)")


def left_behind(parent: Path, kind: str) -> list[tuple[Path, str]]:
    """Folders of exactly our names whose process has ended, and the rest of each name."""
    found = []
    for path in sorted(parent.iterdir()):
        name = OURS.fullmatch(path.name)
        if name and name["kind"] == kind and path.is_dir() and not process_alive(int(name["owner"])):
            found.append((path, name["rest"]))
    return found


def remove_stale(parent: Path) -> None:
    """Clears what a killed run left beside its place; a run still going keeps its own.

    A kill between the two renames leaves the earlier folder set aside and nothing in its place: it is put back.
    """
    for path, name in left_behind(parent, "earlier"):
        if (parent / name).exists():
            shutil.rmtree(path, ignore_errors=True)
        else:
            os.rename(path, parent / name)
    for path, _ in left_behind(parent, "unfinished"):
        shutil.rmtree(path, ignore_errors=True)


def process_alive(pid: int) -> bool:
    """Whether a process of that number exists."""
    if os.name != "posix":
        return False
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return False
    except PermissionError:
        return True
    return True


def publish(target: Path, build: Callable[[Path], None]) -> None:
    """Builds a folder beside `target` and renames it in; an earlier folder of that name is replaced whole."""
    parent = target.parent
    parent.mkdir(parents=True, exist_ok=True)
    remove_stale(parent)
    fresh = Path(tempfile.mkdtemp(prefix=f"{STALE_PREFIX}{os.getpid()}-", dir=parent))
    os.chmod(fresh, 0o755)
    old = parent / f"{ASIDE_PREFIX}{os.getpid()}-{target.name}"
    try:
        build(fresh)
        for path in sorted(fresh.rglob("*")):
            sync(path)
        sync(fresh)
        if target.exists():
            os.rename(target, old)
        os.rename(fresh, target)
        sync(parent)
    except BaseException:
        shutil.rmtree(fresh, ignore_errors=True)
        if old.exists() and not target.exists():
            os.rename(old, target)
        raise
    shutil.rmtree(old, ignore_errors=True)
