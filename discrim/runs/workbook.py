"""Cells of a workbook (.xlsx) as text, as its sheet shows them; nothing in it is run."""

from __future__ import annotations

import io
import warnings
import zipfile
from typing import Any

from discrim.errors import DiscrimError, Place

MAX_UNPACKED = 512 * 1024 * 1024  # a small archive can hold a huge sheet
MAX_ROWS = 100_000
MAX_CELL = 10_000
SHEET_ERRORS = ("#N/A", "#DIV/0!", "#VALUE!", "#REF!", "#NAME?", "#NUM!", "#NULL!")


def sheet_cells(
    data: bytes, sheet: str | None, here: Place
) -> tuple[str, dict[int, list[str]], set[tuple[int, int]]]:
    """Name of the sheet, its cells as text by row number, and the cells that hold formulas.

    Formulas give the values that were saved with them. Cells that hold formulas are (row, column)
    from (1, 0), and looked for only where some cell is empty.
    """
    import openpyxl

    _check_archive(data, here)

    def opened(values: bool) -> Any:
        return openpyxl.load_workbook(io.BytesIO(data), read_only=True, data_only=values)

    with warnings.catch_warnings():
        # What openpyxl warns of (styles, validation lists) does not touch the values.
        warnings.simplefilter("ignore")
        try:
            book = opened(True)
        except Exception as error:  # many kinds, for many ways of being broken
            raise DiscrimError(
                f"the workbook cannot be read ({type(error).__name__})",
                place=here,
                do="Open it in a spreadsheet and save it again as .xlsx.",
            ) from None
        names = list(book.sheetnames)
        if sheet is None and len(names) > 1:
            raise DiscrimError(
                f"the workbook has {len(names)} sheets: {', '.join(names[:12])}",
                place=here,
                do='Name the one with the runs: sheet = "...".',
            )
        if sheet is not None and sheet not in names:
            raise DiscrimError(
                f'there is no sheet "{sheet}"',
                place=here,
                do=f"The sheets are: {', '.join(names[:12])}.",
            )
        name = sheet or names[0]
        grid: dict[int, list[str]] = {}
        formulas: set[tuple[int, int]] = set()
        try:
            blanks = False
            for number, row in enumerate(book[name].iter_rows(max_row=MAX_ROWS + 1), 1):
                texts = [_cell_text(cell) for cell in row]
                while texts and not texts[-1]:
                    texts.pop()
                blanks = blanks or "" in texts
                if texts:
                    grid[number] = texts
            if blanks or len({len(row) for row in grid.values()}) > 1:
                again = opened(False)
                for number, row in enumerate(again[name].iter_rows(max_row=MAX_ROWS + 1), 1):
                    for j, cell in enumerate(row):
                        if isinstance(cell.value, str) and cell.value.startswith("="):
                            formulas.add((number, j))
                again.close()
        except DiscrimError:
            raise
        except Exception as error:
            raise DiscrimError(
                f'sheet "{name}" cannot be read ({type(error).__name__})',
                place=here,
                do="Open it in a spreadsheet and save it again as .xlsx.",
            ) from None
        finally:
            book.close()
    return name, grid, formulas


def _cell_text(cell: Any) -> str:
    """A cell as its sheet shows it, as far as that loses nothing: 0.6 in format 0.000 is 0.600."""
    value = cell.value
    if value is None:
        return ""
    if isinstance(value, bool):
        return "TRUE" if value else "FALSE"
    if isinstance(value, int):
        value = float(value) if abs(value) < 1e15 else value
    if isinstance(value, float):
        text = f"{value:.15g}"
        shown = cell.number_format or ""
        head, _, decimals = shown.partition(".")
        if set(head) <= set("#,0") and decimals and set(decimals) == {"0"} and len(decimals) < 16:
            fixed = f"{value:.{len(decimals)}f}"
            if float(fixed) == float(text):
                return fixed
        return text
    return str(value).strip()[: MAX_CELL + 1]


def letters_of(index: int) -> str:
    out = ""
    index += 1
    while index:
        index, rest = divmod(index - 1, 26)
        out = chr(65 + rest) + out
    return out


def _check_archive(data: bytes, here: Place) -> None:
    try:
        with zipfile.ZipFile(io.BytesIO(data)) as archive:
            unpacked = sum(entry.file_size for entry in archive.infolist())
    except (zipfile.BadZipFile, ValueError):
        raise DiscrimError(
            "not a workbook",
            place=here,
            do="Save it as .xlsx, or name it .csv if it is text.",
        ) from None
    if unpacked > MAX_UNPACKED:
        raise DiscrimError(
            f"the workbook unpacks to {unpacked / 1e6:.0f} MB",
            place=here,
            do="Put the table of runs into a workbook of its own.",
        )
