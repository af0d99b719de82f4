"""Run as a program of its own: reads numbers out of an HDF5 or MAT file, so that one which crashes the library crashes this only.

Reads one line of JSON (kind, path, bytes, memory, seconds), answers with one line of JSON: the datasets, or an error; then, for each name
asked for on a further line, the number of bytes and the samples. Needs numpy, and h5py or scipy, only.
"""

import json
import sys
from typing import Any

LARGEST_RATIO = 200
RATIO_COUNTS_FROM = 64 << 20
LARGEST = 64 << 30
MOST_DATASETS = 4_000
SLAB = 1 << 22
"""Numbers sent at a time."""
DEEPEST = 4
"""Structures within structures."""


def fault(dataset: Any, file_bytes: int) -> str:  # noqa: ANN401  of a library that may be missing
    """Why a dataset is not read: '' when it may be."""
    if dataset.is_virtual:
        return "is put together from other files"
    if dataset.external:
        return "lies in another file"
    declared = dataset.size * dataset.dtype.itemsize
    if declared > LARGEST or (declared > RATIO_COUNTS_FROM and declared > LARGEST_RATIO * file_bytes):
        return f"declares {declared / 2**20:.0f} MiB in a file of {file_bytes / 2**20:.2f} MiB"
    return ""


def listing(file: Any, file_bytes: int) -> list[dict[str, Any]]:  # noqa: ANN401
    """All datasets of numbers, those refused with the reason; links to other files are not followed."""
    import h5py  # noqa: PLC0415  may be missing

    found: list[dict[str, Any]] = []
    waiting, seen = [("", file)], set()
    while waiting and len(found) < MOST_DATASETS:
        path, group = waiting.pop(0)
        for name in group:
            link = group.get(name, getlink=True)
            whole = f"{path}/{name}"
            if isinstance(link, h5py.ExternalLink):
                found.append({"path": whole, "shape": [], "fault": "is a link to another file"})
                continue
            item = group.get(name)
            if isinstance(item, h5py.Group):
                if item.id not in seen and not name.startswith("#"):
                    seen.add(item.id)
                    waiting.append((whole, item))
            elif isinstance(item, h5py.Dataset) and item.dtype.kind in "iuf" and 1 <= item.ndim <= 2:  # noqa: PLR2004
                unit = item.attrs.get("units", item.attrs.get("unit", ""))
                unit = unit.decode("utf-8", "replace") if isinstance(unit, bytes) else str(unit)
                scaled = [name for name in ("scale_factor", "add_offset", "_FillValue") if name in item.attrs]
                found.append(
                    {
                        "path": whole,
                        "shape": list(item.shape),
                        "fault": fault(item, file_bytes),
                        "unit": unit,
                        "scaled": " and ".join(scaled),
                    }
                )
    return found


def numeric(name: str, value: Any, depth: int = 0) -> dict[str, Any]:  # noqa: ANN401  whatever a file holds
    """Return numeric vectors and tables within a variable of a MAT file, by their path."""
    if depth > DEEPEST or not hasattr(value, "dtype"):
        return {}
    if value.dtype.names and value.size == 1:
        inner: dict[str, Any] = {}
        for field in value.dtype.names:
            inner |= numeric(f"{name}.{field}", value[field].flat[0], depth + 1)
        return inner
    plain = value.dtype.kind in "iufb" and value.size > 1 and value.ndim <= 2  # noqa: PLR2004  vectors and tables
    return {name: value} if plain else {}


def open_mat(task: dict[str, Any]) -> tuple[list[dict[str, Any]], dict[str, Any]]:
    """Return the listing of a MAT file of version 4 or 5, and its arrays."""
    import math  # noqa: PLC0415

    from scipy.io import loadmat, whosmat  # noqa: PLC0415

    declared = sum(8 * math.prod(shape) for _, shape, _ in whosmat(task["path"]))
    if declared > LARGEST or (declared > RATIO_COUNTS_FROM and declared > LARGEST_RATIO * task["bytes"]):
        raise OSError(f"it declares {declared / 2**20:.0f} MiB in a file of {task['bytes'] / 2**20:.2f} MiB")
    arrays: dict[str, Any] = {}
    for name, value in loadmat(task["path"], squeeze_me=False, struct_as_record=True, chars_as_strings=False).items():
        if not name.startswith("__"):
            arrays |= numeric(name, value)
    return [
        {"path": path, "shape": list(array.shape), "fault": "", "unit": ""} for path, array in arrays.items()
    ], arrays


def open_hdf5(task: dict[str, Any]) -> tuple[list[dict[str, Any]], Any]:
    """Return the listing of an HDF5 file, and the file."""
    import h5py  # noqa: PLC0415

    file = h5py.File(task["path"], "r", locking=False)
    return listing(file, task["bytes"]), file


def main() -> None:
    """Answer until standard input ends."""
    task = json.loads(sys.stdin.readline())
    answer = sys.stdout.buffer
    try:
        import resource  # noqa: PLC0415  absent on some systems

        resource.setrlimit(resource.RLIMIT_AS, (task["memory"], task["memory"]))
        resource.setrlimit(resource.RLIMIT_CPU, (task["seconds"], task["seconds"]))
        resource.setrlimit(resource.RLIMIT_CORE, (0, 0))
    except ImportError:
        pass
    try:
        import numpy as np  # noqa: PLC0415

        datasets, file = (open_hdf5 if task["kind"] == "hdf5" else open_mat)(task)
        answer.write(json.dumps({"datasets": datasets}).encode() + b"\n")
        answer.flush()
        for line in sys.stdin:
            dataset = file[json.loads(line)]
            if why := task["kind"] == "hdf5" and fault(dataset, task["bytes"]):
                answer.write(json.dumps({"error": why}).encode() + b"\n")
                return
            answer.write(b"%d\n" % (8 * dataset.size))
            rows = max(1, SLAB * dataset.shape[0] // max(1, dataset.size))
            for first in range(0, dataset.shape[0], rows):
                answer.write(np.ascontiguousarray(dataset[first : first + rows], dtype="<f8").data)
            answer.flush()
    except ImportError:
        answer.write(b'{"missing": true}\n')
    except BaseException as error:  # noqa: BLE001  whatever a damaged file brings about is said, and ends this process only
        answer.write(json.dumps({"error": str(error).split("\n")[0][:120] or type(error).__name__}).encode() + b"\n")


if __name__ == "__main__":
    main()
