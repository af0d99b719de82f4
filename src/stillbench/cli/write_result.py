"""The files of a result, written whole."""

from pathlib import Path

from stillbench.foundation.files import write_whole
from stillbench.vocabulary.characterization import Characterization

REPORT, RESULT, CURVE = "report.html", "result.json", "curve.csv"


def write_result(result: Characterization, folder: Path | None, json_file: Path | None) -> list[Path]:
    """Write report.html, result.json and curve.csv into ``folder``, and the JSON to ``json_file`` where given.

    Raises
    ------
    OutputError
        When anything cannot be written; then nothing of it is.
    """
    from stillbench.archive.codec import encode  # noqa: PLC0415  wanted only where something is written
    from stillbench.archive.curve_csv import curve_table  # noqa: PLC0415

    encoded = encode(result)
    files: dict[Path, bytes] = {}
    if folder is not None:
        from stillbench.report.render import render_report  # noqa: PLC0415

        files = {folder / REPORT: render_report(result), folder / RESULT: encoded, folder / CURVE: curve_table(result)}
    if json_file is not None:
        files[json_file] = encoded
    write_whole(files)
    return list(files)
