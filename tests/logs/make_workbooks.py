"""Writes the workbooks of this folder that no library of the tests can write: .xls and .xlsb.

    python -m venv venv && venv/bin/pip install -r requirements.txt
    venv/bin/python make_workbooks.py

Each holds the trace of trace.csv. The .xls files are written by xlwt. The .xlsb files are written here
record by record ([MS-XLSB], section 2.4 for the records, 2.5.122 for RkNumber) and read back with pyxlsb.
The same input gives the same bytes.
"""

import csv
import datetime
import struct
import zipfile
from pathlib import Path

import pyxlsb
import xlwt

FOLDER = Path(__file__).parent
HEADINGS = ["Time", "FIC-301.PV [m³/h]", "FIC-301.OP", "FIC-301.SP", "FIC-301.MODE"]
# Rows of the trace whose PV, and whose OP, is an error value where a file has such.
BAD_PV = (50, 51)
BAD_OP = (90,)
# Both formats keep the same codes.
ERROR_CODES = {"#VALUE!": 0x0F, "#N/A": 0x2A}


def trace():
    with open(FOLDER / "trace.csv", encoding="utf-8", newline="") as file:
        for row in csv.DictReader(file):
            yield (
                datetime.datetime.fromisoformat(row["time"]),
                float(row["pv"]),
                float(row["op"]),
                float(row["sp"]),
                row["mode"],
            )


# ---- .xls -----------------------------------------------------------------------------------------


def xls(name, *, apart=False, since_1904=False, errors=False):
    book = xlwt.Workbook()
    book.dates_1904 = since_1904
    cover = book.add_sheet("Cover")
    cover.write(0, 0, "Step tests of unit 300")
    cover.write(2, 0, "Printed")
    cover.write(2, 1, "2026-03-15 07:00")
    sheet = book.add_sheet("Trend")
    styles = {
        kind: xlwt.easyxf(num_format_str=text)
        for kind, text in {
            "stamp": "yyyy-mm-dd hh:mm:ss",
            "date": "dd/mm/yyyy",
            "time": "hh:mm:ss",
        }.items()
    }
    # Titles merged over the columns; the used range begins at C3.
    sheet.write_merge(2, 2, 2, 6, "Unit 300, feed flow")
    sheet.write_merge(3, 3, 2, 6, "Night shift")
    headings = ["Date", *HEADINGS] if apart else HEADINGS
    for column, text in enumerate(headings):
        sheet.write(5, 2 + column, text)
    for k, (at, pv, op, sp, mode) in enumerate(trace()):
        row = 6 + k
        if apart:
            sheet.write(row, 2, at.date(), styles["date"])
            sheet.write(row, 3, at.time(), styles["time"])
        else:
            sheet.write(row, 2, at, styles["stamp"])
        first = 4 if apart else 3
        bad = {first: "#N/A"} if errors and k in BAD_PV else {}
        bad |= {first + 1: "#VALUE!"} if errors and k in BAD_OP else {}
        for column, value in enumerate([pv, op, sp, mode], first):
            if column in bad:
                sheet.row(row).set_cell_error(column, ERROR_CODES[bad[column]])
            else:
                sheet.write(row, column, value)
    book.save(str(FOLDER / name))


# ---- .xlsb ----------------------------------------------------------------------------------------

ROW_HEADER, CELL_RK, CELL_ERROR, CELL_REAL, CELL_TEXT, CELL_SHARED, FORMULA_NUMBER = 0, 2, 3, 5, 6, 7, 9
SHARED_ITEM, FORMAT, STYLE = 19, 44, 47
BEGIN_SHEET, END_SHEET, BEGIN_BOOK, END_BOOK = 129, 130, 131, 132
BEGIN_SHEETS, END_SHEETS, BEGIN_DATA, END_DATA, DIMENSION = 143, 144, 145, 146, 148
BOOK_PROPERTIES, SHEET_OF_BOOK, CALCULATION, BEGIN_SHARED, END_SHARED = 153, 156, 157, 159, 160
MERGED, BEGIN_MERGED, END_MERGED = 176, 177, 178
BEGIN_STYLES, END_STYLES, BEGIN_FORMATS, END_FORMATS, BEGIN_CELL_STYLES, END_CELL_STYLES = 278, 279, 615, 616, 617, 618
STYLES = {"general": 0, "stamp": 1, "date": 2, "time": 3}


def record(kind, body=b""):
    """A record: its kind in one or two bytes, its length in groups of seven bits, its body."""
    head = bytes([kind]) if kind < 128 else bytes([kind & 0x7F | 0x80, kind >> 7])
    length, left = b"", len(body)
    while True:
        group, left = left & 0x7F, left >> 7
        length += bytes([group | 0x80 if left else group])
        if not left:
            return head + length + body


def wide(text):
    coded = text.encode("utf-16-le")
    return struct.pack("<I", len(coded) // 2) + coded


def cell(kind, column, value, style="general"):
    return record(kind, struct.pack("<II", column, STYLES[style]) + value)


def number(column, value, style="general"):
    """A number as a spreadsheet program keeps it: hundredths that fit in 30 bits as an RkNumber."""
    hundredths = round(value * 100)
    if style == "general" and hundredths / 100 == value and abs(hundredths) < 1 << 29:
        return cell(CELL_RK, column, struct.pack("<i", hundredths << 2 | 3))
    return cell(CELL_REAL, column, struct.pack("<d", value), style)


def formula(column, value):
    """A formula that is a number (a PtgNum), with its result."""
    tokens = struct.pack("<Bd", 0x1F, value)
    body = struct.pack("<dHI", value, 0, len(tokens)) + tokens + struct.pack("<I", 0)
    return cell(FORMULA_NUMBER, column, body)


def xlsb(name, *, apart=False, since_1904=False, errors=False, formulas=False):
    zero = datetime.datetime(1904, 1, 1) if since_1904 else datetime.datetime(1899, 12, 30)
    headings = ["Date", *HEADINGS] if apart else HEADINGS
    shared = ["Unit 300, feed flow", *headings, *sorted({mode for *_, mode in trace()})]

    def day(at):
        return (at - zero) / datetime.timedelta(days=1)

    def row(number, cells):
        return record(ROW_HEADER, struct.pack("<IIHHBI", number, 0, 300, 0, 0, 0)) + b"".join(cells)

    last = 3 + 200
    data = [record(BEGIN_SHEET)]
    data.append(record(DIMENSION, struct.pack("<IIII", 1, last, 2, 1 + len(headings))))
    data.append(record(BEGIN_DATA))
    data.append(row(1, [cell(CELL_SHARED, 2, struct.pack("<I", 0))]))
    data.append(
        row(3, [cell(CELL_SHARED, 2 + k, struct.pack("<I", shared.index(text))) for k, text in enumerate(headings)])
    )
    for k, (at, pv, op, sp, mode) in enumerate(trace()):
        midnight = datetime.datetime.combine(at.date(), datetime.time())
        if apart:
            cells = [number(2, day(midnight), "date"), number(3, day(at) - day(midnight), "time")]
        else:
            cells = [number(2, day(at), "stamp")]
        first = 4 if apart else 3
        write = formula if formulas else number
        bad_pv, bad_op = errors and k in BAD_PV, errors and k in BAD_OP
        error = {name: struct.pack("<B", code) for name, code in ERROR_CODES.items()}
        cells.append(cell(CELL_ERROR, first, error["#N/A"]) if bad_pv else write(first, pv))
        cells.append(cell(CELL_ERROR, first + 1, error["#VALUE!"]) if bad_op else write(first + 1, op))
        cells.append(number(first + 2, sp))
        cells.append(cell(CELL_SHARED, first + 3, struct.pack("<I", shared.index(mode))))
        data.append(row(4 + k, cells))
    data.append(record(END_DATA))
    data.append(record(BEGIN_MERGED, struct.pack("<I", 1)))
    data.append(record(MERGED, struct.pack("<IIII", 1, 1, 2, 6)))
    data.append(record(END_MERGED))
    data.append(record(END_SHEET))
    cover = [record(BEGIN_SHEET), record(DIMENSION, struct.pack("<IIII", 0, 0, 0, 0)), record(BEGIN_DATA)]
    cover.append(row(0, [cell(CELL_TEXT, 0, wide("Step tests of unit 300"))]))
    cover += [record(END_DATA), record(END_SHEET)]

    book = [record(BEGIN_BOOK), record(BOOK_PROPERTIES, struct.pack("<III", int(since_1904), 0, 0))]
    book.append(record(BEGIN_SHEETS))
    for number_of, title in enumerate(["Cover", "Trend"], 1):
        body = struct.pack("<II", 0, number_of) + wide(f"rId{number_of}") + wide(title)
        book.append(record(SHEET_OF_BOOK, body))
    book += [record(END_SHEETS), record(CALCULATION, struct.pack("<IIIdIB", 0, 1, 100, 0.001, 1, 0)), record(END_BOOK)]

    formats = {164: "yyyy\\-mm\\-dd\\ hh:mm:ss", 165: "dd/mm/yyyy", 166: "hh:mm:ss"}
    styles = [record(BEGIN_STYLES), record(BEGIN_FORMATS, struct.pack("<I", len(formats)))]
    styles += [record(FORMAT, struct.pack("<H", code) + wide(text)) for code, text in formats.items()]
    styles += [record(END_FORMATS), record(BEGIN_CELL_STYLES, struct.pack("<I", len(STYLES)))]
    styles += [record(STYLE, struct.pack("<HHHHHBBHH", 0, code, 0, 0, 0, 0, 0, 0, 0)) for code in [0, *formats]]
    styles += [record(END_CELL_STYLES), record(END_STYLES)]

    texts = [record(BEGIN_SHARED, struct.pack("<II", len(shared), len(shared)))]
    texts += [record(SHARED_ITEM, b"\0" + wide(text)) for text in shared]
    texts.append(record(END_SHARED))

    office = "http://schemas.openxmlformats.org/officeDocument/2006/relationships"
    package = "http://schemas.openxmlformats.org/package/2006"
    kinds = {
        "/xl/workbook.bin": "application/vnd.ms-excel.sheet.binary.macroEnabled.main",
        "/xl/worksheets/sheet1.bin": "application/vnd.ms-excel.worksheet",
        "/xl/worksheets/sheet2.bin": "application/vnd.ms-excel.worksheet",
        "/xl/styles.bin": "application/vnd.ms-excel.styles",
        "/xl/sharedStrings.bin": "application/vnd.ms-excel.sharedStrings",
    }
    xml = '<?xml version="1.0" encoding="UTF-8" standalone="yes"?>'

    def relations(targets):
        items = "".join(
            f'<Relationship Id="rId{k}" Type="{office}/{kind}" Target="{target}"/>'
            for k, (kind, target) in enumerate(targets, 1)
        )
        return f'{xml}<Relationships xmlns="{package}/relationships">{items}</Relationships>'

    parts = {
        "[Content_Types].xml": f'{xml}<Types xmlns="{package}/content-types">'
        '<Default Extension="rels" ContentType="application/vnd.openxmlformats-package.relationships+xml"/>'
        + "".join(f'<Override PartName="{part}" ContentType="{kind}"/>' for part, kind in kinds.items())
        + "</Types>",
        "_rels/.rels": relations([("officeDocument", "xl/workbook.bin")]),
        "xl/_rels/workbook.bin.rels": relations(
            [
                ("worksheet", "worksheets/sheet1.bin"),
                ("worksheet", "worksheets/sheet2.bin"),
                ("styles", "styles.bin"),
                ("sharedStrings", "sharedStrings.bin"),
            ]
        ),
        "xl/workbook.bin": b"".join(book),
        "xl/styles.bin": b"".join(styles),
        "xl/sharedStrings.bin": b"".join(texts),
        "xl/worksheets/sheet1.bin": b"".join(cover),
        "xl/worksheets/sheet2.bin": b"".join(data),
    }
    with zipfile.ZipFile(FOLDER / name, "w", zipfile.ZIP_DEFLATED) as archive:
        for part, content in parts.items():
            archive.writestr(zipfile.ZipInfo(part), content, zipfile.ZIP_DEFLATED)
    check_xlsb(name, zero, apart, errors)


def check_xlsb(name, zero, apart, errors):
    """Holds a written file against the trace as another reader sees it."""
    with pyxlsb.open_workbook(str(FOLDER / name)) as book:
        assert book.sheets == ["Cover", "Trend"], book.sheets
        with book.get_sheet("Trend") as sheet:
            rows = [[cell.v for cell in row if cell.c >= 2] for row in sheet.rows(sparse=True)]
    assert rows[1] == (["Date", *HEADINGS] if apart else HEADINGS), rows[1]
    for k, ((at, pv, op, sp, mode), row) in enumerate(zip(trace(), rows[2:], strict=True)):
        *clock, read_pv, read_op, read_sp, read_mode = row
        seconds = round(sum(clock) * 86_400)
        assert zero + datetime.timedelta(seconds=seconds) == at, (name, k, row)
        assert errors and k in BAD_PV or read_pv == pv, (name, k, row)
        assert errors and k in BAD_OP or read_op == op, (name, k, row)
        assert (read_sp, read_mode) == (sp, mode), (name, k, row)


for ending, write in [("xls", xls), ("xlsb", xlsb)]:
    write(f"trend.{ending}")
    write(f"apart_1904.{ending}", apart=True, since_1904=True)
    write(f"errors.{ending}", errors=True)
xlsb("formulas.xlsb", formulas=True)
