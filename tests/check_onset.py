#!/usr/bin/python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
"""The command `onset` from outside: check_onset.py PROGRAM prints TAP.

Tables against closed forms and against an integration of the static equation by scipy that shares
nothing with the program; SI units; maps for 1, 2 and 7 threads; messages and exit codes."""
import csv
import io
import json
import math
import os
import subprocess
import sys
import tempfile

from scipy.integrate import solve_ivp
from scipy.optimize import brentq

program = os.path.abspath(sys.argv[1])
folder = tempfile.TemporaryDirectory()
results = failures = 0


def check(name, good, *details):
    global results, failures
    results += 1
    failures += not good
    print(f"{'ok' if good else 'not ok'} {results} - {name}", flush=True)
    if not good:
        for detail in details:
            print("#  ", ascii(detail))


def case(text):
    path = os.path.join(folder.name, "case.ini")
    with open(path, "w", encoding="utf-8") as file:
        file.write(text)
    return path


def run(*words):
    done = subprocess.run([program, "onset", *words], capture_output=True, text=True)
    return done.returncode, done.stdout, done.stderr


def table(*words):
    code, out, err = run(*words, "--csv", "-")
    return code, list(csv.DictReader(io.StringIO(out, newline=""), strict=True)), err


def reduced(shape, **keys):
    return ("[units]\nsystem = reduced\n[flow]\nshape = " + shape + "\n"
            + "".join(f"{key} = {value}\n" for key, value in keys.items()))


def step_lengths(v, c_u, c_p, c_d, count):
    """[atan(k_u/k_0) + atan(k_d/k_0) + j pi]/k_0: set-up of Phys. Rev. D 88, 125012 (2013)"""
    k = [2 * math.sqrt(abs(c * c - v * v)) for c in (c_u, c_p, c_d)]
    return [(math.atan(k[0] / k[1]) + math.atan(k[2] / k[1]) + j * math.pi) / k[1]
            for j in range(count)]


# ---- one configuration
STEP = reduced("step", speed=0.75, sound_upstream=1, sound_pocket=0.3, sound_downstream=1, gap=2)
want = step_lengths(0.75, 1, 0.3, 1, 4)
code, rows, err = table(case(STEP))
check("step: exit 0, nothing on standard error", code == 0 and err == "", code, err)
check("step: the columns", list(rows[0]) == ["order", "gap", "gap_error", "kind", "change", "omega_re"],
      list(rows[0]))
check("step: as the closed form up to four times the gap",
      len(rows) == 4 and all(abs(float(r["gap"]) - w) < 1e-12 for r, w in zip(rows, want)), rows)
check("step: orders and kinds", [(r["order"], r["kind"], r["change"]) for r in rows]
      == [("0", "growing", "1"), ("1", "pair", "1"), ("2", "growing", "1"), ("3", "pair", "1")], rows)
check("--upto", len(table(case(STEP), "--upto", "5.6")[1]) == 2)
check("--orders", len(table(case(STEP), "--orders", "3")[1]) == 3)
check("an axis over the gap says how far",
      len(table(case(STEP + "[sweep]\ngap = 1 to 3.4 in 5\n"))[1]) == 2)
code, text, err = run(case(STEP))
check("text: the answer in a sentence, then each length",
      code == 0 and text.startswith("4 switch-on lengths up to gap = 8: from 0 to 4 growing modes.\n")
      and all(f"{w:.9f}" in text for w in want) and "0 below the first" in text, text)
code, text, err = run(case(STEP), "--upto", "1")
check("text: nothing switches on",
      code == 0 and text.startswith("No change: 0 growing modes at every gap up to 1.\n"), text)

path = os.path.join(folder.name, "onset.csv")
code, text, err = run(case(STEP), "--csv", path)
with open(path + "-metadata.json", encoding="utf-8") as file:
    columns = {c["name"]: c for c in json.load(file)["tableSchema"]["columns"]}
check("a file: text too, and metadata", code == 0 and text.startswith("4 switch-on lengths")
      and columns["kind"]["datatype"]["format"] == "growing|pair"
      and "schema:unitText" not in columns["gap"], columns)

# ---- SI: the same flow with c = 0.9 mm/s upstream
SI = ("[units]\nsystem = SI\n[atom]\nspecies = K-39\n[flow]\nshape = step\nspeed = 0.675 mm/s\n"
      "sound_upstream = 0.9 mm/s\nsound_pocket = 0.27 mm/s\nsound_downstream = 0.9 mm/s\n"
      "gap = 4 um\n")
# hbar/(m c) with CODATA 2018 and 38.9637064864 u, "The AME 2020 atomic mass evaluation",
# Chin. Phys. C 45, 030003 (2021)
length = 1.054571817e-34 / (38.9637064864 * 1.66053906660e-27 * 0.9e-3)
code, rows, err = table(case(SI), "--upto", "15 um")
check("SI: metres", code == 0 and len(rows) == 4
      and all(abs(float(r["gap"]) / (w * length) - 1) < 1e-8 for r, w in zip(rows, want)), rows, err)
code, text, err = run(case(SI), "--upto", "15 um")
check("SI: micrometres in the text", "gap/um" in text and f"{want[0] * length * 1e6:.9f}"[:7] in text, text)
code, text, err = run(case(SI), "--upto", "14")
check("SI: a bare length is an error", code == 2 and text == "" and "um" in err, err)


# ---- a smooth pocket: zeros of the mismatch of eta'/eta at the middle, by scipy
def smooth_mismatch(gap, v, c_u, c_p, c_d, w_b, w_w):
    x_b = -gap / 2 - w_b * math.atanh((c_u + c_p - 2 * v) / (c_u - c_p))
    x_w = gap / 2 + w_w * math.atanh((c_d + c_p - 2 * v) / (c_d - c_p))

    def slope(x, y):
        c = (c_p + (c_u - c_p) * (1 - math.tanh((x - x_b) / w_b)) / 2
             + (c_d - c_p) * (1 + math.tanh((x - x_w) / w_w)) / 2)
        return [y[1], 4 * (c * c - v * v) * y[0]]

    ends = []
    for start, c, sign in ((x_b - 18 * w_b, c_u, 1), (x_w + 18 * w_w, c_d, -1)):
        k = 2 * math.sqrt(c * c - v * v)
        done = solve_ivp(slope, (start, 0), [1, sign * k], method="DOP853", rtol=1e-12, atol=1e-300)
        ends.append(done.y[:, -1] / math.hypot(*done.y[:, -1]))
    return ends[0][0] * ends[1][1] - ends[0][1] * ends[1][0]


FLOW = dict(speed=1, sound_upstream=1.35, sound_pocket=0.55, sound_downstream=1.45,
            width_black=0.5, width_white=0.7, gap=2)
code, rows, err = table(case(reduced("tanh", **FLOW)), "--upto", "8")
off = []
for r in rows:
    gap = float(r["gap"])
    root = brentq(smooth_mismatch, gap - 0.2, gap + 0.2, xtol=1e-13, rtol=1e-14,
                  args=(1, 1.35, 0.55, 1.45, 0.5, 0.7))
    off.append(abs(root - gap))
check("tanh: as scipy to 1e-10", code == 0 and len(rows) == 4 and max(off) < 1e-10, off)


# ---- the density varies: -(n eta')' + 4 n (c^2 - v^2) eta = 0 with n = 1/v, c^2 = c_u^2 v_u/v
def varying_mismatch(gap, v_u, v_p, v_d, c_u, w_b, w_w):
    v_h = (c_u**2 * v_u) ** (1 / 3)  # v = c
    x_b = -gap / 2 - w_b * math.atanh((v_u + v_p - 2 * v_h) / (v_u - v_p))
    x_w = gap / 2 + w_w * math.atanh((v_d + v_p - 2 * v_h) / (v_d - v_p))

    def slope(x, y):
        v = (v_p + (v_u - v_p) * (1 - math.tanh((x - x_b) / w_b)) / 2
             + (v_d - v_p) * (1 + math.tanh((x - x_w) / w_w)) / 2)
        return [y[1] * v, 4 / v * (c_u**2 * v_u / v - v * v) * y[0]]

    ends = []
    for start, v, sign in ((x_b - 18 * w_b, v_u, 1), (x_w + 18 * w_w, v_d, -1)):
        k = 2 * math.sqrt(c_u**2 * v_u / v - v * v)
        done = solve_ivp(slope, (start, 0), [1, sign * k / v], method="DOP853", rtol=1e-12,
                         atol=1e-300)
        ends.append(done.y[:, -1] / math.hypot(*done.y[:, -1]))
    return ends[0][0] * ends[1][1] - ends[0][1] * ends[1][0]


code, rows, err = table(case(reduced(
    "continuity", speed_upstream=0.6, speed_pocket=1.4, speed_downstream=0.5, sound_upstream=1,
    width_black=0.5, width_white=0.7, gap=2)), "--upto", "6")
off = []
for r in rows:
    gap = float(r["gap"])
    root = brentq(varying_mismatch, gap - 0.2, gap + 0.2, xtol=1e-13, rtol=1e-14,
                  args=(0.6, 1.4, 0.5, 1, 0.5, 0.7))
    off.append(abs(root - gap))
check("continuity: as scipy to 1e-10", code == 0 and len(rows) >= 3 and max(off) < 1e-10, off, rows)

# ---- a flow that is solved for: a sharp well of the depth that makes a plateau turns over at the
# gaps j pi/(2 sqrt(1/m^2 - m^2)) of the exact one, the first modes growing at every gap
code, rows, err = table(case(reduced("potential", profile="well", mach=0.6, gap=1)))
want = [j * math.pi / (2 * math.sqrt(1 / 0.36 - 0.36)) for j in range(1, len(rows) + 1)]
check("potential: as the exact well", code == 0 and len(rows) == 3
      and all(abs(float(r["gap"]) - w) < 1e-11 for r, w in zip(rows, want)), rows, want, err)

# ---- sech: the key is width, the column stays gap
code, rows, err = table(case(reduced("sech", speed=1, sound_upstream=1.5, depth=2, width=2)))
k, d = 2 * math.sqrt(1.25), 4 * 2 - 5
want = [((2 * j + 1) * k + math.sqrt((2 * j + 1) ** 2 * k * k + 4 * d * (j * j + j))) / (2 * d)
        for j in range(len(rows))]  # Poeschl-Teller
check("sech: widths", code == 0 and len(rows) >= 2
      and all(abs(float(r["gap"]) - w) < 1e-11 for r, w in zip(rows, want)), rows, want)

# ---- maps
MAP = reduced("step", speed=1, sound_upstream=1.5, sound_pocket=0.5, sound_downstream=1.4, gap=2) + (
    "[sweep]\nsound_pocket = 0.3, 0.5, 0.7\ngap = 1, 6\nspeed = 0.8 to 1.3 in 60\n")
tables = [run(case(MAP), "--csv", "-", "--threads", str(n))[1] for n in (1, 2, 7)]
check("map: the same bytes for 1, 2 and 7 threads", tables[0] == tables[1] == tables[2])
code, rows, err = table(case(MAP))
check("map: the axes but the gap's come first",
      list(rows[0])[:4] == ["sound_pocket", "speed", "order", "gap"], list(rows[0]))
expected = [(c, v, j, w) for c in (0.3, 0.5, 0.7) for v in (0.8 + 0.5 * i / 59 for i in range(60))
            for j, w in enumerate(step_lengths(v, 1.5, c, 1.4, 12)) if w <= 6]
got = [tuple(float(r[key]) for key in ("sound_pocket", "speed", "order", "gap")) for r in rows]
worst = max(max(abs(a - b) for a, b in zip(g, e)) for g, e in zip(got, expected))
check("map: every row as the closed form", code == 0 and len(got) == len(expected) and worst < 1e-11,
      len(got), len(expected), worst)
code, rows, err = table(case(MAP.replace("1.3 in 60", "1.45 in 14")))
points = {(r["sound_pocket"], r["speed"]) for r in rows}
check("map: points without an answer are named and the rest is there",
      code == 1 and len(points) == 36 and len(err.splitlines()) == 6
      and all(line.startswith("twinhorizon: point ") and "subsonic" in line
              for line in err.splitlines()), code, len(points), err)
code, text, err = run(case(MAP), "--csv", path)
check("map: a file and one line", code == 0
      and text.startswith(f"180 points: {len(expected)} switch-on lengths, 0 failed; table "), text)
code, text, err = run(case(MAP), "--orders", "1")
check("map: text", code == 0 and "At sound_pocket = 0.3, speed = 0.8: The first 1 switch-on" in text
      and "180 points: 180 switch-on lengths" in text, text[:200])

# ---- a ring: stability comes and goes
RING = reduced("step", sound_upstream=1.4, sound_pocket=0.6, sound_downstream=1.4, gap=2) + (
    "[ends]\nkind = ring\ncircumference = 12\nwinding = 2\n")
code, rows, err = table(case(RING), "--samples", "10", "--upto", "4")
changes = [int(r["change"]) for r in rows]
check("ring: changes both ways, by 1 growing or 2 pair",
      code == 0 and any(c > 0 for c in changes) and any(c < 0 for c in changes)
      and all((r["kind"] == "pair") == (abs(c) == 2) == (float(r["omega_re"]) > 0)
              for r, c in zip(rows, changes)), rows, err)
code, text, err = run(case(RING), "--samples", "10", "--upto", "4")
check("ring: text with frequencies", code == 0 and "frequency" in text and "ring" in text, text)

# ---- messages
for words, says in ((("--upto", "-1"), "length > 0"), (("--upto", "x"), "--upto"),
                    (("--orders", "0"), ">= 1"), (("--orders", "1.5"), "whole"),
                    (("--samples", "1"), ">= 2"), (("--threads", "0"), "from 1 to 1024"),
                    (("--nothing",), "--nothing"),
                    (("--csv", "/nonexistent/x.csv"), "/nonexistent")):
    code, text, err = run(case(STEP), *words)
    check(f"{' '.join(words)} is refused", code == 2 and text == "" and says in err
          and len(err.splitlines()) == 1, code, text, err)
code, text, err = run(case(STEP), "--set", "flow.sound_upstream=0.7")
check("a supersonic end: one sentence, exit 1",
      code == 1 and text == "" and "subsonic" in err and len(err.splitlines()) == 1, code, err)
code, text, err = run("--help")
check("--help names the default of --upto", code == 0 and "4 times the base value" in text, text)

folder.cleanup()
print(f"1..{results}")
sys.exit(failures > 0)
