"""Files of a study folder, opened safely: inside the folder, regular, and within the limits, before any parsing.

The bytes that are parsed are the bytes that are hashed: a file is read once.
"""

from __future__ import annotations

import hashlib
import stat
from dataclasses import dataclass
from pathlib import Path, PureWindowsPath

from projector.study.errors import LocatedError, StudyRefused, StudyTooLarge, echo
from projector.study.names import TEXT_AT_MOST
from projector.study.records import FileDigest

STUDY_FILE = "study.toml"
SUFFIXES = (".csv", ".parquet", ".xlsx")


@dataclass(frozen=True, kw_only=True)
class Limits:
    """What is refused before it is parsed: sizes in bytes, tables in rows, columns and cells."""

    study_bytes: int = 1_000_000
    file_bytes: int = 512_000_000
    unpacked_bytes: int = 2_000_000_000
    unpacked_ratio: int = 200
    rows: int = 10_000_000
    columns: int = 200
    cells: int = 100_000_000
    sheet_cells: int = 20_000_000  # of a workbook, empty ones between filled ones counted


LIMITS = Limits()


@dataclass(frozen=True, kw_only=True)
class InputFile:
    """One file as it lay on disk."""

    name: str
    content: bytes

    def digest(self) -> FileDigest:
        """Its SHA-256 and its size."""
        return FileDigest(name=self.name, sha256=hashlib.sha256(self.content).hexdigest(), bytes=len(self.content))


def refused(code: str, file: str, problem: str, remedy: str, value: str | None = None) -> StudyRefused:
    """A refusal with one located error."""
    return StudyRefused([LocatedError(code=code, file=file, problem=problem, remedy=remedy, value=value)])


def too_large(code: str, file: str, what: str, found: int, limit: int, remedy: str) -> StudyTooLarge:
    """A refusal that shows its arithmetic: what was found, the limit, and how far apart they are."""
    problem = f"{what}: {found:,} against a limit of {limit:,}, {found / limit:,.1f} times too many"
    return StudyTooLarge([LocatedError(code=code, file=file, problem=problem, remedy=remedy)])


def _require_plain_name(name: str) -> None:
    where = STUDY_FILE
    if not name or len(name) > TEXT_AT_MOST or not name.isprintable() or "\\" in name:
        raise refused(
            *("E106", where, "this is not a file name"),
            f"write a name of 1 to {TEXT_AT_MOST} printable characters with / between folders",
            value=name,
        )
    windows = PureWindowsPath(name)
    if name.startswith(("/", "~")) or windows.drive or windows.root or ".." in name.split("/"):
        raise refused(
            *("E103", where, "this name leads out of the study folder"),
            "put the file into the study folder and name it from there, without / at the start and without ..",
            value=name,
        )


def resolve(folder: Path, name: str) -> Path:
    """The regular file of that name under the folder.

    Refuses absolute names, `..`, links that leave the folder, and anything that is not a regular file; a
    device or a pipe is never opened.
    """
    _require_plain_name(name)
    try:
        root = folder.resolve(strict=True)
        found = (folder / name).resolve(strict=True)
        mode = found.stat().st_mode
    except FileNotFoundError:
        code = "E101" if name == STUDY_FILE else "E102"
        raise refused(code, name, "this file is not in the study folder", "add it or correct its name") from None
    except (OSError, RuntimeError) as problem:  # loops of links, forbidden folders, a file used as a folder
        raise _unreadable(name, problem) from None
    if not found.is_relative_to(root):
        raise refused(
            *("E104", name, "this is a link that leads out of the study folder"),
            "put a copy of the file into the study folder: the folder is what is archived and run again",
        )
    if not stat.S_ISREG(mode):
        raise refused("E105", name, "this is not a regular file", "name a file, not a folder, pipe or device")
    return found


def _unreadable(name: str, problem: BaseException) -> StudyRefused:
    reason = problem.strerror if isinstance(problem, OSError) and problem.strerror else type(problem).__name__
    return refused("E108", name, f"this file cannot be read: {reason}", "check the file and who may read it")


def read_file(folder: Path, name: str, limit: int = LIMITS.file_bytes) -> InputFile:
    """The content of a file, refused when it is larger than `limit` bytes."""
    path = resolve(folder, name)
    try:
        with path.open("rb") as source:
            content = source.read(limit + 1) if path.stat().st_size <= limit else b""
        size = max(path.stat().st_size, len(content))
    except OSError as problem:
        raise _unreadable(name, problem) from None
    if size > limit:
        raise too_large("E109", name, "bytes in this file", size, limit, "split or shorten it")
    return InputFile(name=name, content=content)


def require_folder(folder: Path) -> None:
    """Refuses when the study folder is not there."""
    if not folder.is_dir():
        remedy = "name the folder that holds study.toml, or start one with: projector new FOLDER"
        raise refused("E101", echo(str(folder)), "there is no such folder", remedy)
    resolve(folder, STUDY_FILE)


def require_known_suffix(name: str) -> None:
    """Refuses a table whose name does not say that it is CSV, Parquet or XLSX."""
    if not name.lower().endswith(SUFFIXES):
        remedy = f"save it as one of {', '.join(SUFFIXES)}"
        raise refused("E107", name, "the name does not end like a table this program reads", remedy)
