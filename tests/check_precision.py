#!/usr/bin/python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
"""Frequencies and their error bars against a 20-digit computation: check_precision.py PROGRAM
prints TAP; check_precision.py PROGRAM --random N [SEED] solves N random flows and prints how often
the error bars hold.

What is shared with the program is the flow, from its formulas. The rest goes another way. Equations
for the two amplitudes of delta psi = e^{i theta} (u e^{-i omega t} + w* e^{i omega* t}), with
psi_0 = sqrt(n) e^{i theta} and q = v^2 + 2 (V + c^2 - mu) = (sqrt n)''/sqrt n off the barriers,
    u'' = -2 i v u' - i v' u + (q - 2 omega) u + 2 c^2 (u + w)
    w'' = +2 i v w' + i v' w + (q + 2 omega) w + 2 c^2 (u + w)
and u' jumps by 2 Z u (w' by 2 Z w) at a barrier Z delta(x), which the program never writes down.
Outside: the two plane waves that decay. Uniform pieces: plane waves. Smooth pieces: power series
in t = (x - x_0)/h of u and w, and of the flow by T' = (1 - T^2)/width. All numbers of the series
are integers times 2^-bits.
A frequency is a zero of the determinant of the four solutions at x = 0, found by secants that start
from the program's value.

Three checks a mode: the difference is below 1e-11, it is below the error bar that the program
quotes, and (a few modes) the 20 digits do not depend on the steps chosen here. To add a flow: a
line in FLOWS; for a new shape a function like sech(), listed in SHAPES.
"""
import csv
import io
import os
import random
import subprocess
import sys
import tempfile
from operator import mul as times

from mpmath import atanh, mp, mpc, mpf, pi, polyroots, sqrt, tanh as mp_tanh

mp.dps = 40
# A tail is cut at 1e-28 of what it sits on.
TAIL = 65  # -log(1e-28)


class Grain:
    """Digits, terms and step length; the second one checks the first."""

    def __init__(self, bits, terms, ratio, longest):
        self.bits = bits  # binary digits after the point
        self.terms = terms  # of a power series
        self.ratio = ratio  # largest h over the distance of the nearest singularity
        self.longest = longest  # largest h times the largest wave number


# The waves are as singular as (x - x_0)^-r where the flow has a pole, r = 11 for the sech pocket
# below: terms of the series fall as m^(r - 1) ratio^m.
USUAL = Grain(140, 64, mpf("0.3"), 8)
OTHER = Grain(170, 84, mpf("0.27"), 10)


# ---- power series in fixed point -----------------------------------------------------------------
def fixed(x, grain):
    return int(mp.nint(mp.ldexp(x, grain.bits)))


def convolve(a, b, m):
    """Term m of a product, not shifted back."""
    if len(a) > len(b):
        a, b = b, a
    return sum(map(times, a[: m + 1], reversed(b[max(0, m - len(a) + 1) : m + 1])))


def product(a, b, grain):
    return [convolve(a, b, m) >> grain.bits for m in range(grain.terms)]


def scaled(a, factor, grain):
    factor = fixed(factor, grain)
    return [x * factor >> grain.bits for x in a]


def plus(a, b):
    return [x + y for x, y in zip(a, b)]


def constant(x, grain):
    return [fixed(x, grain)] + [0] * (grain.terms - 1)


def inverse(a, grain):
    one = 1 << 2 * grain.bits
    b = [one // a[0]]
    for m in range(1, grain.terms):
        b.append(-sum(map(times, a[1 : m + 1], b[m - 1 :: -1])) // a[0])
    return b


def tanh_series(value, slope, h, grain):
    """T(x_0 + h t) with T' = slope (1 - T^2)."""
    t = [fixed(value, grain)]
    rate = fixed(slope * h, grain)
    for m in range(grain.terms - 1):
        square = sum(map(times, t, reversed(t))) >> grain.bits
        t.append((((m == 0) << grain.bits) - square) * rate // ((m + 1) << grain.bits))
    return t


# ---- flows ---------------------------------------------------------------------------------------
class Uniform:
    def __init__(self, length, v, c):
        self.length, self.v, self.c = mpf(length), mpf(v), mpf(c)


class Kink:
    """A barrier; `strength` has the sign of the direction of travel."""

    def __init__(self, strength):
        self.strength = strength


class Smooth:
    """start, signed length, distance(x) of the nearest singularity, series(x, h, grain) -> v, c^2,
    q (None when it vanishes)."""

    def __init__(self, start, length, distance, series):
        self.start, self.length = mpf(start), mpf(length)
        self.distance, self.series = distance, series


class Flow:
    """ends: (v, c) left and right; halves: what lies between each end and x = 0, inwards."""

    def __init__(self, left, right, from_left, from_right):
        self.ends, self.halves = (left, right), (from_left, from_right)
        self.fastest = max(mpf(c) for _, c in self.ends)
        self.cut = {}


def step(speed, sound_upstream, sound_pocket, sound_downstream, gap):
    inside = mpf(gap) / 2
    return Flow((speed, sound_upstream), (speed, sound_downstream),
                [Uniform(inside, speed, sound_pocket)], [Uniform(-inside, speed, sound_pocket)])


def smooth_everywhere(speed, c_left, c_right, reach_left, reach_right, distance, series):
    return Flow((speed, c_left), (speed, c_right),
                [Smooth(-reach_left, reach_left, distance, series)],
                [Smooth(reach_right, -reach_right, distance, series)])


def tanh(speed, sound_upstream, sound_pocket, sound_downstream, width_black, width_white, gap):
    v, c_u, c_p, c_d = map(mpf, (speed, sound_upstream, sound_pocket, sound_downstream))
    w_b, w_w, half = mpf(width_black), mpf(width_white), mpf(gap) / 2
    x_b = -half - w_b * atanh((c_u + c_p - 2 * v) / (c_u - c_p))
    x_w = half + w_w * atanh((c_d + c_p - 2 * v) / (c_d - c_p))

    def distance(x):
        return min(mp.hypot(x - x_b, w_b * pi / 2), mp.hypot(x - x_w, w_w * pi / 2))

    def series(x, h, grain):
        b = tanh_series(mp_tanh((x - x_b) / w_b), 1 / w_b, h, grain)
        w = tanh_series(mp_tanh((x - x_w) / w_w), 1 / w_w, h, grain)
        c = plus(constant((c_u + c_d) / 2, grain),
                 plus(scaled(b, (c_p - c_u) / 2, grain), scaled(w, (c_d - c_p) / 2, grain)))
        return constant(v, grain), product(c, c, grain), None

    tail = TAIL / mpf(2) * max(w_b, w_w)
    return smooth_everywhere(v, c_u, c_d, tail - x_b, tail + x_w, distance, series)


def sech(speed, sound_upstream, depth, width):
    v, c_u, depth, width = map(mpf, (speed, sound_upstream, depth, width))

    def series(x, h, grain):
        t = tanh_series(mp_tanh(x / width), 1 / width, h, grain)
        return (constant(v, grain),
                plus(constant(c_u**2 - depth, grain), scaled(product(t, t, grain), depth, grain)),
                None)

    reach = TAIL * width / 2
    return smooth_everywhere(v, c_u, c_u, reach, reach, lambda x: mp.hypot(x, width * pi / 2),
                             series)


def slope_series(a, h, grain):
    """d/dx of a series in t = (x - x_0)/h; its last term is lost."""
    return scaled([(m + 1) * a[m + 1] for m in range(grain.terms - 1)] + [0], 1 / h, grain)


def continuity(speed_upstream, speed_pocket, speed_downstream, sound_upstream, width_black,
               width_white, gap):
    """n v = J, c^2 proportional to n: with v = c, v_h^3 = c_u^2 v_u; q = 3/4 (v'/v)^2 - v''/(2 v)."""
    v_u, v_p, v_d, c_u = map(mpf, (speed_upstream, speed_pocket, speed_downstream, sound_upstream))
    w_b, w_w, half = mpf(width_black), mpf(width_white), mpf(gap) / 2
    v_h = mp.cbrt(c_u**2 * v_u)
    x_b = -half - w_b * atanh((v_u + v_p - 2 * v_h) / (v_u - v_p))
    x_w = half + w_w * atanh((v_d + v_p - 2 * v_h) / (v_d - v_p))
    # zeros of v, each edge taken alone
    zero_b, zero_w = x_b + w_b / 2 * mp.log(v_u / v_p), x_w - w_w / 2 * mp.log(v_d / v_p)

    def distance(x):
        return min(mp.hypot(x - at, w * pi / 2)
                   for at, w in ((x_b, w_b), (zero_b, w_b), (x_w, w_w), (zero_w, w_w)))

    def series(x, h, grain):
        b = tanh_series(mp_tanh((x - x_b) / w_b), 1 / w_b, h, grain)
        w = tanh_series(mp_tanh((x - x_w) / w_w), 1 / w_w, h, grain)
        v = plus(constant((v_u + v_d) / 2, grain),
                 plus(scaled(b, (v_p - v_u) / 2, grain), scaled(w, (v_d - v_p) / 2, grain)))
        one_over = inverse(v, grain)
        slope = slope_series(v, h, grain)
        curve = product(slope_series(slope, h, grain), one_over, grain)
        slope = product(slope, one_over, grain)
        q = plus(scaled(product(slope, slope, grain), mpf(3) / 4, grain),
                 scaled(curve, mpf(-1) / 2, grain))
        return v, scaled(one_over, c_u**2 * v_u, grain), q

    tail = TAIL / mpf(2) * max(w_b, w_w)
    return Flow((v_u, c_u), (v_d, c_u * sqrt(v_u / v_d)),
                [Smooth(-(tail - x_b), tail - x_b, distance, series)],
                [Smooth(tail + x_w, -(tail + x_w), distance, series)])


def soliton(mach, gap, n_plateau, t0, strength):
    """A uniform plateau between two pieces n = m^2 + (1 - m^2) tanh^2(kappa s + atanh t0) of V = 0
    and mu = m^2/2 + 1 (s: distance from the plateau)."""
    kappa, half = sqrt(1 - mach**2), gap / 2
    a = atanh(t0)
    reach = TAIL / (2 * kappa)

    def distance(x):
        at = kappa * (abs(x) - half) + a
        return min(mp.hypot(at, mp.asin(mach)), mp.hypot(at, pi / 2)) / kappa

    def series(x, h, grain):
        side = 1 if x > 0 else -1
        t = tanh_series(mp_tanh(kappa * (abs(x) - half) + a), side * kappa, h, grain)
        n = plus(constant(mach**2, grain), scaled(product(t, t, grain), kappa**2, grain))
        v = scaled(inverse(n, grain), mach, grain)
        q = plus(product(v, v, grain),
                 plus(scaled(n, 2, grain), constant(-2 - mach**2, grain)))
        return v, n, q

    c, v = sqrt(n_plateau), mach / n_plateau
    return Flow((mach, 1), (mach, 1),
                [Smooth(-half - reach, reach, distance, series), Kink(strength),
                 Uniform(half, v, c)],
                [Smooth(half + reach, -reach, distance, series), Kink(-strength),
                 Uniform(-half, v, c)])


def well(mach, gap):
    m = mpf(mach)
    return soliton(m, mpf(gap), m**2, mpf(0), 0)


def barriers(mach, gap):
    m = mpf(mach)
    n_d = m**2 / 4 * (1 + sqrt(1 + 8 / m**2))
    t0 = sqrt((n_d - m**2) / (1 - m**2))
    return soliton(m, mpf(gap), n_d, t0, sqrt(1 - m**2) ** 3 * t0 * (1 - t0**2) / (2 * n_d))


# ---- the determinant -----------------------------------------------------------------------------
def wave_numbers(omega, v, c):
    """(omega - v k)^2 = c^2 k^2 + k^4/4"""
    return polyroots([mpf(1) / 4, 0, c**2 - v**2, 2 * omega * v, -(omega**2)], maxsteps=200,
                     extraprec=200)


def plane_wave(omega, k, v, c):
    ratio = (omega - v * k - k**2 / 2) / c**2 - 1
    return [mpc(1), mpc(0, 1) * k, ratio, mpc(0, 1) * k * ratio]


def decaying(omega, v, c, sign):
    """The two wave numbers of a decaying solution, by sign of Im k where Im omega > 0, and followed
    from there where it is not."""
    v, c = mpf(v), mpf(c)
    top = mpc(omega.real, max(omega.imag, abs(omega) / 2))
    k = [z for z in wave_numbers(top, v, c) if sign * z.imag > 0]
    assert len(k) == 2
    moves = 0 if top == omega else 40
    for i in range(1, moves + 1):
        new = wave_numbers(top + (omega - top) * i / moves, v, c)
        k = [min(new, key=lambda z, old=old: abs(z - old)) for old in k]
        assert k[0] != k[1]
    return k


def across_uniform(piece, omega, y):
    k = wave_numbers(omega, piece.v, piece.c)
    waves = [plane_wave(omega, z, piece.v, piece.c) for z in k]
    part = mp.lu_solve(mp.matrix(waves).T, mp.matrix(y))
    part = [part[i] * mp.exp(mpc(0, 1) * k[i] * piece.length) for i in range(4)]
    return [sum(part[i] * waves[i][j] for i in range(4)) for j in range(4)]


def cut_up(piece, fastest, grain):
    """Steps (h, h v, (h v)_t, h^2 q, 2 h^2 c^2) of a smooth piece."""
    steps = []
    x, left = piece.start, abs(piece.length)
    direction = mp.sign(piece.length)
    while left > 0:
        h = min(left, grain.ratio * piece.distance(x), grain.longest / (2 * fastest))
        left -= h
        v, c2, q = piece.series(x, direction * h, grain)
        h *= direction
        v, c2 = scaled(v, h, grain), scaled(c2, 2 * h**2, grain)
        slope = [(j + 1) * v[j + 1] for j in range(grain.terms - 1)]
        if not any(slope):
            v, slope = v[:1], []
        steps.append((h, v, slope, [] if q is None else scaled(q, h**2, grain), c2))
        x += h
    return steps


def across_step(step_, omega, y, grain):
    h, v, slope, q, c2 = step_
    bits = grain.bits
    two_omega = 2 * h**2 * omega
    o_re, o_im = fixed(two_omega.real, grain), fixed(two_omega.imag, grain)
    u_re, u_im, w_re, w_im = ([fixed(part(y[i]), grain), fixed(part(y[i + 1]) * h, grain)]
                              for i in (0, 2)
                              for part in (lambda z: mp.re(z), lambda z: mp.im(z)))
    rows = (u_re, u_im, w_re, w_im)
    rates = [[row[1]] for row in rows]
    sums = ([u_re[0] + w_re[0], u_re[1] + w_re[1]], [u_im[0] + w_im[0], u_im[1] + w_im[1]])
    for m in range(grain.terms - 2):
        pressure = [convolve(c2, s, m) for s in sums]
        drift = [2 * convolve(v, d, m) + (convolve(slope, r, m) if slope else 0)
                 for r, d in zip(rows, rates)]
        bend = [convolve(q, r, m) if q else 0 for r in rows]
        omega_u = (o_re * u_re[m] - o_im * u_im[m], o_re * u_im[m] + o_im * u_re[m])
        omega_w = (o_re * w_re[m] - o_im * w_im[m], o_re * w_im[m] + o_im * w_re[m])
        new = (drift[1] + bend[0] + pressure[0] - omega_u[0],
               -drift[0] + bend[1] + pressure[1] - omega_u[1],
               -drift[3] + bend[2] + pressure[0] + omega_w[0],
               drift[2] + bend[3] + pressure[1] + omega_w[1])
        for row, rate, value in zip(rows, rates, new):
            rate.append((value >> bits) // (m + 1))
            row.append(rate[-1] // (m + 2))
        sums[0].append(u_re[-1] + w_re[-1])
        sums[1].append(u_im[-1] + w_im[-1])
    end = [mp.ldexp(sum(row), -bits) for row in rows]
    rate = [mp.ldexp(sum(r), -bits) / h for r in rates]
    return [mpc(end[0], end[1]), mpc(rate[0], rate[1]), mpc(end[2], end[3]), mpc(rate[2], rate[3])]


def across(piece, flow, omega, columns, grain):
    """Both solutions through a piece, and the determinant of what was taken out of them."""
    taken = mpc(1)
    if isinstance(piece, Kink):
        return [[y[0], y[1] + 2 * piece.strength * y[0], y[2], y[3] + 2 * piece.strength * y[2]]
                for y in columns], taken
    if isinstance(piece, Uniform):
        return [across_uniform(piece, omega, y) for y in columns], taken
    key = (id(piece), grain)
    if key not in flow.cut:
        flow.cut[key] = cut_up(piece, flow.fastest, grain)
    for step_ in flow.cut[key]:
        a, b = (across_step(step_, omega, y, grain) for y in columns)
        size = sqrt(sum(abs(z) ** 2 for z in a))
        a = [z / size for z in a]
        overlap = sum(mp.conj(z) * w for z, w in zip(a, b))
        b = [w - overlap * z for z, w in zip(a, b)]
        other = sqrt(sum(abs(z) ** 2 for z in b))
        columns = [a, [z / other for z in b]]
        taken *= size * other
    return columns, taken


def determinant(flow, omega, grain):
    columns = []
    scale = mpc(1)
    for (v, c), half, sign in zip(flow.ends, flow.halves, (-1, 1)):
        k = decaying(omega, v, c, sign)
        pair = [plane_wave(omega, z, mpf(v), mpf(c)) for z in k]
        scale /= k[0] - k[1]
        for piece in half:
            pair, taken = across(piece, flow, omega, pair, grain)
            scale *= taken
        columns += pair
    a, b, c, d = columns
    sum_ = mpc(0)
    for i, j, k, l, sign in ((0, 1, 2, 3, 1), (0, 2, 1, 3, -1), (0, 3, 1, 2, 1),
                             (1, 2, 0, 3, 1), (1, 3, 0, 2, -1), (2, 3, 0, 1, 1)):
        sum_ += sign * (a[i] * b[j] - a[j] * b[i]) * (c[k] * d[l] - c[l] * d[k])
    return sum_ * scale


def frequency(flow, start, grain=USUAL):
    """The zero next to start; (omega, last step)."""
    old, new = mpc(start), mpc(start) * (1 + mpf("1e-11"))
    at_old, at_new = determinant(flow, old, grain), determinant(flow, new, grain)
    for _ in range(8):
        move = at_new * (new - old) / (at_new - at_old)
        old, at_old, new = new, at_new, new - move
        if abs(move) < mpf("1e-15") * abs(new):  # the next one would be its square
            return new, abs(move)
        at_new = determinant(flow, new, grain)
    raise ArithmeticError(f"no zero near {mp.nstr(mpc(start), 15)}")


# ---- the program ---------------------------------------------------------------------------------
SHAPES = {"step": step, "tanh": tanh, "sech": sech, "well": well, "barriers": barriers,
          "continuity": continuity}


def solve(program, shape, keys):
    """Rows of solve --csv - as (label, omega, omega_error)."""
    with tempfile.TemporaryDirectory() as folder:
        path = os.path.join(folder, "case.ini")
        with open(path, "w", encoding="ascii") as file:
            file.write("[units]\nsystem = reduced\n[flow]\nshape = " + shape + "\n")
            file.writelines(f"{key} = {value}\n" for key, value in keys.items())
        done = subprocess.run([program, "solve", path, "--csv", "-"], capture_output=True,
                              text=True, check=False)
    rows = csv.DictReader(io.StringIO(done.stdout))
    return [(row["label"], mpc(row["omega_re"], row["omega_im"]), mpf(row["omega_error"]))
            for row in rows]


# ---- checks --------------------------------------------------------------------------------------
# Shape, values of its keys (decimal, the same for both sides), growing modes with Re omega >= 0,
# and their frequencies where another computation has given them before: two discretisations, which
# agreed to 1e-12. The numbers of modes follow from the switch-on lengths passed, N of them making
# (N + 1)/2 modes (whole part): closed forms for all but tanh and continuity, where the
# static index has no closed form and the number is the program's.
FLOWS = (
    ("step", "0.75 1 0.3 1 8", 2, "0.142518475424499 0.00688361317667656 "
                                  "0.0141567448043275 0.00192438844739335"),
    ("step", "0.75 1 0.3 1 12", 3, "0 0.0288302909215668 0.0933422191395339 0.0193246580738012 "
                                   "0.179482642470148 0.00267911113370677"),
    ("step", "1 1.5 0.5 1.5 12", 4, "0 0.01416371444060744 0.1862445573539899 0.010908285585175 "
                                    "0.2690462675509777 0.00221631049737 "
                                    "0.0747222794599171 0.00198925014565"),
    ("step", "1 0.8 0.5 0.7 6", 1, ""),  # supersonic everywhere
    ("tanh", "1 1.5 0.5 1.5 0.5 0.5 8", 2, ""),
    ("tanh", "1 1.35 0.55 1.45 0.4 0.8 6.5", 2, ""),
    ("sech", "1 1.5 2 4", 1, ""),
    ("well", "0.6 1.5", 2, "0 0.0989695258316815 0.645373558172 0.00243696234375"),
    ("barriers", "0.55 6", 2, ""),
    ("continuity", "0.6 1.4 0.55 1 0.6 0.8 6", 2, ""),
    ("continuity", "0.45 1.1 0.5 1 0.3 0.9 4", 1, ""),
)
KEYS = {
    "step": "speed sound_upstream sound_pocket sound_downstream gap",
    "tanh": "speed sound_upstream sound_pocket sound_downstream width_black width_white gap",
    "sech": "speed sound_upstream depth width",
    "well": "mach gap",
    "barriers": "mach gap",
    "continuity": "speed_upstream speed_pocket speed_downstream sound_upstream width_black "
                  "width_white gap",
}
EARLIER = mpf("1e-12")  # how well the earlier computations agreed
ABSOLUTE = mpf("1e-11")  # frequencies of these flows are of order 0.1
REFERENCE = mpf("1e-19")  # how well two references agree: error bars are above 1e-16


class Tap:
    def __init__(self):
        self.count = self.failed = 0

    def check(self, name, good, detail):
        self.count += 1
        self.failed += not good
        print(f"{'ok' if good else 'not ok'} {self.count} - {name}: {detail}", flush=True)


def check_flow(tap, program, shape, values, modes, earlier):
    keys = dict(zip(KEYS[shape].split(), values.split()))
    flow = SHAPES[shape](**keys)
    name = f"{shape} {values}"
    rows = [row for row in solve(program, shape, keys) if row[0] == "unstable"]
    tap.check(name, len(rows) == modes, f"{len(rows)} growing modes, want {modes}")
    true = []
    for _, omega, bar in rows:
        omega_true, move = frequency(flow, omega)
        off = abs(omega - omega_true)
        true.append(omega_true)
        tap.check(name, off <= ABSOLUTE and move < REFERENCE, f"omega = {mp.nstr(omega_true, 20)}")
        tap.check(name, off <= bar < ABSOLUTE,
                  f"off by {mp.nstr(off, 2)}, error bar {mp.nstr(bar, 2)}")
    numbers = earlier.split()
    for re, im in zip(numbers[::2], numbers[1::2]):
        off = min((abs(mpc(re, im) - omega) for omega in true), default=mpf("inf"))
        tap.check(name, off <= EARLIER, f"earlier value {re} + {im} i, off by {mp.nstr(off, 2)}")
    return flow, true


def check_all(program):
    tap = Tap()
    for shape, values, modes, earlier in FLOWS:
        flow, true = check_flow(tap, program, shape, values, modes, earlier)
        if shape != "step" and true:
            off = abs(frequency(flow, true[0], OTHER)[0] - true[0])
            tap.check(f"{shape} {values}", off < REFERENCE,
                      f"other digits, terms and steps move the reference by {mp.nstr(off, 2)}")
    print(f"1..{tap.count}")
    return tap.failed > 0


# ---- random flows, by hand -----------------------------------------------------------------------
def random_case(dice, shape):
    speed = dice.uniform(0.5, 1.5)
    up, down = (speed * dice.uniform(1.08, 1.8) for _ in range(2))
    pocket, gap = speed * dice.uniform(0.3, 0.92), dice.uniform(1, 14)
    slow = dice.uniform(0.3, 0.8)
    values = {
        "step": (speed, up, pocket, down, gap),
        "tanh": (speed, up, pocket, down, dice.uniform(0.2, 1.5), dice.uniform(0.2, 1.5), gap),
        "sech": (speed, up, up**2 - pocket**2, gap / 2),
        "well": (dice.uniform(0.2, 0.9), dice.uniform(0.2, 6)),
        "barriers": (dice.uniform(0.2, 0.9), dice.uniform(0.5, 12)),
        "continuity": (slow, dice.uniform(1.1, 1.9), slow ** (1 / 3) * dice.uniform(0.5, 0.9), 1,
                       dice.uniform(0.2, 1.5), dice.uniform(0.2, 1.5), gap),
    }[shape]
    return {key: f"{value:.4g}" for key, value in zip(KEYS[shape].split(), values)}


def survey(program, flows, seed):
    dice = random.Random(seed)
    held = {}
    for number in range(flows):
        shape = list(SHAPES)[number % len(SHAPES)]
        keys = random_case(dice, shape)
        flow = SHAPES[shape](**keys)
        for label, omega, bar in solve(program, shape, keys):
            try:
                first, second = (frequency(flow, omega, grain)[0] for grain in (USUAL, OTHER))
                if abs(first - second) > REFERENCE:
                    raise ArithmeticError(f"two references differ by {abs(first - second)}")
            except (ArithmeticError, AssertionError) as error:
                print("no reference:", shape, keys, label, mp.nstr(omega, 15), error, flush=True)
                continue
            off = abs(second - omega)
            held.setdefault((shape, label), []).append(off / bar)
            if off > bar / 2:
                print(shape, keys, label, mp.nstr(omega, 15), "off", mp.nstr(off, 3), "bar",
                      mp.nstr(bar, 3), flush=True)
    for (shape, label), ratio in sorted(held.items()):
        ratio.sort()
        print(f"{shape} {label}: {sum(r <= 1 for r in ratio)} of {len(ratio)} inside the bar; "
              f"off/bar median {mp.nstr(ratio[len(ratio) // 2], 2)}, "
              f"largest {mp.nstr(ratio[-1], 3)}")


if len(sys.argv) > 2 and sys.argv[2] == "--random":
    survey(sys.argv[1], int(sys.argv[3]), int(sys.argv[4]) if len(sys.argv) > 4 else 1)
else:
    sys.exit(check_all(sys.argv[1]))
