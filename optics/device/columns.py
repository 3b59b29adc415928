"""Named columns of numbers from a text file, with a fault for every cell that is none."""

from __future__ import annotations

import hashlib
from collections.abc import Iterable
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from optics.device.errors import CaseError, Fault
from optics.device.materials import FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class RawTable:
    """A text table, read but not yet judged.

    Attributes
    ----------
    path : Path
    header : dict of str to str
        The ``# key: value`` lines; a repeated key keeps all its values, parted by semicolons.
    names_line : int
        Line of the column names, 0 when there is none.
    lines : tuple of int
        Line of each row.
    values : dict of str to ndarray of float, shape (n_row,)
        By column name, in the file's order; NaN where `faults` names the cell.
    sha256 : str
        Of the file's bytes.
    faults : list of Fault
        What was wrong so far; whoever judges the table adds to it.
    """

    path: Path
    header: dict[str, str]
    names_line: int
    lines: tuple[int, ...]
    values: dict[str, FloatArray]
    sha256: str
    faults: list[Fault] = field(default_factory=list)

    @property
    def n_rows(self) -> int:
        """Number of rows of numbers."""
        return len(self.lines)

    def fault(
        self, line: int, found: str, expected: str, column: str = "", near: str | None = None
    ) -> Fault:
        """Make a fault that names the line and, when given, the column."""
        return Fault(str(self.path), place(line, column), found, expected, near)


def place(line: int, column: str = "") -> str:
    """Write where in a table something stands: ``line 12, column k``."""
    return f"line {line}, column {column}" if column else f"line {line}"


def by_line(faults: Iterable[Fault]) -> list[Fault]:
    """Sort faults the way a reader meets them; those of the whole file come last."""

    def line_number(fault: Fault) -> float:
        words = fault.key.replace(",", " ").split()
        return float(words[1]) if words[:1] == ["line"] else float("inf")

    return sorted(faults, key=line_number)


def read_columns(path: Path) -> RawTable:
    """Read a comma- or blank-separated table with one line of column names.

    Parameters
    ----------
    path : Path
        Text in UTF-8. Lines that start with ``#`` are remarks, empty lines are skipped.

    Raises
    ------
    CaseError
        When the file cannot be read as text or holds no table. Faults of single cells are
        collected in the result instead.
    """
    content = _read_bytes(path)
    numbered = list(enumerate(_decode(path, content).splitlines(), start=1))
    header = _header([text for _, text in numbered if text.lstrip().startswith("#")])
    body = [
        (line, text)
        for line, text in numbered
        if text.strip() and not text.lstrip().startswith("#")
    ]
    if not body:
        found = "an empty file" if not content.strip() else "remarks only"
        raise CaseError([Fault(str(path), "", found, "a table with a line of column names")])
    names_line, first = body[0]
    faults: list[Fault] = []
    names = _column_names(path, names_line, first, faults)
    rows, lines = _split_rows(path, body[1:], "," in first, len(names), faults)
    values = _numbers(path, names, rows, lines, faults)
    digest = hashlib.sha256(content).hexdigest()
    return RawTable(path, header, names_line, lines, values, digest, faults)


def _read_bytes(path: Path) -> bytes:
    try:
        return path.read_bytes()
    except FileNotFoundError:
        fault = Fault(str(path), "", "no such file", "a table")
    except IsADirectoryError:
        fault = Fault(str(path), "", "a folder", "a table")
    except OSError as error:
        fault = Fault(str(path), "", error.strerror or str(error), "a file that can be read")
    raise CaseError([fault])


def _decode(path: Path, content: bytes) -> str:
    try:
        return content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = content[: error.start].count(b"\n") + 1
        byte = f"byte 0x{content[error.start]:02x}, which is not UTF-8"
        raise CaseError([Fault(str(path), place(line), byte, "text in UTF-8")]) from None


def _header(remarks: list[str]) -> dict[str, str]:
    header: dict[str, str] = {}
    for remark in remarks:
        key, colon, value = remark.lstrip().lstrip("#").partition(":")
        if colon and key.strip():
            known = header.get(key.strip())
            header[key.strip()] = f"{known}; {value.strip()}" if known else value.strip()
    return header


def _split(text: str, by_comma: bool) -> list[str]:
    if by_comma:
        return [cell.strip().strip('"') for cell in text.split(",")]
    return text.split()


def _column_names(path: Path, line: int, text: str, faults: list[Fault]) -> list[str]:
    if ";" in text:
        raise CaseError(
            [Fault(str(path), place(line), "semicolons", "columns parted by commas or blanks")]
        )
    names = _split(text, "," in text)
    if all(_is_number(name) for name in names):
        expected = "a line of column names, not marked as a remark"
        raise CaseError([Fault(str(path), place(line), "numbers", expected)])
    for name in sorted({name for name in names if names.count(name) > 1}):
        found = f"column {name!r} {names.count(name)} times"
        faults.append(Fault(str(path), place(line), found, "every column once"))
    return names


def _is_number(text: str) -> bool:
    try:
        float(text)
    except ValueError:
        return False
    return True


def _split_rows(
    path: Path, body: list[tuple[int, str]], by_comma: bool, n_columns: int, faults: list[Fault]
) -> tuple[list[list[str]], tuple[int, ...]]:
    """Split rows into cells; rows of the wrong length become faults and are left out."""
    rows: list[list[str]] = []
    lines: list[int] = []
    for line, text in body:
        cells = _split(text, by_comma)
        if len(cells) == n_columns:
            rows.append(cells)
            lines.append(line)
        else:
            found = f"{len(cells)} values" if len(cells) != 1 else "1 value"
            faults.append(Fault(str(path), place(line), found, f"{n_columns}, one per column"))
    return rows, tuple(lines)


def _numbers(
    path: Path,
    names: list[str],
    rows: list[list[str]],
    lines: tuple[int, ...],
    faults: list[Fault],
) -> dict[str, FloatArray]:
    # Imported here because pandas takes longer to load than the command line may take to answer.
    import pandas as pd

    frame = pd.DataFrame(rows, columns=range(len(names)), index=list(lines), dtype=str)
    values: dict[str, FloatArray] = {}
    for position, name in enumerate(names):
        texts = frame[position]
        numbers = pd.to_numeric(texts, errors="coerce").to_numpy(dtype=np.float64, copy=True)
        wrong = ~np.isfinite(numbers)
        numbers[wrong] = np.nan
        for line, text in texts[wrong].items():
            found = repr(text) if text else "an empty cell"
            faults.append(Fault(str(path), place(int(str(line)), name), found, "a finite number"))
        values.setdefault(name, numbers)
    return values
