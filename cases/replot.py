#!/usr/bin/python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
"""Draw the growth curve of a sweep and the shape of a mode with standard packages:
replot.py FOLDER [MODES.h5] PICTURE. FOLDER is the --out of a sweep over one axis; MODES.h5 comes from
`solve --modes`. Units are taken from the metadata beside each table.
"""
import csv
import json
import sys

import h5py
import matplotlib

matplotlib.use("Agg")
import matplotlib.pyplot as plt  # noqa: E402


def table(path):
    """Columns by name as lists of text, and their units."""
    with open(path + "-metadata.json", encoding="utf-8") as file:
        columns = json.load(file)["tableSchema"]["columns"]
    unit = {c["name"]: c.get("schema:unitText", "") for c in columns}
    with open(path, newline="", encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    return {name: [row[name] for row in rows] for name in unit}, unit


folder, picture = sys.argv[1], sys.argv[-1]
points, unit = table(folder + "/points.csv")
modes, _ = table(folder + "/modes.csv")
axis = next(iter(points))
figure, panel = plt.subplots(1, len(sys.argv) - 2, figsize=(6 * (len(sys.argv) - 2), 4), squeeze=False)
for branch in sorted(set(modes["branch"]), key=int):
    rows = [i for i, b in enumerate(modes["branch"]) if b == branch and modes["label"][i] == "unstable"]
    panel[0, 0].plot([float(modes[axis][i]) for i in rows], [float(modes["omega_im"][i]) for i in rows],
                     label=f"branch {branch}")
panel[0, 0].plot([float(x) for x in points[axis]], [float(g) for g in points["growth_max"]],
                 "k.", markersize=3, label="largest")
panel[0, 0].set_xlabel(f"{axis} ({unit[axis] or 'reduced'})")
panel[0, 0].set_ylabel(f"growth rate ({unit['growth_max'] or 'reduced'})")
panel[0, 0].legend()
if len(sys.argv) == 4:
    with h5py.File(sys.argv[2]) as file:
        x, width = file["x"], file["x"].attrs["unit"]
        for name in ("u", "v"):
            shape = file[name + "_re"][0] + 1j * file[name + "_im"][0]  # [mode, x]: the fastest
            panel[0, 1].plot(x[:], abs(shape), label=f"|{name}|")
        panel[0, 1].set_xlabel(f"x ({width})")
        panel[0, 1].legend()
figure.tight_layout()
figure.savefig(picture)
