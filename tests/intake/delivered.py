"""Delivered tables for the tests: texts with tabs written as blanks, and workbooks from rows of cells."""

from openpyxl import Workbook

SHEET = ("S1", "S2", "S3")


def tabbed(*lines, end="\n"):
    """Return lines as a TSV text; runs of blanks are tabs, ``_`` is an empty cell."""
    rows = ["\t".join("" if word == "_" else word for word in line.split()) for line in lines]
    return end.join(rows) + end


def write(folder, name, content):
    """Write text or bytes to a file and return its path."""
    path = folder / name
    path.write_bytes(content if isinstance(content, bytes) else content.encode("utf-8"))
    return path


def workbook(path, rows, *, formats=None, others=(), formulas=False):
    """Write rows of cells to a workbook's sheet ``data``.

    ``formats`` maps cell names to number formats, ``others`` are further sheets (name, rows). Texts that start
    with ``=`` are texts, unless ``formulas``.
    """
    book = Workbook()
    for k, (name, cells) in enumerate([("data", rows), *others]):
        sheet = book.active if k == 0 else book.create_sheet()
        sheet.title = name
        for i, row in enumerate(cells, start=1):
            for j, value in enumerate(row, start=1):
                cell = sheet.cell(i, j, value)
                if isinstance(value, str) and value.startswith("=") and not formulas:
                    cell.data_type = "s"
    for cell, number_format in (formats or {}).items():
        book["data"][cell].number_format = number_format
    book.save(path)
    return path
