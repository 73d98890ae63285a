"""Run folder: files appear whole or not at all; `run.json` says what went in, with what, and what came out."""

from __future__ import annotations

import hashlib
import json
import os
import platform
import tempfile
from collections.abc import Mapping
from importlib import metadata
from pathlib import Path
from typing import Any

from shiftfix.errors import Problem, VerificationError

SCHEMA = 1
RECORD, SEAL, TIMING = "run.json", "run.json.sha256", "timing.json"


def write_atomically(path: Path, data: str | bytes) -> None:
    """Write a file so that it appears whole or not at all: temporary file beside it, fsync, rename."""
    content = data.encode("utf-8") if isinstance(data, str) else data
    path.parent.mkdir(parents=True, exist_ok=True)
    handle, temporary = tempfile.mkstemp(dir=path.parent, prefix=f".{path.name}.")
    try:
        with os.fdopen(handle, "wb") as stream:
            stream.write(content)
            stream.flush()
            os.fsync(stream.fileno())
        os.chmod(temporary, 0o644)
        os.replace(temporary, path)
    except BaseException:
        Path(temporary).unlink(missing_ok=True)
        raise
    directory = os.open(path.parent, os.O_RDONLY)
    try:
        os.fsync(directory)
    finally:
        os.close(directory)


def sha256(content: bytes) -> str:
    """Return the SHA-256 of bytes as hex text."""
    return hashlib.sha256(content).hexdigest()


def file_sha256(path: Path) -> str:
    """Return the SHA-256 of a file as hex text."""
    digest = hashlib.sha256()
    with open(path, "rb") as stream:
        while block := stream.read(1 << 20):
            digest.update(block)
    return digest.hexdigest()


def json_text(document: Mapping[str, Any]) -> str:
    """Return JSON text: sorted where order means nothing, full precision, no NaN."""
    return json.dumps(document, indent=1, ensure_ascii=False, allow_nan=False) + "\n"


def versions(distributions: set[str]) -> dict[str, str]:
    """Return the versions of Python, of the core libraries and of the distributions that gave plugins."""
    out = {"python": platform.python_version()}
    for name in sorted(
        {"numpy", "scipy", "pandas", "networkx", "pluggy", "pyerfa", "astropy-iers-data", *distributions}
    ):
        try:
            out[name] = metadata.version(name)
        except metadata.PackageNotFoundError:
            continue
    return out


def seal(folder: Path, record: Mapping[str, Any]) -> None:
    """Write `run.json` and the file with its hash."""
    text = json_text(record)
    write_atomically(folder / RECORD, text)
    write_atomically(folder / SEAL, f"{sha256(text.encode())}  {RECORD}\n")


def verify_run(folder: str | Path) -> dict[str, Any]:
    """Return the record of a run folder whose files are all unchanged.

    Checks `run.json` against its seal, every product and every input against the hash in the record.

    Raises
    ------
    VerificationError
        With every difference: changed, missing, or not listed.
    """
    folder = Path(folder)
    problems: list[Problem] = []
    try:
        content = (folder / RECORD).read_bytes()
        record = json.loads(content)
        sealed = (folder / SEAL).read_text()
    except (OSError, ValueError) as error:
        found = getattr(error, "strerror", None) or str(error)
        raise VerificationError(
            Problem(str(folder), "not a readable run folder", found=found, allowed=f"a folder with {RECORD} and {SEAL}")
        ) from error
    if sealed != f"{sha256(content)}  {RECORD}\n":
        raise VerificationError(
            Problem(
                f"{folder.name}/{RECORD}", "does not match its seal", found=sha256(content)[:16], allowed=sealed[:16]
            )
        )
    for name, expected in record["products"].items():
        _compare(problems, f"{folder.name}/{name}", folder / name, expected)
    home = (folder / record["pipeline"]["folder"]).resolve()
    pipeline = record["pipeline"]
    _compare(problems, pipeline["file"], home / pipeline["file"], pipeline["sha256"])
    for source in record["inputs"]:
        _compare(problems, source["name"], home / source["name"], source["sha256"])
    listed = {RECORD, SEAL, TIMING, *record["products"]}
    for path in sorted(p for p in folder.rglob("*") if p.is_file()):
        name = path.relative_to(folder).as_posix()
        if name not in listed:
            problems.append(Problem(f"{folder.name}/{name}", "is not listed in the record"))
    if problems:
        raise VerificationError(problems)
    return record


def _compare(problems: list[Problem], name: str, path: Path, expected: str) -> None:
    if not path.is_file():
        problems.append(Problem(name, "is missing", remedy="restore it from the archive"))
    elif (found := file_sha256(path)) != expected:
        problems.append(Problem(name, "has changed since the run", found=found[:16], allowed=expected[:16]))
