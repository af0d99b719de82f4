"""Coverage-guided fuzzing of each reader, the log sheet and the unit parser. Run by `make fuzz`; the corpus is kept.

    python tests/fuzz/fuzz_readers.py TARGET SECONDS

An input passes when it ends in a result or in one error of ours within ten seconds. What fails is kept in tests/fuzz/failures.
Seeds are made here by the libraries that write each format.
"""

import io
import sys
import tempfile
import zipfile
from collections.abc import Callable
from pathlib import Path

import atheris

with atheris.instrument_imports(include=["stillbench"]):
    import numpy as np
    import pyarrow as pa
    from pyarrow import feather, parquet
    from scipy import io as scipy_io
    from scipy.io import wavfile

    from stillbench.foundation.errors import StillbenchError
    from stillbench.foundation.units import parse_unit
    from stillbench.logs.read import read_log
    from stillbench.logs.understand import understand_log
    from stillbench.pipeline import load_log_sheet
    from stillbench.vocabulary.log_sheet import LogSheet

HERE = Path(__file__).parent
RATE = np.random.default_rng(1).normal(size=60).round(4)
WORK = Path(tempfile.mkdtemp())


def text_seeds() -> list[bytes]:
    rows = [f"{i / 10:.1f},{value}" for i, value in enumerate(RATE.tolist())]
    dated = [f"01.03.2025 10:00:{i:02d};{value}".replace(".", ",") for i, value in enumerate(RATE.tolist())]
    return [("time,x\n" + "\n".join(rows)).encode(), ("t\tx\r\n" + "\r\n".join(dated)).encode("utf-16")]


def written(write: Callable[[io.BytesIO], object]) -> bytes:
    stream = io.BytesIO()
    write(stream)
    return stream.getvalue()


def zipped(stream: io.BytesIO) -> None:
    with zipfile.ZipFile(stream, "w") as archive:
        archive.writestr("log.csv", text_seeds()[0])


SEEDS: dict[str, Callable[[], list[bytes]]] = {
    "text": text_seeds,
    "npy": lambda: [written(lambda s: np.save(s, RATE)), written(lambda s: np.savez(s, x=RATE))],
    "columnar": lambda: [
        written(lambda s: parquet.write_table(pa.table({"x": RATE}), s)),
        written(lambda s: feather.write_feather(pa.table({"x": RATE}), s)),
    ],
    "wav": lambda: [written(lambda s: wavfile.write(s, 100, RATE.astype(np.float32)))],
    "mat": lambda: [written(lambda s: scipy_io.savemat(s, {"x": RATE}))],
    "packed": lambda: [written(zipped)],
    "sheet": lambda: [b'[log]\nmissing = ["9"]\n[channel.x]\nunit = "deg/s"\n[channel.x.front_end]\nzero = "1 V"\n'],
    "units": lambda: [b"deg/s/sqrt(Hz)", b"mV/(deg/s)", "\N{DEGREE SIGN}/\N{SQUARE ROOT}h".encode()],
}


def one_input(target: str) -> Callable[[bytes], None]:
    path = WORK / {"npy": "log.npz", "packed": "log.zip", "sheet": "sheet.toml"}.get(target, "log")

    def check(content: bytes) -> None:
        try:
            if target == "units":
                parse_unit(content.decode("utf-8", "replace"))
                return
            path.write_bytes(content)
            if target == "sheet":
                load_log_sheet(path)
                return
            read_log(path, sheet=LogSheet(), channels=["1"], units={"": "V"}, rate=1.0, time="none")
            understand_log(path, rate=1.0)
        except StillbenchError as error:
            if "\n" in error.message and target != "sheet":
                raise AssertionError(error.message) from error

    return check


def main() -> None:
    target, seconds = sys.argv[1], sys.argv[2]
    corpus, failures = HERE / "corpus" / target, HERE / "failures"
    for folder in (corpus, failures):
        folder.mkdir(parents=True, exist_ok=True)
    for number, seed in enumerate(SEEDS[target]()):
        (corpus / f"seed-{number}").write_bytes(seed)
    flags = [
        f"-max_total_time={seconds}",
        "-timeout=10",
        "-rss_limit_mb=2048",
        "-max_len=8192",
        f"-artifact_prefix={failures}/{target}-",
    ]
    atheris.Setup([sys.argv[0], *flags, str(corpus)], one_input(target))
    atheris.Fuzz()


if __name__ == "__main__":
    main()
