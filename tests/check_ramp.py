#!/usr/bin/python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
"""E-foldings of holds and ramps against a simulation: check_ramp.py PROGRAM. Prints TAP.

The reference integrates the linearised equations in time while the length of the pocket changes, for flows
with uniform n and v, so that the flow stays stationary on the way. It shares nothing with the library but
the equations. Scheme: Strang splitting on a periodic grid, the part with constant coefficients exactly for
each wave number by numpy's FFT (eta_t = -i v k eta + k^2 phi, phi_t = -i v k phi - k^2 eta/4), the kick
phi -= dt c(x, t)^2 eta between; an absorbing layer far from the pocket. k_max^2 dt < 2 pi keeps the splitting
free of resonances.

A ramp of the time T multiplies the amplitude by exp(gain) times a factor that does not depend on T, and
gain is proportional to T: so log(ramp of 2T) - log(ramp of T) is compared with the gain of the ramp of T.
1 %: what a plan promises for a single mode.
"""
import csv
import os
import subprocess
import sys
import tempfile

import numpy as np

program = os.path.abspath(sys.argv[1])
results = failures = 0


def check(name, good, *details):
    global results, failures
    results += 1
    failures += not good
    print(f"{'ok' if good else 'not ok'} {results} - {name}")
    for detail in details:
        print(f"#   {detail}")


class Simulation:
    """One pocket: c2(x, length) is the squared sound speed."""

    def __init__(self, speed, c2, size=160.0, points=1024, step=0.012):
        self.c2, self.step = c2, step
        self.x = (np.arange(points) - points // 2) * (size / points)
        k = 2 * np.pi * np.fft.rfftfreq(points, size / points)
        assert k[-1] ** 2 * step < 2 * np.pi
        turn = np.exp(-1j * k * speed * step)
        self.cos, self.sin = np.cos(k**2 / 2 * step) * turn, np.sin(k**2 / 2 * step) * turn
        away = np.maximum(np.abs(self.x) - 0.3 * size, 0.0) / (0.2 * size)
        self.mask = np.exp(-step * 2.0 * away**3)
        self.seen = away == 0.0

    def size_of(self, eta):
        return np.log(np.sqrt(np.sum(eta[self.seen] ** 2)))

    def run(self, eta, phi, length_at, time):
        """Fields after a time, and the logarithm of what they were divided by on the way."""
        divided, points, length = 0.0, self.x.size, length_at(0.0)
        kick = self.step / 2 * self.c2(self.x, length)
        for i in range(int(round(time / self.step))):
            phi = phi - kick * eta
            a, b = np.fft.rfft((eta, phi))
            eta, phi = self.mask * np.fft.irfft(
                (self.cos * a + 2 * self.sin * b, self.cos * b - self.sin / 2 * a), points)
            before, length = length, length_at((i + 1) * self.step)
            if length != before:
                kick = self.step / 2 * self.c2(self.x, length)
            phi = phi - kick * eta
            if i % 500 == 499:
                largest = np.max(np.abs(eta))
                divided += np.log(largest)
                eta, phi = eta / largest, phi / largest
        return eta, phi, divided

    def mode(self, length, time):
        """The fastest mode, by waiting."""
        return self.run(np.exp(-self.x**2), 0 * self.x, lambda t: length, time)[:2]

    def ramp(self, state, start, end, time, settle, omega):
        """Logarithm of the growth over a ramp and a hold at its end: of an oscillating mode averaged over
        a half period, where the square of the field goes through all its phases."""
        eta, phi = state
        before = self.size_of(eta)
        eta, phi, total = self.run(
            eta, phi, lambda t: start + (end - start) * min(1.0, t / time), time)
        eta, phi, more = self.run(eta, phi, lambda t: end, settle)
        total += more - before
        if omega.real == 0.0:
            return total + self.size_of(eta)
        samples, logs = 64, []
        part = np.pi / omega.real / samples
        for i in range(samples):
            eta, phi, more = self.run(eta, phi, lambda t: end, part)
            total += more
            logs.append(total + self.size_of(eta) - omega.imag * (i + 1) * part)
        return 0.5 * np.log(np.mean(np.exp(2 * np.array(logs))))


def ask(command, text):
    """The rows of `command --csv`."""
    with tempfile.TemporaryDirectory() as folder:
        case = os.path.join(folder, "case.ini")
        with open(case, "w", encoding="utf-8") as file:
            file.write(f"[units]\nsystem = reduced\n[flow]\n{text}")
        done = subprocess.run([program, command, case, "--csv", "-"], capture_output=True, text=True,
                              timeout=300, check=False)
    if done.returncode != 0:
        raise RuntimeError(done.stderr)
    return list(csv.DictReader(done.stdout.splitlines()))


def plan(flow, start, end, time):
    """The numbers of a plan: {(topic, item, quantity): value}."""
    rows = ask("plan", f"{flow}{start}\n[plan]\nhold_time = {time}\n"
               f"gap_ramp = {start} to {end} in {time}\ngap_range = {start} to {start * 1.001}\n")
    return {(r["topic"], r["item"], r["quantity"]): float(r["value"]) for r in rows if r["value"]}


def tanh_edges(speed, up, pocket, down, w_b, w_w):
    shift_b = w_b * np.arctanh((up + pocket - 2 * speed) / (up - pocket))
    shift_w = w_w * np.arctanh((down + pocket - 2 * speed) / (down - pocket))

    def c2(x, gap):
        c = (pocket + (up - pocket) * (1 - np.tanh((x + gap / 2 + shift_b) / w_b)) / 2
             + (down - pocket) * (1 + np.tanh((x - gap / 2 - shift_w) / w_w)) / 2)
        return c**2
    return c2


def tanh_text(speed, up, pocket, down, w_b, w_w):
    return (f"shape = tanh\nspeed = {speed}\nsound_upstream = {up}\nsound_pocket = {pocket}\n"
            f"sound_downstream = {down}\nwidth_black = {w_b}\nwidth_white = {w_w}\ngap = ")


def sech(x, width):
    return 1.4**2 - 1.6 / np.cosh(x / width) ** 2


# name, speed, c2, [flow] up to the length, ramp, its time; the first ramp crosses the length at which the
# purely growing mode becomes an oscillating one
first, second = (1.0, 1.5, 0.5, 1.5, 0.5, 0.5), (0.9, 1.3, 0.45, 1.6, 0.7, 0.4)
CASES = (
    ("tanh, through a merger", 1.0, tanh_edges(*first), tanh_text(*first), 2.0, 4.0, 50.0),
    ("tanh, unequal edges", 0.9, tanh_edges(*second), tanh_text(*second), 3.1, 1.9, 50.0),
    ("sech, ramp of the width", 1.0, sech,
     "shape = sech\nspeed = 1\nsound_upstream = 1.4\ndepth = 1.6\nwidth = ", 1.1, 1.7, 60.0),
    ("tanh, a slower mode grows too", 1.0, tanh_edges(*first), tanh_text(*first), 5.2, 6.2, 60.0),
)

def gain(simulation, state, flow, start, end, time):
    """What a ramp of twice the time gains more."""
    fastest = max(ask("solve", f"{flow}{end}\n"), key=lambda row: float(row["omega_im"]))
    omega = complex(float(fastest["omega_re"]), float(fastest["omega_im"]))
    once, twice = (simulation.ramp(state, start, end, t, 60.0, omega) for t in (time, 2 * time))
    return twice - once


for name, speed, c2, flow, start, end, time in CASES:
    simulation = Simulation(speed, c2)
    state = simulation.mode(start, 150.0)
    answer = plan(flow, start, end, time)
    held = simulation.run(*state, lambda t: start, time)
    growth = simulation.size_of(held[0]) + held[2] - simulation.size_of(state[0])
    wanted = answer["mode", "1", "efoldings_hold"]
    check(f"{name}: e-foldings of a hold", abs(growth / wanted - 1) < 0.01 and wanted > 1,
          f"plan {wanted:.6g}, simulation {growth:.6g}")
    wanted, got = answer["ramp", "1", "efoldings"], gain(simulation, state, flow, start, end, time)
    check(f"{name}: gain of a ramp", abs(got / wanted - 1) < 0.01 and wanted > 1,
          f"plan {wanted:.6g}, simulation {got:.6g}")
    check(f"{name}: little of it is doubtful", answer["ramp", "1", "doubtful"] < 0.1,
          answer["ramp", "1", "doubtful"])

# Two modes grow, the faster one goes through its merger, and the ramp is so fast that they mix on the way.
start, end, time, flow = 6.0, 7.5, 25.0, tanh_text(*first)
simulation = Simulation(1.0, tanh_edges(*first))
answer = plan(flow, start, end, time)
wanted = answer["ramp", "1", "efoldings"]
got = gain(simulation, simulation.mode(start, 150.0), flow, start, end, time)
check("too fast: the gain does not hold, and that is said",
      abs(got / wanted - 1) > 0.05 and answer["ramp", "1", "doubtful"] > 0.2,
      f"plan {wanted:.6g}, simulation {got:.6g}", answer["ramp", "1", "doubtful"])
print(f"1..{results}")
sys.exit(failures > 0)
