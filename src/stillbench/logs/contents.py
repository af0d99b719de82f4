"""The bytes of a log: plain, .gz, or one file in a .zip; expansion is checked before and while it happens."""

import gzip
import hashlib
import lzma
import mmap
import struct
import zipfile
import zlib
from concurrent.futures import Future, ThreadPoolExecutor
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from stillbench.foundation.errors import LogError, UsageError
from stillbench.foundation.suggestions import listed

CHUNK = 1 << 20
BAG_FILES = ("metadata.yaml",)
LARGEST_EXPANDED = 8 << 30
"""Bytes; a larger compressed log is refused."""
LARGEST_RATIO = 200
"""Compressed logs of numbers expand 3 to 30 times; beyond this ratio (and 64 MiB) a file is taken for a bomb."""
RATIO_COUNTS_FROM = 64 << 20

ZIP_MAGIC = b"PK\x03\x04"
ZSTD_MAGIC = b"\x28\xb5\x2f\xfd"
GZIP_MAGIC = b"\x1f\x8b"
OLD_SPREADSHEET_MAGIC = b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1"


@dataclass(frozen=True)
class Contents:
    """An opened log.

    Attributes
    ----------
    name : str
        File name without folders, of the inner file for a zip.
    data : bytes or mmap
        The expanded content.
    file_bytes : int
        Size on disk.
    hashing : future of str
        SHA-256 of the file on disk, worked out while the file is read.
    wrapping : str
        ``''``, ``gzip``, ``zstd`` or ``zip``.
    path : Path or None
        Of a file that is as it lies on disk, or of a folder.
    folder : bool
        Whether it is a folder (a bag).
    """

    name: str
    data: bytes | mmap.mmap
    file_bytes: int
    hashing: Future[str]
    wrapping: str
    path: Path | None = None
    folder: bool = False


def open_contents(path: Path) -> Contents:
    """Open a log file.

    Raises
    ------
    LogError
        When the file is missing, a folder, empty, a spreadsheet, damaged, or expands beyond reason.
    """
    try:
        if path.is_dir() and any((path / name).is_file() for name in BAG_FILES):
            return _folder(path)
        size = _checked_size(path)
    except OSError as error:
        raise LogError(f"{str(path)[:80]!r} cannot be opened ({error.strerror})", "a log file") from error
    try:
        with path.open("rb") as stream:
            magic = stream.read(8)
            digest = _hash_in_background(path)
            if magic.startswith(OLD_SPREADSHEET_MAGIC):
                raise _spreadsheet(path.name)
            if magic.startswith(ZIP_MAGIC) and path.suffix.lower() != ".npz":
                name, data = _from_zip(path)
                return Contents(name, data, size, digest, "zip")
            if magic.startswith(GZIP_MAGIC):
                stream.seek(0)
                with gzip.open(stream) as inner:
                    data = _expand(inner, path.name, size)
                return Contents(path.name.removesuffix(".gz"), data, size, digest, "gzip")
            if magic.startswith(ZSTD_MAGIC):
                return Contents(path.name.removesuffix(".zst"), _from_zstd(path, size), size, digest, "zstd")
            mapped = mmap.mmap(stream.fileno(), 0, access=mmap.ACCESS_READ)
            return Contents(path.name, mapped, size, digest, "", path)
    except PermissionError as error:
        raise UsageError(f"{str(path)!r} cannot be read: permission denied", "a file that you may read") from error
    except (
        OSError,
        zlib.error,
        lzma.LZMAError,
        EOFError,
        zipfile.BadZipFile,
        NotImplementedError,
        RuntimeError,
        UnicodeDecodeError,
        IndexError,
        struct.error,
    ) as error:
        raise LogError(
            f"{path.name!r} is damaged or cannot be expanded ({error})", "a whole file", "fetch the log again"
        ) from error


def _hash_in_background(path: Path) -> Future[str]:
    def digest() -> str:
        with path.open("rb") as stream:
            return hashlib.file_digest(stream, "sha256").hexdigest()

    pool = ThreadPoolExecutor(max_workers=1)
    future = pool.submit(digest)
    pool.shutdown(wait=False)
    return future


def _checked_size(path: Path) -> int:
    """Return the size of a file, bytes; refuse what is missing, a folder, no plain file, or empty."""
    if not path.exists():
        near = sorted(p.name for p in path.parent.glob("*")) if path.parent.is_dir() else []
        hint = f"the folder holds {listed(near, 5)}" if near else "check the folder"
        raise LogError(f"there is no file {str(path)!r}", "a log file", hint)
    if path.is_dir():
        inside = sorted(p.name for p in path.iterdir() if p.is_file())
        raise LogError(f"{str(path)!r} is a folder", "one file", f"name one of {listed(inside, 5)}" if inside else "")
    if not path.is_file():
        raise LogError(f"{str(path)!r} is not a plain file", "one file", "copy the data into a file first")
    size = path.stat().st_size
    if size == 0:
        raise LogError(f"the file {path.name!r} is empty", "rows of numbers", "check that the logger wrote to it")
    return size


def _folder(path: Path) -> Contents:
    """Return a bag that is a folder; its digest is that of its files one behind the other, in the order of their names."""
    files = sorted(inner for inner in path.iterdir() if inner.is_file())
    digest = hashlib.sha256()
    for inner in files:
        with inner.open("rb") as stream:
            while chunk := stream.read(CHUNK):
                digest.update(chunk)
    future: Future[str] = Future()
    future.set_result(digest.hexdigest())
    return Contents(path.name, b"", sum(inner.stat().st_size for inner in files), future, "", path, folder=True)


def _from_zstd(path: Path, size: int) -> bytes:
    import pyarrow as pa  # noqa: PLC0415  heavy, wanted only when a file is read

    with pa.input_stream(str(path), compression="zstd") as inner:
        return _expand(inner, path.name, size)


def _spreadsheet(name: str) -> LogError:
    return LogError(
        f"{name!r} is a spreadsheet file",
        "a text file of numbers",
        "open it where it was made, save the sheet as CSV (UTF-8), and give that; check that no digits were cut",
    )


def _from_zip(path: Path) -> tuple[str, bytes]:
    with zipfile.ZipFile(path) as archive:
        members = [member for member in archive.infolist() if not member.is_dir()]
        names = [member.filename for member in members]
        if "[Content_Types].xml" in names or any(name.startswith("xl/") for name in names):
            raise _spreadsheet(path.name)
        if len(members) != 1:
            raise LogError(
                f"{path.name!r} holds {len(members)} files ({listed(names, 5)})",
                "a zip with exactly one file",
                "take the log out of the zip and give that",
            )
        member = members[0]
        if member.flag_bits & 1:
            raise LogError(f"{path.name!r} is encrypted", "a plain zip", "expand it first")
        check_expansion(member.file_size, member.compress_size, path.name)
        with archive.open(member) as inner:
            return Path(member.filename).name, _expand(inner, path.name, member.compress_size)


def check_expansion(expanded: int, compressed: int, name: str) -> None:
    """Refuse what expands beyond reason.

    Raises
    ------
    LogError
    """
    ratio = expanded / max(1, compressed)
    if expanded > LARGEST_EXPANDED or (ratio > LARGEST_RATIO and expanded > RATIO_COUNTS_FROM):
        raise LogError(
            f"{name!r} expands to {expanded / 2**20:.0f} MiB or more, {ratio:.0f} times its size",
            f"at most {LARGEST_EXPANDED >> 30} GiB and {LARGEST_RATIO} times",
            "if it is a true log, expand it by hand and give the plain file",
        )


def _expand(stream: Any, name: str, compressed: int) -> bytes:  # noqa: ANN401  whatever has a read method
    parts: list[bytes] = []
    expanded = 0
    while chunk := stream.read(CHUNK):
        expanded += len(chunk)
        check_expansion(expanded, compressed, name)
        parts.append(chunk)
    if not expanded:
        raise LogError(f"the file in {name!r} is empty", "rows of numbers")
    return b"".join(parts)
