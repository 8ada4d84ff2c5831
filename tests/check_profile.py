#!/usr/bin/python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
"""Measured profiles from outside: check_profile.py PROGRAM prints TAP.

The smooth curve of the library (src/flow/smooth.h, called through the shared library beside
PROGRAM) against scipy's B-splines and numpy's dense normal equations; the flow of
cases/profile.ini against a smoothing spline with a knot at every row; SI against reduced units."""
import csv
import ctypes
import io
import math
import os
import subprocess
import sys
import tempfile
import time

import numpy as np
from scipy.interpolate import BSpline, make_lsq_spline
from scipy.optimize import minimize_scalar

program = os.path.abspath(sys.argv[1])
cases = os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "cases")
library = ctypes.CDLL(os.path.join(os.path.dirname(program), "libtwinhorizon.so"))
results = failures = 0


def check(name, good, *details):
    global results, failures
    results += 1
    failures += not good
    print(f"{'ok' if good else 'not ok'} {results} - {name}", flush=True)
    if not good:
        for detail in details:
            print("#  ", ascii(detail))


number, numbers = ctypes.c_double, ctypes.POINTER(ctypes.c_double)


class Rows(ctypes.Structure):  # th_smooth_rows
    _fields_ = [("rows", ctypes.c_int), ("x", numbers), ("y", numbers), ("sigma", numbers),
                ("strength", number), ("directions_max", ctypes.c_int)]


class Smooth(ctypes.Structure):  # th_smooth
    _fields_ = [("workspace", ctypes.c_void_p), ("intervals", ctypes.c_int), ("knot", numbers),
                ("coef", numbers), ("inverse", numbers), ("directions", ctypes.c_int),
                ("direction", numbers), ("dropped", number), ("strength", number),
                ("chosen", ctypes.c_bool), ("freedom", number), ("noise", number),
                ("spread", number), ("together", number), ("known", ctypes.c_bool)]


library.th_smooth_deviation.argtypes = [ctypes.POINTER(Smooth), number]
library.th_smooth_deviation.restype = number


def pointer(array):
    return None if array is None else array.ctypes.data_as(numbers)


def fit(x, y, sigma, strength):
    out = Smooth()
    rows = Rows(len(x), pointer(x), pointer(y), pointer(sigma), strength, 200)
    if library.th_smooth_fit(ctypes.byref(rows), None, ctypes.byref(out), None) != 0:
        raise SystemExit("the library refused a fit")
    return out


class Dense:
    """Penalised fit on given knots: scipy's basis, Gauss quadrature, numpy's solver."""

    def __init__(self, knots, x, y, sigma):
        self.t = np.r_[[knots[0]] * 5, knots, [knots[-1]] * 5]
        self.n = len(knots) + 4
        self.x, self.y = x, y
        self.w = np.ones(len(x)) if sigma is None else sigma**-2.0
        self.b = self.basis(x)
        self.m = self.b.T @ (self.w[:, None] * self.b)
        node, weight = np.polynomial.legendre.leggauss(3)
        half, middle = np.diff(knots) / 2, (knots[1:] + knots[:-1]) / 2
        at = (middle[:, None] + half[:, None] * node).ravel()
        third = np.column_stack([BSpline(self.t, row, 5).derivative(3)(at)
                                 for row in np.eye(self.n)])
        self.p = third.T @ ((half[:, None] * weight).ravel()[:, None] * third)
        # weight per length: rows stand for the distances between them
        self.density = self.w.sum() * (1 - 1 / len(x)) / (x[-1] - x[0])

    def basis(self, x):
        return BSpline.design_matrix(np.atleast_1d(x), self.t, 5).toarray()

    def solve(self, strength):
        a = self.m + self.density * strength**6 * self.p
        self.inverse = np.linalg.inv(a)
        self.c = np.linalg.solve(a, self.b.T @ (self.w * self.y))
        self.freedom = np.trace(self.inverse @ self.m)
        self.rss = float(np.sum(self.w * (self.y - self.b @ self.c)**2))
        return self

    def score(self, log_strength):
        self.solve(math.exp(log_strength))
        return self.rss / (len(self.x) - self.freedom)**2


def profile(x):
    return 0.3 * np.tanh((x + 4) / 0.8) - 0.4 * np.tanh((x - 3) / 0.5)


# The same curve, degrees of freedom, noise, deviations, directions.
random = np.random.default_rng(7)
x = np.r_[-15, np.sort(random.uniform(-15, 15, 348)), 15]
sigma = random.uniform(0.005, 0.02, len(x))
noisy = profile(x) + sigma * random.standard_normal(len(x))
for name, errors, strength in [("chosen strength", None, -1.0), ("given strength", None, 0.2),
                               ("known errors", sigma, -1.0), ("no smoothing", sigma, 0.0)]:
    s = fit(x, noisy, errors, strength)
    knots = np.array(s.knot[:s.intervals + 1])
    d = Dense(knots, x, noisy, errors).solve(s.strength)
    spread = math.sqrt(d.rss / (len(x) - d.freedom))
    spread = max(spread, 1.0) if errors is not None else spread
    coef = np.array(s.coef[:d.n])
    worst = np.abs(coef - d.c).max()
    check(f"{name}: curve and degrees of freedom as by numpy",
          worst < 1e-9 and abs(s.freedom - d.freedom) < 1e-8 * d.freedom, worst,
          (s.freedom, d.freedom))
    at = np.linspace(-14.9, 14.9, 97)
    b = d.basis(at)
    want = s.together * spread * np.sqrt(np.einsum("ij,jk,ik->i", b, d.inverse, b))
    got = np.array([library.th_smooth_deviation(ctypes.byref(s), v) for v in at])
    check(f"{name}: deviations as by numpy", np.abs(got / want - 1).max() < 1e-7, got / want)
    # the pivoted directions, as numpy's covariance projected on them says
    directions = np.array(s.direction[:s.directions * d.n]).reshape(s.directions, d.n)
    covariance = (s.together * spread)**2 * d.inverse
    kept = np.trace(directions @ d.m @ directions.T)
    gap = np.linalg.eigvalsh(covariance - (1 - s.dropped) * directions.T @ directions)
    check(f"{name}: directions hold the covariance",
          abs(kept / np.trace(covariance @ d.m) - 1) < 1e-6 and s.dropped < 1.001e-3
          and gap.min() > -1e-9 * np.abs(covariance).max(), kept, s.dropped, gap.min())
    if strength < 0:
        best = minimize_scalar(d.score, method="bounded", options={"xatol": 1e-7},
                               bounds=(math.log(s.strength), math.log(2 * s.strength)))
        check(f"{name}: three quarters of where scipy finds the smallest score",
              abs(0.75 * math.exp(best.x) / s.strength - 1) < 1e-3,
              math.exp(best.x), s.strength)
    if strength == 0:
        lsq = make_lsq_spline(x, noisy, d.t, 5, w=1 / sigma)
        check(f"{name}: scipy's make_lsq_spline", np.abs(lsq.c - coef).max() < 1e-9,
              np.abs(lsq.c - coef).max())
    # a given strength says what is smoothed, the knots do not: the same curve from many more
    if strength > 0:
        every = Dense(np.r_[x[0], x[2:-2:2], x[-1]], x, noisy, errors).solve(s.strength)
        off = (every.basis(at) @ every.c - b @ d.c) / want
        check(f"{name}: knots at every second row change little", np.sqrt(np.mean(off**2)) < 0.1,
              np.sqrt(np.mean(off**2)), np.abs(off).max())
    library.th_smooth_clear(ctypes.byref(s))


# The most rows that a table may have.
many = np.linspace(-15, 15, 100000)
start = time.process_time()
s = fit(many, profile(many) + 0.02 * random.standard_normal(len(many)), None, -1.0)
seconds = time.process_time() - start
check("100000 rows take less than a second", seconds < 1, seconds)
library.th_smooth_clear(ctypes.byref(s))


# cases/profile.ini
def run(*words):
    done = subprocess.run([program, *words], capture_output=True, text=True)
    return done.returncode, done.stdout, done.stderr


def table(*words):
    code, out, err = run(*words, "--csv", "-")
    rows = list(csv.reader(io.StringIO(out)))
    return code, np.array(rows[1:], dtype=float), err


with open(os.path.join(cases, "profile.csv"), encoding="utf-8") as file:
    text = [line for line in file if not line.startswith("#")]
raw = np.array(list(csv.reader(text[1:])), dtype=float)
check("the invented profile: uneven rows, errors, both columns",
      text[0].strip() == "x [um],density [/um],density_error [/um],speed [mm/s],speed_error [mm/s]"
      and len(raw) >= 250 and np.ptp(np.diff(raw[:, 0])) > 0.02)
case = os.path.join(cases, "profile.ini")
code, flow, err = table("flow", case, "--set", "flow.smoothing=0.4 um")
inner = (flow[:, 0] > -12e-6) & (flow[:, 0] < 12e-6)  # beyond the tapers
note = run("flow", case)[1]
place, density, error = raw[:, 0], raw[:, 1], raw[:, 2]
curve = np.log(density)
level = density
for step in range(2):  # log of the mean, not the mean of logs
    d = Dense(np.r_[place[0], place[2:-2:2], place[-1]], place, curve, error / level)
    level = np.exp(d.b @ d.solve(0.4).c)
    curve = np.log(level) + density / level - 1
upstream = math.exp(np.mean(d.basis(np.linspace(-15, -12, 400) + 1e-9) @ d.c))
b = d.basis(flow[inner, 0] * 1e6)
sigma = np.sqrt(np.einsum("ij,jk,ik->i", b, d.inverse, b))
off = (np.log(flow[inner, 1] / 8e7) - (b @ d.c - math.log(upstream))) / sigma
check("the flow of the case is scipy's smoothing spline", code == 0
      and np.sqrt(np.mean(off**2)) < 0.01, np.sqrt(np.mean(off**2)), np.abs(off).max(), err)
check("density times speed is constant",
      np.ptp(flow[:, 1] * flow[:, 2]) < 1e-12 * flow[0, 1] * flow[0, 2])
weight = 1 / ((raw[:, 2] / raw[:, 1])**2 + (raw[:, 4] / raw[:, 3])**2)
flux = math.exp(np.average(np.log(raw[:, 1] * raw[:, 3]), weights=weight))
check("its flux is the weighted mean", abs(flow[0, 2] * 1e3 * upstream / flux - 1) < 1e-4,
      flow[0, 2] * 1e3 * upstream, flux)
spread = 100 * np.sqrt(np.mean((raw[:, 1] * raw[:, 3] / flux - 1)**2))
check("and the note says how far rows are from it",
      f"density times speed varies by {spread:.2g} % (rms)" in note, spread, note)
ratio = flow[:, 3] / np.sqrt(flow[:, 1])  # contact: c^2 proportional to n
check("the sound speed follows the density", np.ptp(ratio) < 1e-12 * ratio[0])

# The same table in reduced units gives the same modes: hbar = m = 1, speed unit sound_upstream.
with tempfile.TemporaryDirectory() as folder:
    mass, hbar, unit = 38.9637064864 * 1.66053906660e-27, 1.054571817e-34, 1.15e-3
    length = hbar / (mass * unit)
    with open(os.path.join(folder, "t.csv"), "w", encoding="utf-8") as file:
        file.write("x,density,density_error,speed,speed_error\n")
        for row in raw:
            scaled = row * [1e-6 / length, 1e6 * length, 1e6 * length, 1e-3 / unit, 1e-3 / unit]
            file.write(",".join(repr(float(v)) for v in scaled) + "\n")
    reduced = os.path.join(folder, "case.ini")
    with open(reduced, "w", encoding="utf-8") as file:
        file.write("[units]\nsystem = reduced\n[flow]\nshape = table\nfile = t.csv\n"
                   "sound_upstream = 1\n")
    modes = [list(csv.DictReader(io.StringIO(run("solve", path, "--csv", "-")[1])))
             for path in (case, reduced)]
    rates = [[(float(m["omega_re"]), float(m["omega_im"])) for m in found
              if m["label"] == "unstable"] for found in modes]
    second = length / unit
    check("SI and reduced units agree", len(rates[0]) in (1, 2) and len(rates[1]) == len(rates[0])
          and np.allclose(np.array(rates[0]) * second, rates[1], rtol=1e-6, atol=1e-9),
          np.array(rates[0]) * second, rates[1])

print(f"1..{results}")
sys.exit(failures > 0)
