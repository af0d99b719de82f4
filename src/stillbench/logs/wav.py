"""WAV files, as sound cards and some recorders write them."""

import io
import struct
import warnings

import numpy as np

from stillbench.foundation.errors import LogError
from stillbench.logs.arrays import ArrayTable
from stillbench.logs.contents import Contents
from stillbench.logs.formats import Format
from stillbench.vocabulary.log_sheet import LogSection

COUPLING = (
    "the inputs of sound cards are mostly AC-coupled: below some hertz such a recording shows the filter and not the"
    " sensor, and its bias, drift, flicker and walk mean nothing"
)


def _recognizes(contents: Contents) -> bool:
    head = bytes(contents.data[:12])
    return head[:4] in (b"RIFF", b"RIFX", b"RF64") and head[8:12] == b"WAVE"


def read_wav(contents: Contents, section: LogSection) -> ArrayTable:  # noqa: ARG001  a reader's signature
    """Read a WAV file: integer samples as counts, floating ones as they are; the rate is that of its head.

    Raises
    ------
    LogError
        When it is damaged or compressed.
    """
    from scipy.io import wavfile  # noqa: PLC0415  heavy imports stay inside functions

    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore", wavfile.WavFileWarning)
            rate, samples = wavfile.read(io.BytesIO(contents.data))
    except (
        UnboundLocalError,
        ValueError,
        EOFError,
        OSError,
        TypeError,
        ZeroDivisionError,
        MemoryError,
        IndexError,
        struct.error,
    ) as error:
        raise LogError(
            f"{contents.name!r} cannot be read as WAV: {_reason(error)}",
            "uncompressed samples",
            "record it again as PCM",
        ) from error
    if samples.size == 0 or rate <= 0:
        raise LogError(f"{contents.name!r} holds no samples", "a recording")
    columns = samples.reshape(samples.shape[0], -1)
    made = {str(i + 1): columns[:, i] for i in range(columns.shape[1])}
    if samples.dtype == np.uint8:
        made = {name: column.astype(np.int16) - 128 for name, column in made.items()}
    table = ArrayTable(made, f"WAV, {samples.dtype}, {len(made)} channels at {rate} Hz", has_heads=False)
    table.rate = float(rate)
    table.remarks.append(COUPLING)
    (declared,) = struct.unpack("<I" if bytes(contents.data[:4]) != b"RIFX" else ">I", contents.data[4:8])
    if declared + 8 > len(contents.data):
        table.remarks.append(f"the file declares {declared + 8} bytes and holds {len(contents.data)}: it is cut short")
    return table


def _reason(error: Exception) -> str:
    return (
        "it has no samples in it, or a recorder that was cut off"
        if isinstance(error, UnboundLocalError)
        else str(error)[:80]
    )


FORMAT = Format(("wav",), _recognizes, read_wav)
