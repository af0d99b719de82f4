"""Run as a program of its own: reads numbers out of an HDF5 file, so that a file which crashes the library crashes this only.

Reads one line of JSON (path, memory, seconds), answers with one line of JSON: the datasets, or an error; then, for each name
asked for on a further line, the number of bytes and the samples. Needs h5py and numpy only.
"""

import json
import sys
from typing import Any

LARGEST_RATIO = 200
RATIO_COUNTS_FROM = 64 << 20
LARGEST = 64 << 30
MOST_DATASETS = 4_000


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
                found.append({"path": whole, "shape": list(item.shape), "fault": fault(item, file_bytes), "unit": unit})
    return found


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
        import h5py  # noqa: PLC0415
        import numpy as np  # noqa: PLC0415
    except ImportError:
        answer.write(b'{"missing": true}\n')
        return
    try:
        file = h5py.File(task["path"], "r", locking=False)
        answer.write(json.dumps({"datasets": listing(file, task["bytes"])}).encode() + b"\n")
        answer.flush()
        for line in sys.stdin:
            dataset = file[json.loads(line)]
            if why := fault(dataset, task["bytes"]):
                answer.write(json.dumps({"error": why}).encode() + b"\n")
                return
            samples = np.ascontiguousarray(dataset[()], dtype="<f8")
            answer.write(b"%d\n" % samples.nbytes)
            answer.write(samples.data)
            answer.flush()
    except Exception as error:  # noqa: BLE001  whatever a damaged file brings about is said, and ends this process only
        answer.write(json.dumps({"error": str(error).split("\n")[0][:120]}).encode() + b"\n")


if __name__ == "__main__":
    main()
