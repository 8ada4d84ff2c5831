#!/usr/bin/python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
"""Tables read back by an outside reader: check_tables.py PROGRAM. Prints TAP.

Writes tables through the shared library beside PROGRAM and reads them with Python's csv and json
modules. Property names and data types of the metadata are those of "Metadata Vocabulary for
Tabular Data", W3C Recommendation, 17 December 2015, sections 5.3 to 5.6 and 5.11.1, from memory.
"""
import csv
import ctypes
import json
import os
import random
import re
import sys
import tempfile
import urllib.parse

library = ctypes.CDLL(
    os.path.join(os.path.dirname(os.path.abspath(sys.argv[1])), "libtwinhorizon.so")
)


class Column(ctypes.Structure):
    _fields_ = [
        (name, ctypes.c_char_p)
        for name in ("name", "title", "unit", "datatype", "description", "format")
    ]


library.th_table_put_number.argtypes = [ctypes.c_void_p, ctypes.c_double]
library.th_table_put_integer.argtypes = [ctypes.c_void_p, ctypes.c_long]
library.th_table_put_boolean.argtypes = [ctypes.c_void_p, ctypes.c_bool]
library.th_table_put_text.argtypes = [ctypes.c_void_p, ctypes.c_char_p]
for name in ("put_nothing", "keep", "destroy"):
    getattr(library, "th_table_" + name).argtypes = [ctypes.c_void_p]
for name in ("end_row", "finish"):
    getattr(library, "th_table_" + name).argtypes = [ctypes.c_void_p, ctypes.c_void_p]
library.th_version.restype = ctypes.c_char_p

PUT = {
    "number": lambda table, value: library.th_table_put_number(table, value),
    "integer": lambda table, value: library.th_table_put_integer(table, value),
    "boolean": lambda table, value: library.th_table_put_boolean(table, value),
    "string": lambda table, value: library.th_table_put_text(table, value.encode()),
}


def write(path, columns, title, case, rows):
    """columns: dicts with the fields of th_column; a cell that is None has no value."""
    fields = (Column * len(columns))(
        *(Column(**{k: v.encode() for k, v in column.items()}) for column in columns)
    )
    table = ctypes.c_void_p()
    status = library.th_table_create(
        path.encode(), None, fields, len(columns), title.encode(), case.encode(),
        ctypes.byref(table), None,
    )
    assert status == 0, status
    for row in rows:
        for column, value in zip(columns, row):
            if value is None:
                library.th_table_put_nothing(table)
            else:
                PUT[column["datatype"]](table, value)
        assert library.th_table_end_row(table, None) == 0
    assert library.th_table_finish(table, None) == 0
    library.th_table_destroy(table)


results = 0
failures = 0


def check(name, good, *details):
    global results, failures
    results += 1
    failures += not good
    print(f"{'ok' if good else 'not ok'} {results} - {name}")
    if not good:
        for detail in details:
            print("#  ", ascii(detail))


COLUMNS = [
    dict(name="gap", title="length of the pocket", unit="m", datatype="number"),
    dict(name="unstable", datatype="integer", description="growing modes, \"both\" signs"),
    dict(name="confirmed", title="confirmed", datatype="boolean"),
    dict(name="status", datatype="string", format="ok|undecided|\\d+"),
    dict(name="note", datatype="string"),
]
AWKWARD = ["plain", "", "a,b", 'say "no"', "two\nlines", "two\r\nlines", '"', ",", "\r\n", " ends ",
           "\u00b5m \u03c9\u2080 \U0001f30a", "tab\there", "'quoted'", '""', "=1+1", "\\n"]

random.seed(2385)
rows = [[2.385, 2, True, "ok", note] for note in AWKWARD]
rows += [[None, None, None, None, None], [0.0, -(2**31), False, "7", "end"]]
for _ in range(500):
    note = "".join(random.choice('ab ,"\n\r\u00e9;') for _ in range(random.randrange(8)))
    value = random.choice([-1, 1]) * random.random() * 10.0 ** random.randrange(-300, 300)
    rows.append([value, random.randrange(-10**6, 10**6), random.random() < 0.5, "ok", note])

TITLE = 'Growth "rates"'
CASE = "[flow]\nshape = step ; a \\ comment\n\tname = \u00b5\x01\x1f\x7f\u2028\n"

with tempfile.TemporaryDirectory() as folder:
    # a name that is no URL as it stands
    path = os.path.join(folder, "a: b%20#\u00e9.csv")
    write(path, COLUMNS, TITLE, CASE, rows)
    check("the table and its metadata are all that is left",
          sorted(os.listdir(folder)) == sorted([os.path.basename(path),
                                                os.path.basename(path) + "-metadata.json"]),
          os.listdir(folder))

    with open(path, newline="", encoding="utf-8") as file:
        read = list(csv.reader(file, strict=True))
    check("the header is the columns' names", read[0] == [c["name"] for c in COLUMNS], read[0])
    check("there are as many rows as were written", len(read) == len(rows) + 1, len(read))
    check("every row has all its cells", all(len(r) == len(COLUMNS) for r in read))
    empty = read[1 + len(AWKWARD)]
    check("cells without a value are empty", empty == [""] * len(COLUMNS), empty)

    pairs = [(r, w) for r, w in zip(read[1:], rows) if w[0] is not None]
    wrong = [(r[0], w[0]) for r, w in pairs if float(r[0]) != float(f"{w[0]:.15g}")]
    check("numbers come back to 15 digits", not wrong, *wrong[:3])
    wrong = [(r[1], w[1]) for r, w in pairs if int(r[1]) != w[1]]
    check("integers come back", not wrong, *wrong[:3])
    wrong = [(r[2], w[2]) for r, w in pairs if r[2] != ("true" if w[2] else "false")]
    check("booleans come back", not wrong, *wrong[:3])
    wrong = [(r[4], w[4]) for r, w in pairs if r[4] != w[4]]
    check("texts come back", not wrong, *wrong[:3])

    with open(path, "rb") as file:
        raw = file.read()
    outside = re.sub(rb'"(?:[^"]|"")*"', b"", raw)
    check("lines end in CR LF",
          outside.count(b"\r\n") == len(rows) + 1 == outside.count(b"\n") == outside.count(b"\r"),
          outside.count(b"\r\n"), outside.count(b"\n"))

    with open(path + "-metadata.json", encoding="utf-8") as file:
        metadata = json.load(file)
    check("the metadata follow the vocabulary", metadata["@context"] == "http://www.w3.org/ns/csvw")
    url = metadata["url"]
    check("the metadata point to the table",
          re.fullmatch(r"[A-Za-z0-9._~%-]+", url) is not None
          and urllib.parse.unquote(url) == os.path.basename(path), url)
    check("the title comes back", metadata["dc:title"] == TITLE, metadata["dc:title"])
    check("the whole case comes back", metadata["dc:source"] == CASE, metadata["dc:source"])
    check("the version is there",
          metadata["dc:creator"]["schema:softwareVersion"] == library.th_version().decode())
    described = metadata["tableSchema"]["columns"]
    check("columns are described in order", [c["name"] for c in described] == read[0])
    check("every header cell is among the titles of its column",
          all(header in c["titles"] for header, c in zip(read[0], described)))
    check("title, unit and type come back",
          described[0] == {"name": "gap", "titles": ["gap", "length of the pocket"],
                           "schema:unitText": "m", "datatype": "number"}, described[0])
    check("a description comes back", described[1]["dc:description"] == COLUMNS[1]["description"])
    check("a title that is the name is not written twice", described[2]["titles"] == ["confirmed"])
    check("a format comes back",
          described[3]["datatype"] == {"base": "string", "format": COLUMNS[3]["format"]})
    check("all common properties have a prefix of the initial context",
          all(key.split(":")[0] in ("dc", "schema") for part in [metadata, *described]
              for key in part if ":" in key))

print(f"1..{results}")
sys.exit(failures > 0)
