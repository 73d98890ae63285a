"""Source files of a reader: bytes, name as the user wrote it, SHA-256; whatever cannot be opened becomes a problem.

Nothing is raised here: a reader goes on to its other files and reports all problems at once.
"""

from __future__ import annotations

import gzip
import hashlib
import io
import zlib
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from pathlib import Path

from shiftfix.api import Problem

_GZIP = b"\x1f\x8b"
_LIMIT_BYTES = 2_000_000_000  # of one unpacked file: a day of 10 Hz RINEX is below 1e9
_LIMIT_RATIO = 200  # of unpacked to packed beyond the first 50 MB: logs stay below 50, a bomb reaches 1000
_RATIO_FROM_BYTES = 50_000_000
_ARCHIVES = {
    b"PK\x03\x04": "zip",
    b"BZh": "bzip2",
    b"\xfd7zXZ\x00": "xz",
    b"7z\xbc\xaf": "7-Zip",
    b"\x28\xb5\x2f\xfd": "zstd",
}


@dataclass(frozen=True)
class SourceFile:
    """One file that was opened.

    Parameters
    ----------
    path : pathlib.Path
    name : str
        As the user wrote it, for messages and rows.
    sha256 : str
        Of the bytes on disk, before any unpacking.
    data : bytes
        Content, unpacked when it was packed with gzip.
    """

    path: Path
    name: str
    sha256: str
    data: bytes


def open_sources(
    paths: Path | Iterable[Path], display: Callable[[Path], str] = str
) -> tuple[list[SourceFile], list[Problem], list[str]]:
    """Return the files that can be read, problems of those that cannot, and a note for each that comes twice.

    Parameters
    ----------
    paths : Path or iterable of Path
    display : callable
        `display(path)` gives the name for messages.

    Notes
    -----
    A file whose bytes were read already is left out with a note: the same file twice changes nothing.
    """
    if isinstance(paths, (str, Path)):
        paths = (Path(paths),)
    files: list[SourceFile] = []
    problems: list[Problem] = []
    notes: list[str] = []
    seen: dict[str, str] = {}
    for path in paths:
        name = display(path)
        try:
            raw = Path(path).read_bytes()
        except FileNotFoundError:
            problems.append(
                Problem(name, "no such file", remedy="correct params.files; it is relative to the pipeline file")
            )
            continue
        except IsADirectoryError:
            problems.append(Problem(name, "is a folder, not a file", remedy=f"name the files in it, as in {name}/*"))
            continue
        except OSError as error:
            problems.append(Problem(name, "cannot be read", found=error.strerror or str(error)))
            continue
        if not raw:
            problems.append(Problem(name, "the file is empty", found="0 bytes", remedy="fetch or write it again"))
            continue
        digest = hashlib.sha256(raw).hexdigest()
        if digest in seen:
            notes.append(f"{name} holds the same bytes as {seen[digest]} and is used once")
            continue
        seen[digest] = name
        if raw.startswith(_GZIP):
            try:
                raw, problem = _unpacked(name, raw)
            except (EOFError, OSError, zlib.error) as error:
                problem = Problem(
                    name, "the gzip file is truncated or damaged", found=str(error), remedy="fetch it again"
                )
            if problem:
                problems.append(problem)
                continue
            if not raw:
                problems.append(Problem(name, "the packed file is empty", found="0 bytes"))
                continue
        files.append(SourceFile(Path(path), name, digest, raw))
    return files, problems, notes


def _unpacked(name: str, packed: bytes) -> tuple[bytes, Problem | None]:
    """Return the content of a gzip file, or a problem when it grows beyond what a log can be."""
    parts, size = [], 0
    with gzip.GzipFile(fileobj=io.BytesIO(packed)) as stream:
        while part := stream.read(8_000_000):
            parts.append(part)
            size += len(part)
            if size > _LIMIT_BYTES or (size > _RATIO_FROM_BYTES and size > _LIMIT_RATIO * len(packed)):
                return b"", Problem(
                    name,
                    "the packed file grows too large",
                    found=f"over {size} bytes from {len(packed)}",
                    allowed=f"{_LIMIT_BYTES} bytes, and {_LIMIT_RATIO} times its size",
                    remedy="unpack it and look at it first",
                )
    return b"".join(parts), None


def repeat_problems(notes: Iterable[str], on_repeat: str) -> list[Problem]:
    """Return a problem for each repeated file that `open_sources` noted, unless repeats are to be ignored."""
    if on_repeat == "ignore":
        return []
    return [
        Problem(
            note.split(" holds ")[0],
            "the same file is given twice",
            found=note,
            remedy='name it once, or set on_repeat = "ignore"',
        )
        for note in notes
    ]


def binary_problem(source: SourceFile, wanted: str) -> Problem | None:
    """Return a problem when a file that must be text is binary: a NUL, or over 5 % control characters at its start."""
    head = source.data[:4096]
    for mark, kind in _ARCHIVES.items():
        if head.startswith(mark):
            return Problem(
                f"{source.name}:1",
                f"the file is a {kind} archive",
                found=repr(head[:8]),
                allowed=wanted,
                remedy="unpack it",
            )
    control = sum(byte < 32 and byte not in b"\t\r\n\f\x1a" for byte in head)
    if b"\0" in head or control > 0.05 * len(head):
        return Problem(f"{source.name}:1", "the file is binary", found=repr(head[:16]), allowed=wanted)
    return None


def head_text(first_bytes: bytes) -> str:
    """Return the first bytes as text for `recognise`, unpacked as far as they go when they are gzip."""
    if first_bytes.startswith(_GZIP):
        try:
            first_bytes = zlib.decompressobj(wbits=31).decompress(first_bytes, 65536)
        except zlib.error:
            return ""
    return first_bytes.decode("latin-1").removeprefix("\xef\xbb\xbf")
