#!/usr/bin/python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
"""The numbers of `plan` by another route: check_plan.py PROGRAM. Prints TAP.

Conversions, surface gravities and limits from the numbers of the case with scipy.constants (CODATA); the
text against the table; the case against itself in reduced units; ripples against numpy's Fourier transform of
the shapes that `solve --modes` writes, sound outside against numpy's roots of the dispersion relation; times
to visibility against shapes and amplitudes; lengths, ramps and drifts against sweeps and solves. The cases
are invented: rubidium with smooth edges, potassium with sharp ones, potassium over a well.

EXACT: tables hold 15 digits, two or three of them enter a number here.
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
from scipy.interpolate import CubicSpline
from scipy.optimize import brentq

try:
    import h5py
except ImportError:
    h5py = None

program = os.path.abspath(sys.argv[1])
results = failures = 0
EXACT = 1e-12
TAU = 2 * math.pi
U = si.atomic_mass


def check(name, good, *details):
    global results, failures
    results += 1
    failures += not good
    print(f"{'ok' if good else 'not ok'} {results} - {name}")
    for detail in details if not good else ():
        print(f"#   {detail}")


def close(name, got, want, tolerance):
    check(name, abs(got - want) <= tolerance * abs(want), f"got {got!r}, want {want!r} to {tolerance:g}")


def run(*arguments):
    return subprocess.run([program, *arguments], capture_output=True, text=True, timeout=300, check=False)


folder_object = tempfile.TemporaryDirectory()
folder = folder_object.name


def case(name, text):
    path = os.path.join(folder, name + ".ini")
    with open(path, "w", encoding="utf-8") as file:
        file.write(text)
    return path


class Plan:
    """One run of `plan`: the table, its bytes and the text."""

    def __init__(self, path, *arguments):
        table = os.path.join(folder, "plan.csv")
        done = run("plan", path, *arguments, "--csv", table)
        if done.returncode != 0:
            raise RuntimeError(done.stderr)
        self.path, self.text = path, done.stdout
        with open(table, "rb") as file:
            self.bytes = file.read()
        self.rows = {(r["topic"], r["item"], r["quantity"]): r
                     for r in csv.DictReader(self.bytes.decode().splitlines())}

    def __call__(self, *key):
        return float(self.rows[key]["value"])

    def error(self, *key):
        return float(self.rows[key]["error"])

    def get(self, *key):
        return self(*key) if key in self.rows and self.rows[key]["value"] else None

    def items(self, topic, quantity):
        return [key[1] for key in self.rows if key[0] == topic and key[2] == quantity]


# ---- the cases ---------------------------------------------------------------------------------------
WORDS = {"m": ("um", 1e-6), "m/s": ("mm/s", 1e-3), "s": ("ms", 1e-3), "K": ("nK", 1e-9), "rad/s": ("Hz", TAU),
         "1/m": ("/um", 1e6), "1": ("", 1.0)}
DIMENSIONS = {"mach": "1", "gap": "m", "width_black": "m", "width_white": "m"}  # others are speeds


class Case:
    """Numbers of a case in SI units, and its text. Masses in u: AME 2012 evaluation, from memory."""

    def __init__(self, name, mass, flow, **plan):
        self.name, self.mass, self.flow, self.t, self.ramp, self.n = name, mass * U, flow, None, None, None
        self.seed = 1
        self.__dict__.update(plan)
        self.gap, self.cu, self.cp, self.cd = (flow.get(k) for k in (
            "gap", "sound_upstream", "sound_pocket", "sound_downstream"))
        self.cd = self.cd or self.cu
        self.v = flow.get("speed") or flow["mach"] * self.cu
        length, time = si.hbar / (self.mass * self.cu), si.hbar / (self.mass * self.cu**2)
        # sound upstream is the unit of speed, hbar = m = 1
        self.unit = {"m": length, "m/s": self.cu, "s": time, "rad/s": 1 / time, "1/s": 1 / time, "1/m": 1 / length,
                     "K": si.hbar / (si.k * time), "1": 1.0}
        self.text, self.reduced = self.write(True), self.write(False)

    def write(self, physical):
        def q(value, unit):
            word, factor = WORDS[unit] if physical else ("", self.unit[unit])
            return f"{value / factor!r} {word}"
        lines = ["[units]", "system = " + ("SI" if physical else "reduced")]
        lines += ["[atom]", f"mass = {self.mass / U!r} u"] if physical else []
        lines += ["[flow]", "shape = " + self.name.split()[-1]]
        lines += [f"{key} = {q(value, DIMENSIONS.get(key, 'm/s'))}" for key, value in self.flow.items()]
        lines += [f"density = {q(self.n, '1/m')}"] if self.n else []
        lines += ["[plan]", f"hold_time = {q(self.hold, 's')}", f"lifetime = {q(self.life, 's')}",
                  f"resolution = {q(self.res, 'm')}", f"visibility = {100 * self.vis:g} %",
                  f"transverse_frequency = {q(self.perp, 'rad/s')}",
                  f"gap_range = {q(self.range[0], 'm')} to {q(self.range[1], 'm')}", f"seed = {self.seed}"]
        lines += [f"temperature = {q(self.t, 'K')}"] if self.t else []
        if self.ramp:
            lines += [f"gap_ramp = {q(self.ramp[0], 'm')} to {q(self.ramp[1], 'm')} in {q(self.ramp[2], 's')}"]
        lines += [f"tolerance.{key} = {100 * value:g} %" for key, value in self.tolerance.items()]
        return "\n".join(lines + ["samples = 64", ""])


rb = Case("rubidium, tanh", 86.909180529, {
    "speed": 0.51e-3, "sound_upstream": 0.79e-3, "sound_pocket": 0.23e-3, "sound_downstream": 0.74e-3,
    "width_black": 1.1e-6, "width_white": 0.9e-6, "gap": 8.3e-6},
    n=95e6, hold=0.4, life=3.0, t=1.3e-9, res=1.4e-6, vis=0.3, perp=TAU * 900, range=(3e-6, 11e-6),
    tolerance={"sound_pocket": 0.04, "gap": 0.06})
K39 = {"speed": 0.97e-3, "sound_upstream": 1.52e-3, "sound_pocket": 0.43e-3, "sound_downstream": 1.41e-3}
k39 = Case("potassium, step", 38.96370649, {**K39, "gap": 12.2e-6},
           n=47e6, hold=0.13, life=1.7, t=2.1e-9, res=2.2e-6, vis=0.4, perp=TAU * 3100, range=(2e-6, 16e-6),
           ramp=(12.2e-6, 6e-6, 35e-3), seed=7, tolerance={"speed": 0.015, "gap": 0.05})
# no temperature: vacuum alone; one mode, of which much lies beside the plateau
well = Case("potassium, well", 38.96370649, {"mach": 0.55, "sound_upstream": 1.21e-3, "gap": 0.1e-6},
            n=52e6, hold=0.06, life=0.9, res=1e-6, vis=0.35, perp=TAU * 2700, range=(0.1e-6, 0.3e-6),
            tolerance={"gap": 0.08})
# a longer pocket, whose third mode differs in wave number, in a sharp and in a blurred image; no density
longer, blurred = (Case(f"potassium, {word}, step", 38.96370649, {**K39, "gap": 15.5e-6}, hold=0.13, life=1.7,
                        res=resolution, vis=0.4, perp=TAU * 3100, range=(2e-6, 16e-6), tolerance={})
                   for word, resolution in (("long", 2.2e-6), ("blurred", 7e-6)))


def tanh_sound(x, at=rb):
    """The documented formula of the shape `tanh`."""
    wb, ww = at.flow["width_black"], at.flow["width_white"]
    b = -at.gap / 2 - wb * np.arctanh((at.cu + at.cp - 2 * at.v) / (at.cu - at.cp))
    w = at.gap / 2 + ww * np.arctanh((at.cd + at.cp - 2 * at.v) / (at.cd - at.cp))
    return (at.cp + (at.cu - at.cp) * (1 - np.tanh((x - b) / wb)) / 2
            + (at.cd - at.cp) * (1 + np.tanh((x - w) / ww)) / 2)


# Of each flow: horizons, |d(c - v)/dx| there, speed there, slowest sound and speed there, fewest atoms per
# healing length. tanh: by root finding and central differences of the formula; 1e-8 of a width gives 1e-7.
x0 = rb.gap / 2
rb.horizons = [brentq(lambda x: tanh_sound(x) - rb.v, s * x0 - 1e-6, s * x0 + 1e-6, xtol=1e-18) for s in (-1, 1)]
rb.kappa = [abs(tanh_sound(x + 1e-10) - tanh_sound(x - 1e-10)) / 2e-10 for x in rb.horizons]
rb.at_horizon = [rb.v, rb.v]
rb.slowest, rb.v_slowest = float(np.min(tanh_sound(np.linspace(-x0, x0, 200001)))), rb.v
rb.fewest = rb.n * si.hbar / (rb.mass * rb.cu)  # n is uniform
rb.least = rb.n
for c in (k39, longer, blurred):
    c.horizons, c.kappa, c.at_horizon, c.slowest, c.v_slowest = [-c.gap / 2, c.gap / 2], None, [c.v] * 2, c.cp, c.v
k39.fewest, k39.least = k39.n * si.hbar / (k39.mass * k39.cu), k39.n
# well: half a grey soliton on either side of a plateau with the density of its dip,
# n = 1 - (1 - M^2) sech^2(sqrt(1 - M^2) m c x/hbar), v = M c/n, c = c sqrt(n): "Bose-Einstein Condensation",
# Oxford University Press (2003), section 5.5 (from memory); v = c at n = M^(2/3).
M = well.flow["mach"]
steep = math.sqrt(1 - M * M) * well.mass * well.cu / si.hbar
nh = M ** (2 / 3)
away = math.acosh(math.sqrt((1 - M * M) / (1 - nh))) / steep
well.horizons = [-well.gap / 2 - away, well.gap / 2 + away]
slope = 2 * (1 - nh) * math.tanh(steep * away) * steep  # n'
well.kappa = [well.cu * slope * (0.5 / math.sqrt(nh) + M / nh**2)] * 2
well.at_horizon = [well.cu * math.sqrt(nh)] * 2
well.slowest, well.v_slowest = well.cu * M, well.cu / M  # of the plateau, n = M^2
well.least = well.n * M * M
well.fewest = well.least * si.hbar / (well.mass * well.slowest)

for c in (rb, k39, well, longer, blurred):
    c.path = case(c.name.replace(", ", "_"), c.text)
    c.plan = Plan(c.path)
    c.undulation = 2 * c.mass / si.hbar * math.sqrt(c.v_slowest**2 - c.slowest**2)
    c.pocket = c.horizons[1] - c.horizons[0]
    c.modes = c.plan.items("mode", "omega_im")
    c.main = "thermal" if c.t else "vacuum"
check("the cases have what is to be seen", [len(c.modes) for c in (rb, k39, well)] == [2, 2, 1]
      and rb.plan("mode", "1", "omega_re") == 0 < k39.plan("mode", "1", "omega_re"))


# ---- times, e-foldings, units ------------------------------------------------------------------------
UNITS = {"omega_re": "1/s", "omega_im": "1/s", "growth_time": "s", "efoldings_hold": "1", "period": "m",
         "pattern_speed": "m/s", "pocket_length": "m", "undulation_period": "m", "loudest_at": "m",
         "period_upstream": "m", "decay_upstream": "m", "visible_after": "s", "linear_until": "s",
         "contrast": "1", "amplitude": "1", "best": "m", "share": "1", "growth_change": "1/s", "growth": "1/s",
         "growth_50": "1/s", "round_trip": "s", "levels": "1", "told_by_growth": "1", "efoldings": "1"}
for c in (rb, k39, well):
    p = c.plan
    solved = list(csv.DictReader(run("solve", c.path, "--csv", "-").stdout.splitlines()))
    solved = [[float(r[q]) for q in ("omega_re", "omega_im", "omega_error")] for r in solved
              if r["label"] == "unstable"]
    planned = [[p("mode", i, "omega_re"), p("mode", i, "omega_im"), p.error("mode", i, "omega_im")] for i in c.modes]
    # `solve` writes frequencies with 17 digits, `plan` with 15
    check(f"{c.name}: growing modes are those of solve", len(planned) == len(solved)
          and np.allclose(planned, solved, rtol=1e-14, atol=0), planned, solved)
    for i in c.modes:
        gamma, error = p("mode", i, "omega_im"), p.error("mode", i, "omega_im")
        for key, want, bar in (("growth_time", 1 / gamma, error / gamma**2),
                               ("efoldings_hold", gamma * c.hold, error * c.hold),
                               ("efoldings_lifetime", gamma * c.life, error * c.life)):
            close(f"{c.name}, mode {i}: {key}", p("mode", i, key), want, EXACT)
            close(f"{c.name}, mode {i}: error of {key}", p.error("mode", i, key), bar, EXACT)
        close(f"{c.name}, mode {i}: pocket", p("mode", i, "pocket_length"), c.pocket, 1e-9)  # root finding
        # tanh: the extreme of c is looked for on samples, flat to second order
        close(f"{c.name}, mode {i}: undulation", p("mode", i, "undulation_period"), TAU / c.undulation, 1e-6)
    wrong = [(key, r["unit"]) for key, r in p.rows.items()
             if r["value"] and r["unit"] != UNITS.get(key[2], r["unit"])]
    check(f"{c.name}: units of the table", not wrong and all(r["unit"] or r["text"] for r in p.rows.values()),
          wrong)


# ---- horizons and limits -----------------------------------------------------------------------------
def shown(text, value, digits):
    """Whether `value` printed with so many significant digits may read `text`: half a unit of the last one."""
    if value == 0:
        return float(text) == 0
    last = 10.0 ** (math.floor(math.log10(abs(value)) + 1e-9) - digits + 1)
    return abs(float(text) - value) <= 0.5000001 * last


for c in (rb, k39, well):
    p = c.plan
    kappa = [float(x) for x in re.findall(r"surface gravity ([\d.e+]+) /s", p.text)]
    hawking = [float(x) for x in re.findall(r"Hawking temperature ([\d.e+]+) nK", p.text)]
    if c.kappa is None:
        check(f"{c.name}: a jump has no surface gravity", p.text.count("a jump: no surface gravity") == 2
              and kappa == hawking == [])
    else:
        check(f"{c.name}: surface gravities", len(kappa) == 2
              and all(shown(a, b, 6) for a, b in zip(kappa, c.kappa)), kappa, c.kappa)
        want = [si.hbar * k / (TAU * si.k) * 1e9 for k in c.kappa]
        check(f"{c.name}: Hawking temperatures", len(hawking) == 2
              and all(shown(a, b, 6) for a, b in zip(hawking, want)), hawking, want)
    top = max(c.cu, c.cd)
    an = brentq(lambda y: si.hbar * c.perp * 2 * y / math.sqrt(1 + 4 * y) / (c.mass * top**2) - 1, 1e-9, 1e3,
                xtol=1e-16)  # m c^2 = hbar omega_perp 2 a n/sqrt(1 + 4 a n)
    wanted = {  # name: value, tolerance. 1e-6: extremes along a smooth flow are looked for on samples
        "state": (math.sqrt(1 + 4 * an) - 1, 1e-9), "transverse": (math.sqrt(1 + 4 * an), 1e-9),
        "mean_field": (c.fewest, 1e-6),
        "kappa": c.kappa and (max(k * si.hbar / (c.mass * v * v) for k, v in zip(c.kappa, c.at_horizon)), 1e-6),
        "ripple": (TAU / c.undulation / c.res, 1e-6),
        # the shorter one of the two horizons, where c = v
        "healing": (si.hbar / (c.mass * max(c.at_horizon)) / c.res, 1e-8),
        "thermal": c.t and (si.k * c.t / (c.mass * c.cu**2), 1e-9),
        "coherence": c.t and (2 * si.hbar**2 * c.least / (c.mass * si.k * c.t) / c.pocket, 1e-9),
        "loss": (-math.expm1(-c.hold / c.life), EXACT),
        "linear": (p(c.main, "5", "contrast"), EXACT)}
    least = {"mean_field": 10, "ripple": 1, "healing": 1, "coherence": 1}
    most = {"state": 0.1, "transverse": 2, "kappa": 0.1, "thermal": 1, "loss": 0.1, "linear": 0.5}
    for name, want in wanted.items():
        if not want:
            check(f"{c.name}: {name} is not known", "value" not in [k[2] for k in p.rows if k[1] == name]
                  and p.rows["validity", name, "not_known"]["text"] != ""
                  and re.search(rf"^  not known .*\b{name}\b", p.text, re.M))
            continue
        value = p("validity", name, "value")
        close(f"{c.name}: limit {name}", value, *want)
        holds = value >= least[name] if name in least else value <= most[name]
        line = re.search(rf"^  (holds|FAILS) +{name} .* ([\d.e+-]+), want (>=|<=) ([\d.]+)$", p.text, re.M)
        check(f"{c.name}: limit {name} in words", line and (line.group(1) == "holds") == holds
              and p("validity", name, "holds") == holds and shown(line.group(2), value, 3)
              and float(line.group(4)) == p("validity", name, "limit") == least.get(name, most.get(name))
              and (("validity", name, "fails") in p.rows) != holds, line and line.group(0), value)


# ---- the text has the table's numbers, in Hz, ms, um, mm/s, nK, /s -------------------------------------
def compare(name, p, pairs):
    """pairs: (text, value in the unit of the text, significant digits)"""
    wrong = [(t, v) for t, v, d in pairs if not (v is None and t == "-" or v is not None and shown(t, v, d))]
    check(f"text: {name}", pairs and not wrong, wrong or p.text)


def section(p, name):
    """Lines of a section of the text."""
    return re.search(rf"^{name}.*?(?=\n\n|\Z)", p.text, re.M | re.S).group(0).split("\n")


def scaled(value, factor):
    return None if value is None else value * factor


for c in (rb, k39, well):
    p = c.plan
    pairs, words = [], []
    for i, line in zip(c.modes, section(p, "Modes  ")[1:]):
        cells = re.sub("> +", ">", line).split(None, 10)
        re_, im = p("mode", i, "omega_re"), p("mode", i, "omega_im")
        speed = p.get("mode", i, "pattern_speed") if re_ > 0 else None
        period = p.get("mode", i, "period")
        pairs += [(cells[0], int(i), 9), (cells[1], re_ / TAU, 10), (cells[2], 1e3 / im, 5),
                  (cells[3], im * c.hold, 4), (cells[4], im * c.life, 4),
                  (cells[5].lstrip(">"), 1e6 * (period or p("mode", i, "pocket_length")), 3),
                  (cells[6], scaled(speed, 1e3), 4)]
        sound = [scaled(p.get("mode", i, f"period_{side}"), 1e6) for side in ("upstream", "downstream")]
        pairs += list(zip(cells[7:9], sound, (4, 4)))
        words.append((cells[5].startswith(">")) == (period is None))
        # whole per cents
        words.append(abs(float(cells[9].rstrip("%")) - 100 * p("mode", i, "single_wave")) <= 0.5000001)
        told = [w for w, q in (("growth", "growth"), ("motion", "frequency"), ("wave number", "wavenumber"))
                if p("mode", i, "told_by_" + q)]
        words.append(cells[10] == (", ".join(told) or "nothing" if p("mode", i, "imaged")
                                   else "nothing: too fine for the imaging"))
    compare(f"{c.name}: modes", p, pairs)
    check(f"text: {c.name}: modes in words", all(words), words, section(p, "Modes  "))

    lines = section(p, "Seeded")
    pairs = list(zip(lines[0].split()[2:], [1e3 * p(c.main, str(i), "time") for i in range(6)], [4] * 6))
    check(f"{c.name}: six even times up to the hold",
          np.allclose([p(c.main, str(i), "time") for i in range(6)], np.linspace(0, c.hold, 6), rtol=EXACT, atol=0))
    for kind, line in zip(("vacuum", "thermal"), lines[1:2 + bool(c.t)]):
        row = re.findall(r"([\d.]+(?:e[+-]\d+)?)\*?(?=\s|$)", line[34:line.index(" after")])[:6]
        values = [p(kind, str(i), "contrast") for i in range(6)]
        pairs += list(zip(row, values, [2] * 6))
        at = re.search(r"([\d.]+) after ([\d.]+) ms, 1 after ([\d.]+) ms", line)
        pairs += [(at.group(1), c.vis, 3), (at.group(2), 1e3 * p(kind, "", "visible_after"), 4),
                  (at.group(3), 1e3 * p(kind, "", "linear_until"), 4)]
        check(f"text: {c.name}: stars of {kind}", line.count("*") == sum(v >= 1 for v in values), line)
    if c.t:
        pairs.append((re.search(r"contrast, ([\d.]+) nK", p.text).group(1), 1e9 * c.t, 3))
    compare(f"{c.name}: seeds", p, pairs)
    seen = re.search(r"a contrast of ([\d.]+) is reached after ([\d.]+) ms, from (.*?): (NOT )?within the hold of "
                     r"([\d.]+) ms", p.text)
    after = p(c.main, "", "visible_after")
    compare(f"{c.name}: visible", p, [(seen.group(1), c.vis, 3), (seen.group(2), 1e3 * after, 4),
                                      (seen.group(5), 1e3 * c.hold, 4)])
    check(f"text: {c.name}: visible in words", ("thermal" in seen.group(3)) == bool(c.t)
          and (seen.group(4) is None) == (after <= c.hold), seen.group(0))

    best = re.search(r"from ([\d.]+) to ([\d.]+) um: fastest growth ([\d.]+) /s at ([\d.]+) \+- ([\d.e+-]+) um, "
                     r"frequency ([\d.]+) Hz", p.text)
    first = re.search(r"Best length gap = ([\d.]+) um: growth ([\d.]+) /s", p.text)
    values = [1e6 * p("length", "", "from"), 1e6 * p("length", "", "to"), p("length", "", "omega_im"),
              1e6 * p("length", "", "best"), 1e6 * p.error("length", "", "best"),
              p("length", "", "omega_re") / TAU]
    compare(f"{c.name}: lengths", p, list(zip(best.groups(), values, (4, 4, 4, 4, 1, 4)))
            + list(zip(first.groups(), (values[3], values[2]), (4, 4))))
    single = re.findall(r"single growing mode from (?:\(start\) )?([\d.]+) to ([\d.]+)(?: \(end\))? um; there "
                        r"fastest ([\d.]+) /s at about ([\d.]+) um", p.text)
    rows = p.items("single_mode", "from")
    pairs = [pair for i, row in zip(rows, single) for pair in zip(
        row, (1e6 * p("single_mode", i, "from"), 1e6 * p("single_mode", i, "to"), p("single_mode", i, "growth"),
              1e6 * p("single_mode", i, "fastest_at")), (5, 5, 4, 4))]
    check(f"text: {c.name}: as many stretches", len(rows) == len(single), rows, single)
    if rows:
        compare(f"{c.name}: stretches", p, pairs)

    spread = re.search(r"growth rate +([\d.]+) \+- ([\d.e+-]+) +([\d.]+) \+- ([\d.e+-]+) +([\d.]+) \+- ([\d.e+-]+) +/s",
                       p.text)
    values = [f("tolerance", "", f"growth_{q}") for q in ("05", "50", "95") for f in (p, p.error)]
    pairs = list(zip(spread.groups(), values, (4, 1) * 3))
    spread = re.search(r"frequency, fastest +([\d.]+) \+- ([\d.e+-]+) +([\d.]+) \+- ([\d.e+-]+) +([\d.]+) \+- "
                       r"([\d.e+-]+) +Hz", p.text)
    values = [f("tolerance", "", f"omega_re_{q}") / TAU for q in ("05", "50", "95") for f in (p, p.error)]
    pairs += list(zip(spread.groups(), values, (4, 1) * 3))
    spread = re.search(r"growth is ([\d.]+) \(5-95 %: ([\d.]+) to ([\d.]+)\)", p.text)
    pairs += list(zip(spread.groups(), [p("tolerance", "", "growth_" + q) for q in ("50", "05", "95")], (3, 3, 3)))
    for key in p.items("tolerance", "growth_change"):
        row = re.search(rf"^ +{key} +([\d.]+)% +(\d+) \+- +(\d+)% +([\d.-]+)$", p.text, re.M)
        share, bar = 100 * p("tolerance", key, "share"), 100 * p.error("tolerance", key, "share")
        check(f"text: {c.name}: share of {key}", abs(float(row.group(2)) - share) <= 0.5000001
              and abs(float(row.group(3)) - bar) <= 0.5000001, row.group(0), share, bar)
        pairs.append((row.group(4), p("tolerance", key, "growth_change"), 4))
    compare(f"{c.name}: tolerances", p, pairs)

    levels = p.items("wkb", "round_trip")
    pairs = []
    for i in levels:
        row = re.search(rf"^ +{i.split('/')[1]} +([\d.]+) +([\d.]+|-) +([\d.]+) +([\d.e+-]+) +([\d.e+-]+) - +([\d.e+-]+) "
                        r"+([\d.]+|-)  \S", p.text[p.text.index("WKB"):], re.M)
        frequency = p.get("wkb", i, "omega_re_uniform") or p("wkb", i, "omega_re")
        pairs += list(zip(row.groups(), (
            frequency / TAU, scaled(p.get("wkb", i, "exact_omega_re"), 1 / TAU), 1e3 * p("wkb", i, "round_trip"),
            p("wkb", i, "omega_im"), p("wkb", i, "omega_im_least"), p("wkb", i, "omega_im_most"),
            p.get("wkb", i, "exact_omega_im")), (4, 4, 4, 3, 3, 3, 4)))
    if c.kappa:
        compare(f"{c.name}: WKB", p, pairs)
    else:
        check(f"{c.name}: no WKB for jumps", not levels and ("wkb", "1", "not_known") in p.rows)

pairs = []
lines = section(k39.plan, "Ramp")
head = re.match(r"Ramp +gap from ([\d.]+) to ([\d.]+) um in ([\d.]+) ms: ([\d.]+) e-foldings at most; gap = ([\d.]+)",
                lines[0])
pairs = list(zip(head.groups(), (1e6 * k39.ramp[0], 1e6 * k39.ramp[1], 1e3 * k39.ramp[2],
                                 k39.plan("ramp", "", "efoldings_most"), 1e6 * k39.plan("ramp", "", "dominant_length")),
                 (4, 4, 4, 3, 4)))
for line in lines[2:-1]:
    cells = line.replace(" - ", " ").replace("%", "").split()
    item = cells[0]
    pairs += list(zip(cells[1:7], (
        k39.plan("ramp", item, "efoldings"), k39.plan.error("ramp", item, "efoldings"),
        1e6 * k39.plan("ramp", item, "from"), 1e6 * k39.plan("ramp", item, "to"),
        1e6 * k39.plan("ramp", item, "fastest_at"), k39.plan("ramp", item, "growth")), (4, 1, 4, 4, 4, 4)))
    check(f"text: ramp: doubtful {item}",
          abs(float(cells[7]) - 100 * k39.plan("ramp", item, "doubtful")) <= 0.5000001, line)
compare("ramp", k39.plan, pairs)
check("text: as many branches", len(lines) - 3 == len(k39.plan.items("ramp", "efoldings")) > 1)


# ---- the same in reduced units: speed of sound upstream, hbar = m = 1 ------------------------------------
# The numbers of the case differ in their last digit, 1e-16; a mode's frequency, seeds, quadratures, differences of
# rates and searches multiply that. 1e-9 is the accuracy of the case; measured 8e-11, a slope.
for c in (rb, k39):
    other = Plan(case("reduced", c.reduced))
    check(f"{c.name}: the same rows in reduced units", c.plan.rows.keys() == other.rows.keys(),
          c.plan.rows.keys() ^ other.rows.keys())
    check(f"{c.name}: no units there", {r["unit"] for r in other.rows.values() if r["value"]} == {"1"})
    check(f"{c.name}: the same words", all(c.plan.rows[key]["text"] == r["text"] for key, r in other.rows.items()))
    pairs = [(float(r["value"]), other(*key) * c.unit[r["unit"]], key) for key, r in c.plan.rows.items() if r["value"]]
    worst = max((abs(a - b) / abs(a) if a else abs(b), key) for a, b, key in pairs)
    check(f"{c.name}: the same numbers in reduced units", worst[0] < 1e-9, worst)


# ---- outgoing sound: the slower of the two decaying roots of (omega - v k)^2 = c^2 k^2 + (hbar k^2/2m)^2 ----
for c in (rb, k39, well):
    p = c.plan
    for i in c.modes:
        omega = complex(p("mode", i, "omega_re"), p("mode", i, "omega_im"))
        for side, sign, sound in (("upstream", -1, c.cu), ("downstream", 1, c.cd)):
            scale = c.mass * sound / si.hbar  # of wave numbers
            o, v = omega / (sound * scale), c.v / sound
            k = np.roots([0.25, 0, 1 - v * v, 2 * o * v, -o * o])
            k = min(k[sign * k.imag > 0], key=lambda z: abs(z.imag)) * scale
            # 1e-8: roots of a quartic lose half the digits where two of them are near
            close(f"{c.name}, mode {i}: decay {side}", p("mode", i, "decay_" + side), 1 / abs(k.imag), 1e-8)
            if omega.real == 0:
                check(f"{c.name}, mode {i}: no waves {side}", p.get("mode", i, "period_" + side) is None)
            else:
                close(f"{c.name}, mode {i}: period {side}", p("mode", i, "period_" + side), TAU / abs(k.real), 1e-8)


# ---- shapes --------------------------------------------------------------------------------------------
def shapes(c):
    path = os.path.join(folder, "shapes.h5")
    run("solve", c.path, "--modes", path)
    with h5py.File(path) as file:
        x, eta = file["x"][:], file["eta_re"][:] + 1j * file["eta_im"][:]
    return x, [CubicSpline(x, row) for row in eta[:len(c.modes)]]  # growing ones come first


def told(c, k, omega, hold, resolution):
    """The documented rules of what tells a mode from the static undulation."""
    one = TAU / c.pocket
    seen = TAU / max(abs(k), one) >= resolution
    return {"told_by_frequency": omega.real * hold / TAU >= 1, "told_by_growth": omega.imag * hold / 2 >= 1,
            "imaged": seen, "told_by_wavenumber": seen and TAU / c.undulation >= resolution
            and abs(abs(k) - c.undulation) > one}


check("without a density there are no seeds", all(("thermal", "", "not_known") in c.plan.rows and len(c.modes) == 3
                                                 and not c.plan.items("thermal", "contrast") for c in (longer, blurred)))
if h5py is None:
    print("# no h5py: ripples and their sums not checked")
else:
    seen = set()
    for c in (rb, k39, well, longer, blurred):
        p, (x, eta) = c.plan, shapes(c)
        left, right = c.horizons
        inside = np.linspace(left, right, 4097)
        h = inside[1] - inside[0]
        weight = np.ones(inside.size)
        weight[[0, -1]] = 0.5
        pad = 1 << 19
        waves = TAU * np.fft.fftfreq(pad, h)
        one = TAU / c.pocket
        # beyond horizons: as far as the file goes, the loudest place is nearer
        outside = {"upstream": x[x <= left], "downstream": x[x >= right]}
        outside["upstream"], outside["downstream"] = (np.append(x, e) for x, e in zip(outside.values(), c.horizons))
        loud = []
        for i, f in zip(c.modes, eta):
            omega = complex(p("mode", i, "omega_re"), p("mode", i, "omega_im"))
            field = f(inside)
            size = np.abs(np.fft.fft(weight * field, pad)) * h
            allowed = np.where(np.abs(waves) <= 1.5 * c.undulation)[0]
            top = allowed[np.argmax(size[allowed])]
            k, most = waves[top], size[top]
            name = f"{c.name}, mode {i}"
            got = p.get("mode", i, "period")
            # the padded transform has 128 points for each 2 pi/length: half of one is 0.004
            room = 0.006 * one
            if got is None:
                check(f"{name}: longer than the pocket", abs(k) < one + room, k / one)
            else:
                check(f"{name}: period", abs(TAU / got - abs(k)) < room, TAU / got / one, k / one)
                speed = p("mode", i, "pattern_speed")
                close(f"{name}: speed of the pattern", abs(speed), omega.real * got / TAU, EXACT)
                check(f"{name}: way of the pattern", omega.real == 0 or (speed > 0) == (k > 0), speed, k)
            total = np.sum(weight * np.abs(field) ** 2) * h
            share = most**2 / (c.pocket * total) * (2 if omega.real == 0 and k != 0 else 1)
            # quadratic about its maximum, of which the grid of wave numbers misses (pi 0.004)^2/3 = 5e-5
            close(f"{name}: share of a single wave", p("mode", i, "single_wave"), min(1.0, share), 5e-4)
            peak = np.max(np.abs(field))
            # the program samples the undulation 36 times a period: half of that off, 1 - (pi/36)^2/2 of the peak
            check(f"{name}: loudest place", abs(f(p("mode", i, "loudest_at"))) > 0.996 * peak
                  and left <= p("mode", i, "loudest_at") <= right)
            for side, places in outside.items():
                # both look on samples of their own: as above
                close(f"{name}: loudness {side}", p("mode", i, "loudness_" + side),
                      np.max(np.abs(f(places))) / peak, 4e-3)
            answer = told(c, k, omega, c.hold, c.res)
            check(f"{name}: told apart", all(p("mode", i, w) == yes for w, yes in answer.items()), answer)
            seen |= set(answer.items())
            line = section(p, "Modes  ")[int(i)]
            check(f"{name}: too fine in words", ("too fine for the imaging" in line) != answer["imaged"], line)
            loud.append(np.abs(field) / peak)

        if ("thermal", "", "visible_after") not in p.rows and ("vacuum", "", "visible_after") not in p.rows:
            continue
        # contrast^2 = largest over the pocket of the sum of a^2 e^{2 gamma t} |eta|^2; modes of different Re omega
        # do not interfere in the average. The tables' times are those of crossing.
        check(f"{c.name}: at most one mode stands still",
              sum(p("mode", i, "omega_re") == 0 for i in c.modes) < 2)
        rate = [p("mode", i, "omega_im") for i in c.modes]
        for kind in ("vacuum", "thermal")[:1 + bool(c.t)]:
            a = [p.get(kind, f"mode {i}", "amplitude") or 0.0 for i in c.modes]

            def contrast(t):
                return math.sqrt(np.max(sum((b * math.exp(g * t) * s) ** 2 for b, g, s in zip(a, rate, loud))))
            # the program looks for the loudest place on samples of its own: 1.1e-5 measured
            off = max(abs(p(kind, str(i), "contrast") / contrast(p(kind, str(i), "time")) - 1) for i in range(6))
            check(f"{c.name}: contrasts, {kind}", off < 1e-4, off)
            for quantity, level in (("visible_after", c.vis), ("linear_until", 1.0)):
                t = p(kind, "", quantity)
                close(f"{c.name}: {quantity}, {kind}", contrast(t), level, 1e-4)
    wanted = {(w, yes) for w in ("told_by_frequency", "told_by_growth", "told_by_wavenumber", "imaged")
              for yes in (True, False)}
    check("every answer is there as yes and as no", seen == wanted, wanted - seen)

# whatever the shapes: the loudest mode alone is less, all at one place in phase are more
for c in (rb, k39, well):
    p = c.plan
    for kind in ("vacuum", "thermal")[:1 + bool(c.t)]:
        t = p(kind, "", "visible_after")
        parts = [(p.get(kind, f"mode {i}", "amplitude") or 0.0) * math.exp(p("mode", i, "omega_im") * t)
                 for i in c.modes]
        check(f"{c.name}: visible between its loudest mode and the sum of squares, {kind}",
              t > 0 and max(parts) <= c.vis * (1 + 1e-6) and math.hypot(*parts) >= c.vis * (1 - 1e-6), parts, c.vis)
    if c.t:
        check(f"{c.name}: thermal louder than vacuum", all(
            p("thermal", f"mode {i}", "amplitude") > p("vacuum", f"mode {i}", "amplitude") for i in c.modes))

# with one mode alone exactly a e^{gamma t}; the program's search ends at 1e-9 or better
alone = Plan(k39.path, "--set", "flow.gap=3.1 um", "--set", "plan.gap_ramp=3 um to 3.1 um in 1 ms",
             "--set", "plan.gap_range=3 um to 3.2 um")
check("one mode alone", alone.items("mode", "omega_im") == ["1"])
for kind in ("vacuum", "thermal"):
    close(f"time to visibility, {kind}", alone(kind, "", "visible_after"), math.log(
        k39.vis / alone(kind, "mode 1", "amplitude")) / alone("mode", "1", "omega_im"), 1e-8)


# ---- lengths: sweeps and switch-on lengths ----------------------------------------------------------------
def sweep(c, axis, *more):
    """Points as (value of the axis, fastest growth, growth rates, Re omega of the fastest)."""
    out = os.path.join(tempfile.mkdtemp(dir=folder), "sweep")
    done = run("sweep", c.path, "--set", axis, "--out", out, *more)
    assert done.returncode == 0, done.stderr
    key = re.match(r"sweep\.(\w+)=", axis).group(1)
    rates = {}
    with open(os.path.join(out, "modes.csv"), encoding="utf-8") as file:
        for r in csv.DictReader(file):
            if r["label"] == "unstable":
                rates.setdefault(r[key], []).append(float(r["omega_im"]))
    with open(os.path.join(out, "points.csv"), encoding="utf-8") as file:
        return [(float(r[key]), float(r["growth_max"]), rates.get(r[key], []), float(r["omega_re_fastest"] or 0))
                for r in csv.DictReader(file)]


for c, points in ((rb, 81), (k39, 141), (well, 11)):
    p, (low, high) = c.plan, c.range
    line = high - low
    best, growth, at_end = p("length", "", "best"), p("length", "", "omega_im"), p("length", "", "at_end")
    swept = sweep(c, f"sweep.gap={low * 1e6!r} um to {high * 1e6!r} um in {points}")
    top = max(swept, key=lambda q: q[1])
    # half a step of the sweep beside the top of a parabola costs 4e-4 here (measured)
    check(f"{c.name}: fastest of a sweep", abs(best - top[0]) <= line / (points - 1) * 1.01
          and -1e-9 <= growth / top[1] - 1 < 2e-3, top, best, growth)
    if at_end:
        check(f"{c.name}: best at an end", best in (low, high)
              and top[0] == min((low, high), key=lambda g: abs(g - best)), best, top)
    else:
        near = sweep(c, f"sweep.gap={(best - 4e-3 * line) * 1e6!r} um to {(best + 4e-3 * line) * 1e6!r} um in 9")
        z = (np.array([q[0] for q in near]) - best) / (4e-3 * line)
        fit = np.polyfit(z, [q[1] for q in near], 4)
        flat = np.roots(np.polyder(fit))
        flat = min(flat[abs(flat.imag) < 1e-9].real, key=abs) * 4e-3 * line
        # 1e-4 of the line is what the header of track.h promises
        check(f"{c.name}: best length where a fit through nine solves is flat", abs(flat) < 1e-4 * line,
              flat / line, best)
        check(f"{c.name}: error bar of the best length", abs(flat) <= p.error("length", "", "best"), flat,
              p.error("length", "", "best"))
        close(f"{c.name}: growth there", growth, np.polyval(fit, flat / (4e-3 * line)), 1e-7)  # 3e-9 measured
    stretches = [(p("single_mode", i, "from"), p("single_mode", i, "to")) for i in p.items("single_mode", "from")]
    edge = 1e-4 * line  # an end is where the number changes, to 1e-4 of the line (track.h)
    wrong = [q for q in swept if (len(q[2]) == 1) != any(a <= q[0] <= b for a, b in stretches)
             and all(abs(q[0] - e) > edge for s in stretches for e in s)]
    check(f"{c.name}: stretches of a single mode in the sweep", not wrong, wrong[:3], stretches)
    for i in p.items("single_mode", "from"):
        a, b = p("single_mode", i, "from"), p("single_mode", i, "to")
        inside = [q[1] for q in swept if a <= q[0] <= b]
        # a stretch names one of the points of the line, between which rates bend by 2e-3 of the largest (track.h)
        check(f"{c.name}: fastest in stretch {i}", inside
              and abs(p("single_mode", i, "growth") / max(inside) - 1) < 2e-3
              and a <= p("single_mode", i, "fastest_at") <= b, inside)
    onsets = [float(r["gap"]) for r in csv.DictReader(
        run("onset", c.path, "--upto", f"{high * 1e6!r} um", "--csv", "-").stdout.splitlines())]
    ends = [e for s in stretches for e in s]
    near = [min(abs(e - g) for g in onsets + [low, high]) for e in ends]
    check(f"{c.name}: stretches end at switch-on lengths", max(near, default=0) < edge, ends, onsets)
check("some stretch is there", rb.plan.items("single_mode", "from") and k39.plan.items("single_mode", "from"))

# A ramp: time/length times the integral over the length, by the trapezoidal rule. Growth sets in like a root,
# which costs a third of the rate at the first point times a step, and bends at mergers: 1e-4 measured
start, end, duration = k39.ramp
swept = sweep(k39, f"sweep.gap={end * 1e6!r} um to {start * 1e6!r} um in 501")
gaps = np.array([q[0] for q in swept])
for name, rates, want in (
        ("most", [q[1] for q in swept], k39.plan("ramp", "", "efoldings_most")),
        ("all branches", [sum(q[2]) for q in swept],
         sum(k39.plan("ramp", i, "efoldings") for i in k39.plan.items("ramp", "efoldings")))):
    rates = np.array(rates)
    gain = np.sum((rates[1:] + rates[:-1]) / 2 * np.diff(gaps)) * duration / (start - end)
    close(f"gain of a ramp: {name}", want, gain, 5e-4)

# ---- tolerances ---------------------------------------------------------------------------------------
# First order: central differences of solves, +-1e-4 of the key; 1.5e-5 measured
for key, value, unit, drift in (("speed", k39.v * 1e3, "mm/s", 0.015), ("gap", k39.gap * 1e6, "um", 0.05)):
    pair = sweep(k39, f"sweep.{key}={value * (1 - 1e-4)!r} {unit}, {value * (1 + 1e-4)!r} {unit}")
    slope = (pair[1][1] - pair[0][1]) / 2e-4 * drift
    close(f"first order of {key}", k39.plan("tolerance", key, "growth_change"), slope, 1e-4)
# One key alone: quantiles of the growth over an even spread of it, five standard errors of 64 samples
swept = sweep(well, f"sweep.gap={well.gap * 0.92e6!r} um to {well.gap * 1.08e6!r} um in 9")
even = np.linspace(swept[0][0], swept[-1][0], 20001)
rates = CubicSpline([q[0] for q in swept], [q[1] for q in swept])(even)
for q in ("05", "50", "95"):
    got, bar = well.plan("tolerance", "", f"growth_{q}"), well.plan.error("tolerance", "", f"growth_{q}")
    check(f"growth, {q} %", abs(got - np.quantile(rates, int(q) / 100)) <= 5 * bar and bar < 0.1 * got, got, bar,
          np.quantile(rates, int(q) / 100))
share = well.plan("tolerance", "gap", "share")
check("the only key has all of the variance", abs(share - 1) <= 5 * well.plan.error("tolerance", "gap", "share") + 1e-3,
      share)

# ---- same seed, same bytes ----------------------------------------------------------------------------
check("same bytes again, on one thread", Plan(k39.path, "--threads", "1").bytes == k39.plan.bytes)
check("same bytes on two threads", Plan(k39.path, "--threads", "2").bytes == k39.plan.bytes)
changed = Plan(k39.path, "--set", "plan.seed=8")
moved = {key[0] for key, r in k39.plan.rows.items() if r != changed.rows[key]}
check("another seed: other samples, nothing else", moved == {"tolerance"}, moved)

# ---- refused ------------------------------------------------------------------------------------------
WRONG = {"hold_time": ("4", "-3 ms", "0 s", "3 um", "nan s"), "lifetime": ("1", "0 s", "2 mm/s"),
         "temperature": ("1", "-1 nK", "0 nK", "1 ms"), "resolution": ("2", "0 um", "1 Hz"),
         "visibility": ("0", "1", "100 %", "-5 %", "much"), "transverse_frequency": ("900", "0 Hz", "3 um"),
         "gap_ramp": ("4 um", "4 um to 6 um", "4 um to 4 um in 1 ms", "4 um to 6 um in 0 ms", "4 um to 6 um in 3 um",
                      "-1 um to 3 um in 1 ms"),
         "gap_range": ("4 um", "6 um to 4 um", "4 um to 4 um", "4 um to 6 um in 3 ms", "0 um to 3 um"),
         "samples": ("63", "65", "56", "1000008", "64.5", "many"), "seed": ("-1", "1.5", "x"),
         "tolerance.gap": ("0.05", "0 %", "100 %", "-2 %"), "tolerance.shape": ("2 %",), "tolerance.gapp": ("2 %",),
         "hold_tim": ("1 ms",)}
manual = run("--case-manual").stdout.replace("\\-", "-").replace("\\", "")
known = re.findall(r"^\.B (\S+)", re.search(r"^\.SS \[plan\]\n(.*?)^\.S[SH]", manual, re.M | re.S).group(1), re.M)
check("every key of [plan] is tried", {k.replace("KEY", "gap") for k in known} <= WRONG.keys(), known)
for key, values in WRONG.items():
    for value in values:
        done = run("plan", k39.path, "--csv", "-", "--set", f"plan.{key}={value}")
        check(f"refused: {key} = {value}", done.returncode == 2 and done.stdout == "" and key in done.stderr
              and done.stderr.startswith("twinhorizon: ") and done.stderr.count("\n") == 1, done)
for done, word in ((run("plan", k39.path, "--csv", "-", "--threads", "0"), "--threads 0"),
                   (run("plan", k39.path, "--csv", os.path.join(folder, "no", "x.csv")), "folder")):
    check(f"refused: {word}", done.returncode == 2 and word in done.stderr
          and done.stderr.count("\n") == 1 and done.stdout == "", done.stderr)
print(f"1..{results}")
sys.exit(failures > 0)
