#!/usr/bin/python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
"""The numbers of `plan` by another route: check_plan.py PROGRAM. Prints TAP.

Conversions and limits from the numbers of the case with scipy.constants (CODATA); the text against the
table; the case against itself in reduced units; ripples against numpy's Fourier transform of the shapes that
`solve --modes` writes; the best length against a sweep; times to visibility against the amplitudes. The case
is invented.
"""
import csv
import math
import os
import re
import subprocess
import sys
import tempfile

import numpy as np
from scipy import constants as si

program = os.path.abspath(sys.argv[1])
results = failures = 0

MASS = 86.909180529 * si.atomic_mass  # rubidium-87 in u: AME 2012 evaluation, from memory
V, CU, CP, CD, WB, WW, GAP = 0.51e-3, 0.79e-3, 0.23e-3, 0.74e-3, 1.1e-6, 0.9e-6, 8.3e-6
HOLD, LIFE, T, RES, VIS, PERP, N = 0.4, 3.0, 1.3e-9, 1.4e-6, 0.3, 2 * math.pi * 900, 95e6
PLAN = """[plan]
hold_time = 400 ms
lifetime = 3 s
temperature = 1.3 nK
resolution = 1.4 um
visibility = 30 %
transverse_frequency = 900 Hz
gap_ramp = 4 um to 8.3 um in 200 ms
gap_range = 3 um to 11 um
tolerance.sound_pocket = 4 %
tolerance.gap = 6 %
samples = 64
"""
CASE = """[units]
system = SI
[atom]
mass = 86.909180529 u
[flow]
shape = tanh
density = 95 /um
speed = 0.51 mm/s
sound_upstream = 0.79 mm/s
sound_pocket = 0.23 mm/s
sound_downstream = 0.74 mm/s
width_black = 1.1 um
width_white = 0.9 um
gap = 8.3 um
""" + PLAN


def check(name, good, *details):
    global results, failures
    results += 1
    failures += not good
    print(f"{'ok' if good else 'not ok'} {results} - {name}")
    for detail in details if not good else ():
        print(f"#   {detail}")


def close(name, got, want, tolerance):
    check(name, abs(got / want - 1) <= tolerance, f"got {got!r}, want {want!r} to {tolerance:g}")


def run(*arguments):
    return subprocess.run([program, *arguments], capture_output=True, text=True, timeout=300, check=False)


def numbers(path, *arguments):
    done = run("plan", path, *arguments, "--csv", "-")
    if done.returncode != 0:
        raise RuntimeError(done.stderr)
    return {(r["topic"], r["item"], r["quantity"]): (float(r["value"]), r["unit"])
            for r in csv.DictReader(done.stdout.splitlines()) if r["value"]}, done.stdout


folder = tempfile.mkdtemp()
path = os.path.join(folder, "case.ini")
with open(path, "w", encoding="utf-8") as file:
    file.write(CASE)
plan, table = numbers(path)
text = run("plan", path).stdout


def value(*key):
    return plan[key][0]


# ---- units and constants: 1e-9, ten digits are printed or computed twice in double precision ----------
kappa = []
for c, w in ((CU, WB), (CD, WW)):  # c' at c = v of an edge c_p + (c_out - c_p)(1 - tanh)/2
    t = (c + CP - 2 * V) / (c - CP)
    kappa.append((c - CP) / (2 * w) * (1 - t * t))
shown = [float(x) for x in re.findall(r"surface gravity ([\d.e+]+) /s", text)]
hawking = [float(x) for x in re.findall(r"Hawking temperature ([\d.e+]+) nK", text)]
for i in range(2):  # six digits are shown; an edge feels the tail of the other, 1e-5 here
    close(f"surface gravity {i}", shown[i], kappa[i], 2e-5)
    close(f"Hawking temperature {i}", hawking[i] * 1e-9, si.hbar * shown[i] / (2 * math.pi * si.k), 2e-5)
q = MASS * CU**2 / (si.hbar * PERP)
an = (q * q + math.sqrt(q**4 + q * q)) / 2  # m c^2 = hbar omega_perp 2 a n/sqrt(1 + 4 a n)
assert abs(2 * an / math.sqrt(1 + 4 * an) / q - 1) < 1e-12
x = np.linspace(-GAP / 2, GAP / 2, 200001)
x_b = -GAP / 2 - WB * math.atanh((CU + CP - 2 * V) / (CU - CP))
x_w = GAP / 2 + WW * math.atanh((CD + CP - 2 * V) / (CD - CP))
slowest = np.min(CP + (CU - CP) * (1 - np.tanh((x - x_b) / WB)) / 2
                 + (CD - CP) * (1 + np.tanh((x - x_w) / WW)) / 2)  # tails of both edges meet there
undulation = 2 * MASS / si.hbar * math.sqrt(V**2 - slowest**2)
for name, want, tolerance in (
        ("state", math.sqrt(1 + 4 * an) - 1, 1e-8), ("transverse", math.sqrt(1 + 4 * an), 1e-8),
        ("mean_field", N * si.hbar / (MASS * CU), 1e-8),
        ("kappa", max(kappa) * si.hbar / (MASS * V**2), 2e-5),
        ("ripple", 2 * math.pi / undulation / RES, 1e-6),
        ("healing", si.hbar / (MASS * slowest) / RES, 1e-5),
        ("thermal", si.k * T / (MASS * CU**2), 1e-8),
        ("coherence", 2 * si.hbar**2 * N / (MASS * si.k * T) / GAP, 1e-4),
        ("loss", 1 - math.exp(-HOLD / LIFE), 1e-12)):
    close(f"limit {name}", value("validity", name, "value"), want, tolerance)
omega, gamma = value("mode", "1", "omega_re"), value("mode", "1", "omega_im")
close("growth time", value("mode", "1", "growth_time"), 1 / gamma, 1e-12)
close("e-foldings of the hold", value("mode", "1", "efoldings_hold"), gamma * HOLD, 1e-12)
close("e-foldings of the lifetime", value("mode", "1", "efoldings_lifetime"), gamma * LIFE, 1e-12)
close("undulation", value("mode", "1", "undulation_period"), 2 * math.pi / undulation, 1e-6)
check("units of the table", plan["mode", "1", "omega_im"][1] == "1/s"
      and plan["mode", "1", "growth_time"][1] == "s" and plan["length", "", "best"][1] == "m"
      and plan["validity", "loss", "value"][1] == "1")

# ---- the text has the table's numbers ------------------------------------------------------------------
row = re.search(r"^ +1 +([\d.]+) +([\d.]+) +([\d.]+) +([\d.]+) ", text, re.M)
close("text: e-folding time", float(row.group(2)) * 1e-3, 1 / gamma, 1e-4)
close("text: e-foldings", float(row.group(3)), gamma * HOLD, 1e-3)
best = re.search(r"fastest growth ([\d.]+) /s at ([\d.]+) \+- ", text)
close("text: best length", float(best.group(2)) * 1e-6, value("length", "", "best"), 1e-3)
close("text: best growth", float(best.group(1)), value("length", "", "omega_im"), 1e-3)
seen = re.search(r"a contrast of 0\.3 is reached after ([\d.]+) ms", text)
close("text: time to visibility", float(seen.group(1)) * 1e-3, value("thermal", "", "visible_after"), 1e-3)
median = re.search(r"growth is ([\d.]+) \(5-95 %: ([\d.]+) to ([\d.]+)\)", text)
for i, name in enumerate(("growth_50", "growth_05", "growth_95")):
    close(f"text: {name}", float(median.group(i + 1)), value("tolerance", "", name), 6e-3)

# ---- the same in reduced units: speed CU, hbar = m = 1 ---------------------------------------------------
length, time = si.hbar / (MASS * CU), si.hbar / (MASS * CU**2)
reduced = os.path.join(folder, "reduced.ini")
with open(reduced, "w", encoding="utf-8") as file:
    file.write(f"""[units]
system = reduced
[flow]
shape = tanh
density = {N * length!r}
speed = {V / CU!r}
sound_upstream = 1
sound_pocket = {CP / CU!r}
sound_downstream = {CD / CU!r}
width_black = {WB / length!r}
width_white = {WW / length!r}
gap = {GAP / length!r}
[plan]
hold_time = {HOLD / time!r}
lifetime = {LIFE / time!r}
temperature = {si.k * T * time / si.hbar!r}
resolution = {RES / length!r}
visibility = 0.3
transverse_frequency = {PERP * time!r}
gap_ramp = {4e-6 / length!r} to {GAP / length!r} in {0.2 / time!r}
gap_range = {3e-6 / length!r} to {11e-6 / length!r}
tolerance.sound_pocket = 4 %
tolerance.gap = 6 %
samples = 64
""")
other, _ = numbers(reduced)
unit = {"1/s": 1 / time, "s": time, "m": length, "m/s": CU, "1": 1.0}
worst = max(((abs(v - other[key][0] * unit[u]) / max(abs(v), 1e-300), key)
             for key, (v, u) in plan.items() if v != 0), default=(0, ""))
check("the same rows in reduced units", plan.keys() == other.keys(), plan.keys() ^ other.keys())
check("the same numbers in reduced units", worst[0] < 1e-4, worst)  # errors and steps of searches differ

# ---- the ripple: numpy's transform of the shape, zero-padded; loudest wave to a hundredth of 2 pi/length ----
try:
    import h5py
    shapes = os.path.join(folder, "m.h5")
    run("solve", path, "--modes", shapes)
    with h5py.File(shapes) as file:
        x = file["x"][:]
        modes = sum(1 for key in plan if key[0] == "mode" and key[2] == "omega_im")
        for i in range(modes):
            eta = file["eta_re"][i] + 1j * file["eta_im"][i]
            even = np.linspace(-GAP / 2, GAP / 2, 4001)
            eta = np.interp(even, x, eta.real) + 1j * np.interp(even, x, eta.imag)
            k = 2 * np.pi * np.fft.fftfreq(1 << 19, even[1] - even[0])
            size = np.abs(np.fft.fft(eta, 1 << 19))
            inside = np.abs(k) <= 1.5 * undulation
            loudest = abs(k[inside][np.argmax(size[inside])])
            period = plan.get(("mode", str(i + 1), "period"), (0,))[0]
            limit = 2 * np.pi / GAP
            check(f"period of mode {i + 1}", abs(2 * np.pi / period - loudest) < 0.02 * limit if period
                  else loudest < 1.02 * limit, period, 2 * np.pi / loudest)
except ImportError:
    print("# no h5py: ripples not checked")

# ---- told apart: the rules, by hand ------------------------------------------------------------------
check("told by frequency", value("mode", "1", "told_by_frequency") == (omega * HOLD >= 2 * math.pi))
check("told by growth", value("mode", "1", "told_by_growth") == (gamma * HOLD >= 2))

# ---- lengths: a sweep of 161 points --------------------------------------------------------------------
swept = os.path.join(folder, "sweep")
run("sweep", path, "--set", "sweep.gap=3 um to 11 um in 161", "--out", swept)
with open(os.path.join(swept, "points.csv"), encoding="utf-8") as file:
    points = [(float(r["gap"]), float(r["growth_max"])) for r in csv.DictReader(file)]
top = max(points, key=lambda p: p[1])
check("best length against a sweep", abs(value("length", "", "best") - top[0]) <= 0.05e-6
      and 0 <= value("length", "", "omega_im") / top[1] - 1 < 5e-3, top, value("length", "", "best"))
onsets = [float(r["gap"]) for r in csv.DictReader(
    run("onset", path, "--upto", "11 um", "--csv", "-").stdout.splitlines())]
ends = [value("single_mode", "1", "from"), value("single_mode", "1", "to")]
near = [min(abs(e - g) for g in onsets + [3e-6, 11e-6]) for e in ends]
check("a single mode between switch-on lengths", max(near) < 1e-4 * 8e-6, ends, onsets)

# ---- time to visibility: with one mode alone exactly, a e^{gamma t} -------------------------------------
alone, _ = numbers(path, "--set", "flow.gap=2.4 um", "--set", "plan.gap_ramp=2 um to 2.4 um in 1 ms")
only = [key for key in alone if key[0] == "mode" and key[2] == "omega_im"]
check("one mode alone", len(only) == 1, only)
a, g = alone["thermal", "mode 1", "amplitude"][0], alone["mode", "1", "omega_im"][0]
close("time to visibility", alone["thermal", "", "visible_after"][0], math.log(VIS / a) / g, 1e-6)
check("thermal louder than vacuum", a > alone["vacuum", "mode 1", "amplitude"][0])

# ---- same seed, same bytes -----------------------------------------------------------------------------
check("same bytes again, on one thread", numbers(path, "--threads", "1")[1] == table)
changed = numbers(path, "--set", "plan.seed=2")[0]
check("another seed, other samples", changed["tolerance", "", "growth_50"] != plan["tolerance", "", "growth_50"])
for done, word in ((run("plan", path, "--csv", "-", "--threads", "0"), "--threads 0"),
                   (run("plan", path, "--set", "plan.hold_time=4"), "hold_time"),
                   (run("plan", path, "--csv", os.path.join(folder, "no", "x.csv")), "folder")):
    check(f"refused: {word}", done.returncode == 2 and word in done.stderr
          and done.stderr.count("\n") == 1 and done.stdout == "", done.stderr)
print(f"1..{results}")
sys.exit(failures > 0)
