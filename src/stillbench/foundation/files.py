"""Files written whole or not at all: temporary name in the same folder, synced, then renamed."""

import contextlib
import os
import tempfile
from collections.abc import Mapping
from pathlib import Path

from stillbench.foundation.errors import OutputError

FILE_MODE = 0o644
PART = ".part"


def _blame(path: Path, error: OSError) -> OutputError:
    reason = error.strerror or str(error)
    return OutputError(
        f"cannot write {path.name!r} in {str(path.parent)!r}: {reason}",
        "a folder that can be written and has room",
        "choose another --out, or free some space; nothing was left half-written",
    )


def _stage(path: Path, content: bytes) -> Path:
    """Write ``content`` under a temporary name beside ``path`` and sync it; return the temporary name."""
    handle, name = tempfile.mkstemp(prefix=f".{path.name}.{os.getpid()}.", suffix=PART, dir=path.parent)
    staged = Path(name)
    try:
        with os.fdopen(handle, "wb") as stream:
            stream.write(content)
            stream.flush()
            os.fsync(stream.fileno())
        staged.chmod(FILE_MODE)
    except BaseException:
        with contextlib.suppress(OSError):
            staged.unlink()
        raise
    return staged


def _sweep(path: Path) -> None:
    """Remove what runs that were killed while they wrote this file have left beside it."""
    for left in path.parent.glob(f".{path.name}.*{PART}"):
        writer = left.name.removeprefix(f".{path.name}.").split(".")[0]
        if writer.isdecimal() and not _is_alive(int(writer)):
            with contextlib.suppress(OSError):
                left.unlink()


def _is_alive(process: int) -> bool:
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return False
    except OSError:
        return True
    return True


def _sync_folder(folder: Path) -> None:
    """Make a rename durable; a file system that cannot sync a folder is left alone."""
    with contextlib.suppress(OSError):
        handle = os.open(folder, os.O_RDONLY)
        try:
            os.fsync(handle)
        finally:
            os.close(handle)


def write_whole(files: Mapping[Path, bytes]) -> None:
    """Write several files so that none is seen half-written.

    All are staged and synced before the first is renamed, so that a full disk leaves the old ones as they were.

    Parameters
    ----------
    files : mapping of Path to bytes
        Where each goes, and its content. Missing parent folders are made.

    Raises
    ------
    OutputError
        When a folder cannot be made, or a file cannot be written, synced or renamed.
    """
    staged: dict[Path, Path] = {}
    current = Path()
    try:
        for current, content in files.items():
            if current.is_symlink():
                raise OutputError(
                    f"{str(current)!r} is a symbolic link",
                    "a plain file or a new name",
                    "remove the link or choose another name",
                )
            current.parent.mkdir(parents=True, exist_ok=True)
            _sweep(current)
            staged[current] = _stage(current, content)
        for current, temporary in staged.items():
            temporary.replace(current)
        for folder in {path.parent for path in files}:
            _sync_folder(folder)
    except OSError as error:
        raise _blame(current, error) from error
    finally:
        for temporary in staged.values():
            with contextlib.suppress(OSError):
                temporary.unlink(missing_ok=True)
