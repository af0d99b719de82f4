"""How a delimited text is laid out: encoding, delimiter, decimal mark, head."""

import re
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass

from stillbench.foundation.errors import LogError, UnitError, UsageError
from stillbench.foundation.units import parse_unit
from stillbench.logs.dates import is_stamp
from stillbench.vocabulary.log_sheet import LogSection

SAMPLE_BYTES = 1 << 18
SAMPLE_LINES = 2_000
DELIMITERS = ("\t", ";", ",", " ")
DELIMITER_WORDS = {"\t": "tab", ";": "semicolon", ",": "comma", " ": "blanks"}
COMMENTS = ("#", "%", "//", "!")

_NUMBER = {
    ".": re.compile(r"[-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?|[-+]?(?:nan|inf|infinity)|", re.IGNORECASE),
    ",": re.compile(r"[-+]?(?:\d+,?\d*|,\d+)(?:[eE][-+]?\d+)?|[-+]?(?:nan|inf|infinity)|", re.IGNORECASE),
}
_THOUSANDS = re.compile(r"[-+]?[1-9]\d{0,2}(?:,\d{3})+(?:\.\d+)?")
_WHOLE_SECONDS = re.compile(r"(?:.*[ T])?\d{1,2}:\d{2}:\d{2}")
_MILLISECONDS = re.compile(r"\d{3}")
_EMPTY_WORDS = frozenset({"", "na", "n/a", "null", "none", "-", "--", "#n/a"})
CONTROL_SHARE = 0.01
FITTING_SHARE = 0.9
MOST_TORN = 3
"""Rows between the head and the first whole row that are taken as torn ones."""
WORDS_SHARE = 0.5
"""Of the cells of a column that are no values, from which it is one of words."""
TAIL_SHARES = (2.0 / 3.0, 1.0 / 3.0, 1.0 / 6.0)
FEWEST_TAIL = 12


@dataclass(frozen=True)
class Layout:
    """How a text is laid out.

    Attributes
    ----------
    encoding : str
    delimiter : str
        One of DELIMITERS; a blank stands for runs of blanks and tabs.
    decimal : str
    heads : list of str or None
    body_line : int
        Line number (from 0) of the first row of data.
    columns : int
        Columns of a row of data.
    units : list of str or None
        Of a row of units below the head.
    words : frozenset of int
        Columns that hold words.
    """

    encoding: str
    delimiter: str
    decimal: str
    heads: list[str] | None
    body_line: int
    columns: int
    units: list[str] | None = None
    words: frozenset[int] = frozenset()

    @property
    def spoken(self) -> str:
        """The layout in words."""
        mark = "decimal comma" if self.decimal == "," else "decimal point"
        head = "with head" if self.heads else "no head"
        split = f"{DELIMITER_WORDS[self.delimiter]}, " if self.columns > 1 else ""
        columns = f"{self.columns} columns" if self.columns > 1 else "one column"
        return f"text, {self.encoding}, {split}{mark}, {head}, {columns}"


def find_encoding(sample: bytes, name: str) -> str:
    """Return the encoding of a text from its first bytes.

    Raises
    ------
    LogError
        When it is not text at all.
    """
    if sample.startswith(b"\xef\xbb\xbf"):
        return "utf-8-sig"
    if sample.startswith((b"\xff\xfe", b"\xfe\xff")):
        return "utf-16"
    zeros_odd, zeros_even = sample[1::2].count(0), sample[0::2].count(0)
    half = max(1, len(sample) // 2)
    if zeros_odd > 0.4 * half and zeros_even < 0.01 * half:
        return "utf-16-le"
    if zeros_even > 0.4 * half and zeros_odd < 0.01 * half:
        return "utf-16-be"
    control = sum(sample.count(byte) for byte in range(32) if byte not in (9, 10, 12, 13))
    if b"\0" in sample or control > CONTROL_SHARE * len(sample):
        raise LogError(
            f"{name!r} is not a text: its first {len(sample)} bytes hold {control} control characters",
            "delimited text, or NPY/NPZ",
            "export the log as CSV",
        )
    try:
        sample[: len(sample) - 4 if len(sample) == SAMPLE_BYTES else None].decode("utf-8")
    except UnicodeDecodeError:
        return "latin-1"
    return "utf-8"


def split_cells(line: str, delimiter: str) -> list[str]:
    """Split one line; quotes around a cell are taken off."""
    if delimiter == " ":
        return line.split()
    if '"' in line:
        import csv  # noqa: PLC0415  quotes are rare in logs

        try:
            return [cell.strip() for cell in next(csv.reader([line], delimiter=delimiter))]
        except csv.Error:
            pass  # a stray quote: split as it stands
    return [cell.strip() for cell in line.split(delimiter)]


def _is_value(cell: str, decimal: str) -> bool:
    return _NUMBER[decimal].fullmatch(cell) is not None or cell.lower() in _EMPTY_WORDS or is_stamp(cell)


def is_number(cell: str, decimal: str) -> bool:
    """Whether a cell holds a number (not empty, not a date)."""
    return bool(cell) and _NUMBER[decimal].fullmatch(cell) is not None


def _is_row(cells: Sequence[str], decimal: str, words: frozenset[int] = frozenset()) -> bool:
    """Whether all cells are values, those in columns of words left out, and one at least is a number."""
    plain = [cell for index, cell in enumerate(cells) if index not in words]
    return all(_is_value(cell, decimal) for cell in plain) and any(is_number(cell, decimal) for cell in plain)


def _columns_of_words(lines: Sequence[str], delimiter: str, decimal: str) -> frozenset[int]:
    """Return the columns that hold words from row to row, as a state beside the readings does; empty when there are none."""
    rows = [split_cells(line, delimiter) for line in lines]
    widths = Counter(map(len, rows))
    width, count = widths.most_common(1)[0] if widths else (0, 0)
    if delimiter == " " or width < 2 or count < FITTING_SHARE * len(rows):  # noqa: PLR2004  words in prose are no columns
        return frozenset()
    rows = [row for row in rows if len(row) == width]
    return frozenset(
        index
        for index in range(width)
        if sum(not _is_value(row[index], decimal) for row in rows) > WORDS_SHARE * len(rows)
    )


def is_comment(line: str) -> bool:
    """Whether a line is a comment or empty."""
    stripped = line.lstrip(" \t\"'")
    return not stripped or stripped.startswith(COMMENTS)


def _score(lines: Sequence[str], delimiter: str, decimal: str, words: frozenset[int]) -> tuple[float, int]:
    """Share of lines that are rows of numbers of the commonest width, and that width."""
    widths: Counter[int] = Counter()
    for line in lines:
        cells = split_cells(line, delimiter)
        if _is_row(cells, decimal, words):
            widths[len(cells)] += 1
    if not widths:
        return 0.0, 0
    width, count = widths.most_common(1)[0]
    return count / len(lines), width


def _without_marks(line: str, marks: Sequence[str]) -> str:
    """Empty the cells that hold a mark of missing samples."""
    for mark in marks:
        if mark and mark in line:
            line = re.sub(rf"(?<![^\t;, ]){re.escape(mark)}(?![^\t;, ])", "", line)
    return line


def _candidates(section: LogSection) -> list[tuple[str, str]]:
    given = {"tab": "\t", "blank": " "}.get(section.delimiter or "", section.delimiter)
    delimiters = (given,) if given else DELIMITERS
    decimals = (section.decimal,) if section.decimal else (".", ",")
    return [(d, m) for d in delimiters for m in decimals if not (d == "," and m == ",")]


def find_layout(lines: Sequence[str], encoding: str, section: LogSection, name: str) -> Layout:
    """Find the layout from the first lines of a text.

    Parameters
    ----------
    lines : sequence of str
        From the start of the file, without line ends.
    encoding : str
    section : LogSection
        What the log sheet says; it rules.
    name : str
        Of the file, for messages.

    Raises
    ------
    LogError
        When no delimiter makes a table of numbers.
    UsageError
        When two readings fit equally well.
    """
    lines = [_without_marks(line, section.missing) for line in lines]
    body = [line for line in lines if not is_comment(line)]
    if section.head_lines is not None:
        body = [line for line in lines[section.head_lines :] if not is_comment(line)]
    # The last part of the sample is past any head; the longer the head beside the rows, the shorter that part.
    words: dict[str, frozenset[int]] = {}
    for share, worded in [(share, worded) for worded in (False, True) for share in TAIL_SHARES]:
        tail = body[len(body) - max(min(len(body), FEWEST_TAIL), round(share * len(body))) :]
        if worded:
            words = {delimiter: _columns_of_words(tail, delimiter, ".") for delimiter in DELIMITERS}
        scored = [
            (*_score(tail, delimiter, mark, words.get(delimiter, frozenset())), delimiter, mark)
            for delimiter, mark in _candidates(section)
        ]
        best = max((share for share, *_ in scored), default=0.0)
        if best >= FITTING_SHARE:
            break
    else:
        raise _not_a_table(body, best, scored, name)
    fitting = [entry for entry in scored if entry[0] >= best - 1e-9]
    if any(entry[2] == "\t" and entry[1] > 1 for entry in fitting):
        fitting = [entry for entry in fitting if entry[2] != " "]  # blanks within cells, as in date-times
    nearly = [entry for entry in scored if entry[0] >= FITTING_SHARE]
    delimiter, decimal, width = _choose(fitting, nearly, body, lines, name)
    if delimiter == "," and section.delimiter is None:
        _refuse_parted_stamps(tail, name)
    columns = words.get(delimiter, frozenset())
    heads, units, body_line = _find_head(lines, delimiter, decimal, width, section.head_lines, columns)
    if decimal == "," and section.decimal is None:
        _refuse_thousands(tail, delimiter, name)
    if delimiter == "," and heads is None and section.delimiter is None:
        _refuse_decimal_commas(lines, body_line, width, name)
    return Layout(encoding, delimiter, decimal, heads, body_line, width, units, columns)


def _refuse_thousands(rows: Sequence[str], delimiter: str, name: str) -> None:
    """Where all cells with a comma look like 1,234 the comma may part thousands as well as decimals."""
    cells = [cell for line in rows for cell in split_cells(line, delimiter) if "," in cell]
    if cells and all(_THOUSANDS.fullmatch(cell) for cell in cells):
        raise UsageError(
            f"in {name!r} {cells[0]!r} may be read in two ways: with a decimal comma, or with thousands parted by commas",
            "one way",
            'write decimal = "," under [log] in a log sheet if it is a decimal comma; otherwise write the log without commas',
        )


def _refuse_decimal_commas(lines: Sequence[str], body_line: int, width: int, name: str) -> None:
    """Rows of twice as many cells as the line above has names were written with decimal commas between commas."""
    above = next((line for line in reversed(lines[:body_line]) if line.strip()), "")
    names = split_cells(above, ",")
    whole = bool(split_cells(lines[body_line], ",")[-1]) if body_line < len(lines) else False
    if (
        whole
        and not is_comment(above)
        and len(names) > 1
        and 2 * len(names) == width
        and not any(is_number(cell, ".") for cell in names)
    ):
        raise UsageError(
            f"the head of {name!r} names {len(names)} columns and its rows have {width} cells: a comma stands both between"
            " columns and in numbers",
            "one use of the comma",
            "write the log with another delimiter or with decimal points",
        )


def _refuse_parted_stamps(rows: Sequence[str], name: str) -> None:
    """Refuse to guess where a comma before the milliseconds of a date-time parts it like any other."""
    cells = [split_cells(line, ",") for line in rows]
    for index in range(min(map(len, cells)) - 1):
        if all(_WHOLE_SECONDS.fullmatch(row[index]) and _MILLISECONDS.fullmatch(row[index + 1]) for row in cells):
            shown = ",".join(cells[0][index : index + 2])
            raise UsageError(
                f"in {name!r} {shown!r} may be read in two ways: a stamp with milliseconds behind a comma, or a stamp and a number",
                "one use of the comma",
                'write the log with another delimiter, or delimiter = "," under [log] in a log sheet if these are two columns',
            )


def _choose(
    fitting: list[tuple[float, int, str, str]],
    nearly: list[tuple[float, int, str, str]],
    body: Sequence[str],
    lines: Sequence[str],
    name: str,
) -> tuple[str, str, int]:
    """Among readings that fit all lines, take the widest; refuse to guess where a comma may be either mark."""
    _, width, delimiter, decimal = max(fitting, key=lambda entry: (entry[1], -DELIMITERS.index(entry[2])))
    same = [mark for _, w, d, mark in fitting if d == delimiter and w == width]
    if len(same) > 1:
        decimal = "."  # no cell of the sample holds either mark
    comma = next((entry for entry in nearly if entry[2] == ","), None)
    decimal_comma = next((entry for entry in nearly if entry[3] == "," and entry[2] != ","), None)
    if delimiter == "," and comma and decimal_comma and decimal_comma[1] < comma[1]:
        head = _find_head(lines, ",", ".", comma[1], None)[0]
        sample = body[-1][:40]
        if head is None:
            raise UsageError(
                f"{name!r} may be read in two ways: {sample!r} is {comma[1]} cells split at commas,"
                f" or {decimal_comma[1]} with decimal commas",
                "one way",
                'write delimiter = "," or decimal = "," under [log] in a log sheet and give it with --log-sheet',
            )
    return delimiter, decimal, width


def _find_head(
    lines: Sequence[str],
    delimiter: str,
    decimal: str,
    width: int,
    head_lines: int | None,
    words: frozenset[int] = frozenset(),
) -> tuple[list[str] | None, list[str] | None, int]:
    """Heads, units below them, and the line of the first row of data."""
    first = head_lines or 0
    while first < len(lines):
        line = lines[first]
        if not is_comment(line):
            cells = split_cells(line, delimiter)
            if len(cells) == width and _is_row(cells, decimal, words):
                break
        first += 1
    units_row: list[str] | None = None
    above = first
    for number in range(first - 1, -1, -1):
        line = lines[number]
        stripped = line.strip().lstrip("#%!/").strip()
        if not stripped:
            continue
        cells = split_cells(stripped, delimiter)
        if len(cells) == width - 1 and not split_cells(lines[first], delimiter)[-1]:
            cells = [*cells, ""]  # rows end in a separator, the head does not
        if len(cells) == width and not any(is_number(cell, decimal) for cell in cells) and any(cells):
            if _are_units(cells) and units_row is None:
                units_row = cells
                continue
            return distinct(cells), units_row, above
        torn = any(is_number(cell, decimal) for cell in cells) or (len(cells) == width and not any(cells))
        if head_lines is None and first - number <= MOST_TORN and torn:
            above = number  # a torn row, before the first whole one
            continue
        break
    return (None if units_row is None else distinct(units_row)), None, first


def _are_units(cells: Sequence[str]) -> bool:
    """Whether a line holds units only, as below the head of some loggers."""

    def is_unit(cell: str) -> bool:
        try:
            parse_unit(cell.strip("[]() "))
        except UnitError:
            return False
        return True

    named = [cell for cell in cells if cell]
    return len(named) > 1 and all(map(is_unit, named))


def distinct(cells: Sequence[str]) -> list[str]:
    """Give empty heads their number and repeated heads a suffix, so that each names one column."""
    heads: list[str] = []
    for number, cell in enumerate(cells, start=1):
        head = cell or f"column {number}"
        heads.append(head if list(cells).count(head) < 2 else f"{head} ({number})")  # noqa: PLR2004  twice or more
    return heads


def _not_a_table(
    body: Sequence[str], best: float, scored: Sequence[tuple[float, int, str, str]], name: str
) -> LogError:
    _, _, delimiter, decimal = max(scored, default=(0.0, 0, ",", "."))
    if best == 0:
        # Nothing fits: the commonest delimiter splits best.
        delimiter = max(DELIMITERS, key=lambda d: sum(len(split_cells(line, d)) > 1 for line in body))
    odd = next(
        (line for line in body[len(body) // 3 :] if not _is_row(split_cells(line, delimiter), decimal)),
        body[0] if body else "",
    )
    cell = next((cell for cell in split_cells(odd, delimiter) if not _is_value(cell, decimal)), odd)
    if _THOUSANDS.fullmatch(cell.strip()):
        return LogError(
            f"{name!r} is not a table of numbers: {cell.strip()!r} in the line {odd.strip()[:60]!r} looks like a number with"
            " its thousands parted by commas",
            "numbers without marks between thousands",
            "write the log again without them",
        )
    share = f"only {100 * best:.0f} % of its lines are alike" if best else "no line of it is a row of numbers"
    return LogError(
        f"{name!r} is not a table of numbers: {share}; {cell.strip()[:40]!r} in the line {odd.strip()[:60]!r} is neither a"
        " number nor an ISO date-time",
        "rows of numbers with the same columns; stamps in s, ms, us, ns or like 2025-03-01 22:15:00.25",
        "rewrite that column, or cut the lines of one device into a file of their own",
    )
