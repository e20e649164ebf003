"""The table as it stands in the file: every cell as text, so that its digits are seen.

CSV (comma, semicolon or tab), TSV and XLSX; UTF-8, with or without a byte order mark. Blank lines
and lines that begin with ``#`` are skipped. Nothing is converted here.
"""

from __future__ import annotations

import csv
import hashlib
from collections.abc import Iterator
from dataclasses import dataclass, replace
from pathlib import Path

from discrim.errors import DiscrimError, Place
from discrim.runs.workbook import MAX_CELL, MAX_ROWS, SHEET_ERRORS, letters_of, sheet_cells

MAX_BYTES = 64 * 1024 * 1024
MAX_COLUMNS = 2_000
MAX_NAME = 120  # characters of a column's name


_SEPARATORS = {"\t": "tab", ";": "semicolon", ",": "comma"}


@dataclass(frozen=True, slots=True)
class RawTable:
    """Column names and cells as text, rows in the order of the file.

    ``lines`` holds the line (or sheet row) number of each row; ``sources`` the line as it stands in
    the file, for messages ("" for workbooks).
    """

    file: str
    names: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    lines: tuple[int, ...]
    sources: tuple[str, ...]
    sha256: str
    sheet: str = ""
    separator: str = ","
    letters: tuple[str, ...] = ()  # of the columns of a sheet

    @property
    def n(self) -> int:
        return len(self.rows)

    def column(self, name: str) -> tuple[str, ...]:
        """The cells of a column, shape (N,)."""
        j = self.names.index(name)
        return tuple(row[j] for row in self.rows)

    def place(self, row: int, name: str) -> Place:
        """Where a cell stands; ``row`` counts from 0."""
        j = self.names.index(name)
        line = self.lines[row]
        if self.sheet:
            what = f'sheet "{self.sheet}", cell {self.letters[j]}{line}, column "{name}"'
            return Place(self.file, what=what)
        text = self.sources[row]
        start, length = _span(text, self.separator, j)
        return Place(self.file, line, start, length, text, f'column "{name}"')

    def row_words(self, row: int) -> str:
        return f"row {self.lines[row]}" if self.sheet else f"line {self.lines[row]}"


def read_table(path: Path, *, sheet: str | None = None, shown: str | None = None) -> RawTable:
    """Read a table of runs.

    Parameters
    ----------
    path : the file; its ending says what it is (.csv, .tsv, .txt or .xlsx)
    sheet : name of the sheet of a workbook; needed when it holds several
    shown : how to call the file in messages

    Raises
    ------
    DiscrimError
        File missing, too large, not text; no header, duplicate or empty column names, a row with
        too many or too few cells, no rows.
    """
    file = shown or path.name
    here = Place(file)
    ending = path.suffix.lower()
    if ending not in (".csv", ".tsv", ".txt", ".xlsx"):
        raise DiscrimError(
            f'a table cannot be read from a file that ends in "{path.suffix}"',
            place=here,
            do="Save it as .csv, .tsv or .xlsx.",
        )
    data = _bytes(path, here)
    sha256 = hashlib.sha256(data).hexdigest()
    if ending == ".xlsx":
        return _read_workbook(data, sheet, file, sha256)
    if sheet is not None:
        raise DiscrimError(
            "a sheet is named, but the table is no workbook",
            place=here,
            do="Leave out sheet, or point at the .xlsx file.",
        )
    return _read_text(_decoded(data, here), ending, file, sha256)


def _bytes(path: Path, here: Place) -> bytes:
    try:
        if not path.is_file():
            raise DiscrimError(
                "there is no such file" if not path.exists() else "this is no file",
                place=here,
                do="Give the path of the table relative to the folder of the study.",
            )
        size = path.stat().st_size
        if size > MAX_BYTES:
            raise DiscrimError(
                f"the file has {size / 1e6:.0f} MB",
                place=here,
                do=f"A table of runs may have at most {MAX_BYTES // 1024**2} MB.",
            )
        return path.read_bytes()
    except OSError as error:
        raise DiscrimError(
            f"the file cannot be read ({error.strerror or error})", place=here
        ) from None


def _decoded(data: bytes, here: Place) -> str:
    hint = "Save it as CSV with the encoding UTF-8."
    if data[:2] == b"PK":
        raise DiscrimError("not a text file; it looks like a workbook", place=here, do=hint)
    if data[:2] in (b"\xff\xfe", b"\xfe\xff"):
        raise DiscrimError("the text is UTF-16, not UTF-8", place=here, do=hint)
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise DiscrimError(
            "not UTF-8 text", place=Place(here.file, line, what=here.what), do=hint
        ) from None
    if "\0" in text:
        raise DiscrimError("not a text file (it holds zero bytes)", place=here, do=hint)
    return text


def _read_text(text: str, ending: str, file: str, sha256: str) -> RawTable:
    # Only line ends count as such: str.splitlines would also break at form feeds and the like.
    lines = text.replace("\r\n", "\n").replace("\r", "\n").split("\n")
    useful = [line for line in lines if line.strip() and not line.lstrip().startswith("#")]
    if not useful:
        raise DiscrimError(
            "the file is empty" if not text.strip() else "the file holds comments only",
            place=Place(file),
            do="The first line names the columns; one line a run follows.",
        )
    separator = "\t" if ending == ".tsv" else _separator(useful)
    records = list(_records(lines, separator, file))
    first, header = records[0]
    rest = [row for _, row in records[1:]]
    names = _names(header, rest, file, first, lines[first - 1], separator)
    rows, numbers, sources = [], [], []
    for number, cells in records[1:]:
        source = lines[number - 1]
        rows.append(_fitted(cells, len(names), separator, Place(file, number, 0, 1, source)))
        numbers.append(number)
        sources.append(source)
    return _checked(
        RawTable(file, names, tuple(rows), tuple(numbers), tuple(sources), sha256, "", separator),
        Place(file, first, 0, 1, lines[first - 1]),
    )


def _separator(useful: list[str]) -> str:
    """The one that cuts the header and the first rows into the same number of cells, above one."""
    sample = useful[:5]
    best = ","
    for separator in _SEPARATORS:
        counts = {len(next(csv.reader([line], delimiter=separator))) for line in _short(sample)}
        if len(counts) == 1 and counts.pop() > 1:
            return separator
        if separator in sample[0] and best == ",":
            best = separator
    return best


def _short(lines: list[str]) -> list[str]:
    return [line[:MAX_CELL] for line in lines]


def _records(lines: list[str], separator: str, file: str) -> Iterator[tuple[int, list[str]]]:
    """(line number of the first line, cells) of each row."""
    last = 0
    start = 0

    def feed() -> Iterator[str]:
        nonlocal last, start
        for number, line in enumerate(lines, 1):
            if not line.strip() or line.lstrip().startswith("#"):
                continue
            last = number
            start = start or number
            yield line + "\n"

    reader = csv.reader(feed(), delimiter=separator, strict=True, skipinitialspace=True)
    try:
        for cells in reader:
            for cell in cells:
                if len(cell) > MAX_CELL:
                    raise DiscrimError(
                        f"a cell of {len(cell):,} characters",
                        place=Place(file, start),
                        do=f"A cell may have at most {MAX_CELL:,} characters.",
                    )
            yield start, [cell.strip() for cell in cells]
            start = 0
    except csv.Error as error:
        if "field larger" in str(error):
            raise DiscrimError(
                f"a cell of more than {MAX_CELL:,} characters",
                place=Place(file, start or last, 0, 1, lines[(start or last) - 1]),
                do="Look for a quote that is not closed, or a line that is no run.",
            ) from None
        raise DiscrimError(
            f"the line cannot be cut into cells ({error})",
            place=Place(file, start or last, 0, 1, lines[(start or last) - 1]),
            do="Look for a quote that is not closed.",
        ) from None


def _names(
    header: list[str],
    rows: list[list[str]],
    file: str,
    line: int,
    source: str,
    separator: str = ",",
) -> tuple[str, ...]:
    """Column names, checked; columns at the end that have neither name nor cells are dropped."""
    place = Place(file, line, 0, 1, source)
    names = list(header)
    while names and not names[-1] and not any(any(row[len(names) - 1 :]) for row in rows):
        names.pop()
    if len(names) > MAX_COLUMNS:
        raise DiscrimError(f"{len(names):,} columns", place=place, do=f"At most {MAX_COLUMNS:,}.")
    for number, name in enumerate(names, 1):
        if not name:
            raise DiscrimError(
                f"column {number} has no name",
                place=place,
                do="Name every column in the first line.",
            )
        if len(name) > MAX_NAME:
            raise DiscrimError(
                f"column {number} has a name of {len(name):,} characters",
                place=place,
                do=f"At most {MAX_NAME} are read.",
            )
        if names.index(name) != number - 1:
            raise DiscrimError(
                f'two columns are called "{name}"',
                place=Place(file, line, *_span(source, separator, number - 1), source),
                do="Give each column its own name.",
            )
    if names and all(_is_number(name) for name in names):
        raise DiscrimError(
            "the first line holds numbers, not the names of the columns",
            place=place,
            do='Put a first line with the names, for example "run,A,B,rate".',
        )
    return tuple(names)


def _fitted(cells: list[str], wanted: int, separator: str, place: Place) -> tuple[str, ...]:
    """A row cut to as many cells as there are columns, if only empty ones are too many."""
    while len(cells) > wanted and not cells[-1]:
        cells = cells[:-1]
    if len(cells) == wanted:
        return tuple(cells)
    if not separator:
        raise DiscrimError(
            f"{len(cells)} cells, but {wanted} columns",
            place=place,
            do="Clear the cells beside the table, or name their columns in its first row.",
        )
    if len(cells) > wanted:  # underline what is too many
        start, _ = _span(place.text, separator, wanted)
        place = replace(place, column=start, length=len(place.text.rstrip()) - start + 1)
    do = f"Each line needs {wanted} cells, separated by a {_SEPARATORS[separator]}."
    if len(cells) > wanted and separator == ",":
        do += (
            " If the numbers have decimal commas, write them with points, or text that holds "
            "commas in quotes."
        )
    raise DiscrimError(f"{len(cells)} cells, but {wanted} columns", place=place, do=do)


def _checked(table: RawTable, header: Place) -> RawTable:
    if table.n > MAX_ROWS:
        raise DiscrimError(
            "the table has too many rows",
            place=header,
            do=f"At most {MAX_ROWS:,} runs are read.",
        )
    if not table.rows:
        raise DiscrimError(
            "the table has column names but no rows",
            place=header,
            do="One line a run must follow.",
        )
    return table


def _is_number(text: str) -> bool:
    try:
        float(text)
    except ValueError:
        return False
    return True


def _read_workbook(data: bytes, sheet: str | None, file: str, sha256: str) -> RawTable:
    here = Place(file)
    name, grid, formulas = sheet_cells(data, sheet, here)
    filled = [number for number, row in grid.items() if any(row)]
    filled = [n for n in filled if grid[n][0][:1] != "#" or grid[n][0] in SHEET_ERRORS]
    if not filled:
        raise DiscrimError(
            f'sheet "{name}" is empty',
            place=here,
            do="The first row names the columns; one row a run follows.",
        )
    where = Place(file, what=f'sheet "{name}", row {filled[0]}')
    lists = [grid[number] for number in filled]
    try:
        names = _names(lists[0], lists[1:], file, 0, "")
    except DiscrimError as error:
        raise error.at(where) from None
    cut = []
    for number, row in zip(filled[1:], lists[1:], strict=True):
        place = Place(file, what=f'sheet "{name}", row {number}')
        padded = row + [""] * (len(names) - len(row))
        cut.append(_fitted(padded, len(names), "", place))
    letters = tuple(letters_of(j) for j in range(len(names)))
    table = RawTable(
        file, names, tuple(cut), tuple(filled[1:]), ("",) * len(cut), sha256, name, ",", letters
    )
    for i, number in enumerate(table.lines):
        for j, column in enumerate(names):
            if not table.rows[i][j] and (number, j) in formulas:
                raise DiscrimError(
                    "a formula without a saved value",
                    place=table.place(i, column),
                    do="Open the workbook in a spreadsheet, let it calculate, and save it.",
                )
    return _checked(table, where)


def _span(text: str, separator: str, index: int) -> tuple[int, int]:
    """First column (from 1) and length of a cell on its line; quotes are respected."""
    start, cell, quoted = 0, 0, False
    for at, ch in enumerate(text):
        if ch == '"':
            quoted = not quoted
        elif ch == separator and not quoted:
            if cell == index:
                return _trimmed(text, start, at)
            start, cell = at + 1, cell + 1
    return _trimmed(text, start, len(text)) if cell == index else (0, 1)


def _trimmed(text: str, start: int, end: int) -> tuple[int, int]:
    inner = text[start:end]
    lead = len(inner) - len(inner.lstrip())
    return start + lead + 1, max(1, len(inner.strip()))
