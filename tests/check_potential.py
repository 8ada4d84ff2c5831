#!/usr/bin/python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
"""Stationary flows in a potential against scipy.integrate.solve_bvp: check_potential.py PROGRAM
prints TAP. scipy solves a'' = 2 (V + H) a, n = a^2, for contact interaction (H = n - 1 + (m^2/2)
(1/n^2 - 1)) and for mu = omega_perp sqrt(1 + 4 a_s n), from a guess of its own where the depth is found
for a plateau, and from a coarse copy of the program's where the depth is given. Tolerance 1e-8: scipy is
asked for 1e-10 relative in each interval."""
import csv
import io
import os
import subprocess
import sys
import tempfile

import numpy as np
from scipy.integrate import solve_bvp

PROGRAM = os.path.abspath(sys.argv[1])
count = bad = 0


def check(good, name, detail):
    global count, bad
    count += 1
    bad += not good
    print(f"{'ok' if good else 'not ok'} {count} - {name}: {detail}", flush=True)


def form(profile, x, gap, width):
    if profile in ("well", "step"):
        left = (1 + np.tanh((x + (gap / 2 if profile == "well" else 0)) / width)) / 2
        right = (1 + np.tanh((x - gap / 2) / width)) / 2 if profile == "well" else 0
        return right - left
    if profile == "barrier":
        return np.exp(-((x / width) ** 2))
    return np.exp(-(((x + gap / 2) / width) ** 2)) + np.exp(-(((x - gap / 2) / width) ** 2))


def excess(n, mach, scattering):
    kinetic = mach**2 / 2 * (1 / n**2 - 1)
    if not scattering:
        return n - 1 + kinetic
    root_1 = np.sqrt(1 + 4 * scattering)
    omega = root_1 / (2 * scattering)  # c^2 = n dmu/dn = 1 at n = 1
    return omega * (np.sqrt(1 + 4 * scattering * n) - root_1) + kinetic


def program(keys, table=None):
    with tempfile.TemporaryDirectory() as folder:
        if table is not None:
            with open(os.path.join(folder, "v.csv"), "w", encoding="ascii") as file:
                file.write("# invented\nx,potential\n")
                file.writelines(f"{x!r},{v!r}\n" for x, v in zip(*map(list, table)))
        path = os.path.join(folder, "case.ini")
        with open(path, "w", encoding="ascii") as file:
            file.write("[units]\nsystem = reduced\n[flow]\nshape = potential\n")
            file.writelines(f"{key} = {value}\n" for key, value in keys.items())
        done = subprocess.run([PROGRAM, "flow", path, "--csv", "-"], capture_output=True, text=True,
                              check=False)
        text = subprocess.run([PROGRAM, "flow", path], capture_output=True, text=True, check=False)
    if done.returncode:
        return None, done.stderr.strip()
    rows = list(csv.DictReader(io.StringIO(done.stdout)))
    x = np.array([float(row["x"]) for row in rows])
    n = np.array([float(row["density"]) for row in rows])
    depth = float(text.stdout.split("Found       depth ")[1].split()[0])
    x, first = np.unique(x, return_index=True)
    return (x, n[first], depth), None


def solve(profile, mach, gap, width, depth, scattering, guess, half):
    """half: depth is unknown, the flow ends at the plateau; else from -L to L."""
    far = 18.0
    end = 0.0 if profile in ("well", "barriers") else 14 * width
    x = np.linspace(-far - gap / 2 - 4 * width, end if half else far + gap / 2 + 4 * width, 3001)

    def slope(x, y, p=None):
        v = (p[0] if half else depth) * form(profile, x, gap, width)
        return np.vstack((y[1], 2 * (v + excess(y[0] ** 2, mach, scattering)) * y[0]))

    def ends(left, right, p=None):
        rate = 2 * np.sqrt(1 - mach**2)
        if not half:
            return np.array([left[1] - rate * (left[0] - 1), right[1] + rate * (right[0] - 1)])
        plateau = p[0] * form(profile, end, gap, width) + excess(right[0] ** 2, mach, scattering)
        return np.array([left[1] - rate * (left[0] - 1), right[1], plateau])

    a = guess(x)
    return solve_bvp(slope, ends, x, np.vstack((a, np.gradient(a, x))),
                     p=[depth] if half else None, tol=1e-10, max_nodes=200000)


# profile, mach, gap, width, depth (0: found), scattering length (0: contact)
CASES = (("well", 0.6, 4, 0.25, 0, 0), ("well", 0.45, 3, 0.1, 0, 0.4), ("step", 0.7, 0, 0.3, 0, 0),
         ("barrier", 0.6, 0, 0.8, 0, 0), ("barriers", 0.5, 6, 0.5, 0, 0),
         ("barriers", 0.5, 6, 0.5, 0, 0.7), ("well", 0.6, 4, 0.3, 0.7, 0),
         ("well", 0.6, 5, 0.2, 0.6, 0.3), ("barriers", 0.5, 6, 0.3, 0.5, 0))

for profile, mach, gap, width, depth, scattering in CASES:
    keys = {"profile": profile, "mach": mach, "width": width}
    if gap:
        keys["gap"] = gap
    if depth:
        keys["depth"] = depth
    if scattering:
        keys.update(state="transverse", scattering_length=scattering)
    name = " ".join(f"{key}={value}" for key, value in keys.items())
    found, error = program(keys)
    if found is None:
        check(False, name, error)
        continue
    x, n, deep = found
    if depth:
        coarse = slice(None, None, 7)
        start = lambda at: np.interp(at, x[coarse], np.sqrt(n[coarse]))
        other = solve(profile, mach, gap, width, depth, scattering, start, False)
    else:
        low = mach**2 if profile in ("well", "step") else mach**2 / 4 * (1 + np.sqrt(1 + 8 / mach**2))
        edge = -gap / 2
        start = lambda at: np.sqrt(low + (1 - low) * np.tanh(np.maximum(0, edge - at)) ** 2)
        first = ((1 / mach - mach) ** 2 / 2 if profile in ("well", "step")
                 else 0.15 / width)
        other = solve(profile, mach, gap, width, first, scattering, start, True)
        check(abs(other.p[0] / deep - 1) < 1e-8, name, f"depth {deep:.10g}, scipy {other.p[0]:.10g}")
    inside = (x > other.x[0]) & (x < other.x[-1])
    off = np.max(np.abs(other.sol(x[inside])[0] ** 2 - n[inside]))
    check(other.success and off < 1e-8, name, f"density off by {off:.1e}")
# The same potentials as tables: the flow of the formula, the better the closer the rows are.
for profile, mach, gap, width, depth in (("well", 0.6, 4, 0.3, 0.7), ("barriers", 0.5, 6, 0.5, 0.3)):
    formula, error = program({"profile": profile, "mach": mach, "gap": gap, "width": width,
                              "depth": depth})
    before = None
    for spacing in (0.2, 0.1, 0.05) if profile == "well" else (0.1, 0.07, 0.05):
        x = np.arange(-10, 10 + spacing / 2, spacing)
        found, error = program({"profile": "table", "mach": mach, "file": "v.csv"},
                               (x, depth * form(profile, x, gap, width)))
        name = f"{profile} as a table with spacing {spacing}"
        if found is None:
            check(False, name, error)
            continue
        inside = np.abs(found[0]) < 8
        off = np.max(np.abs(np.interp(found[0][inside], formula[0], formula[1])
                            - found[1][inside]))
        middle = abs(np.interp(0, found[0], found[1]) - np.interp(0, formula[0], formula[1]))
        check(off < 0.02 and (before is None or middle < before / 4), name,
              f"density off by {off:.1e}, in the middle {middle:.1e}")
        before = middle

print(f"1..{count}")
sys.exit(bad > 0)
