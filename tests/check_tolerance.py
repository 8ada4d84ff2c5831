#!/usr/bin/python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
"""Tolerances against 10 000 solves at other random points: check_tolerance.py PROGRAM. Prints TAP.

The reference is written here in numpy and shares nothing with the library but the equations: step pockets,
plane waves of (omega - v k)^2 = c^2 k^2 + k^4/4 with (eta, phi) ~ (k^2, -i (omega - v k)), which with their
slopes are continuous where c jumps; zeros of the determinant by the secant method from many starts. How many
there must be is a closed form: lengths L_j = [atan(k_u/k_0) + atan(k_d/k_0) + j pi]/k_0 ("Saturation of black
hole lasers in Bose-Einstein condensates", Phys. Rev. D 88, 125012 (2013)). Points: numpy's generator, fixed
seeds.

The library is called through a shim compiled against its public headers; without a C compiler all is
skipped.
"""
import ctypes
import os
import shutil
import subprocess
import sys
import tempfile

os.environ["OPENBLAS_NUM_THREADS"] = "1"  # small matrices: more threads only wait for each other
import numpy as np  # noqa: E402

program = os.path.abspath(sys.argv[1])
include = os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "include")
compiler = next((shutil.which(c) for c in ("cc", "gcc", "clang") if shutil.which(c)), None)
if compiler is None:
    print("1..0 # SKIP no C compiler")
    sys.exit(0)

SHIM = r"""
#include <stdio.h>
#include <twinhorizon/case.h>
#include <twinhorizon/tolerance.h>

static double *put(double *to, th_estimate e) { to[0] = e.value; to[1] = e.error; return to + 2; }

static double *put_spread(double *to, th_spread s)
{
    return put(put(put(to, s.low), s.median), s.high);
}

/* out: value, error of growing, growth (3), frequency (3), visible; failed + undecided, unstable_least,
 * unstable_most; then by key of the shape [5][2] share, error */
int shim_sample(const char *text, const double *tolerance, int threads, double hold, double threshold,
                double seed_amplitude, double *out, char *message)
{
    enum { MODES = 1000 };
    const th_solve_options usual = {.accuracy = 1e-9};
    double amplitude[MODES];
    th_tolerance_options options = {.tolerance = tolerance, .seed = 1, .accuracy = 1e-9,
        .threads = threads, .hold = hold, .threshold = threshold, .amplitude = amplitude};
    th_case *c = NULL;
    th_flow *flow = NULL;
    th_solution *solution = NULL;
    th_tolerance t = {0};
    th_error err = {0};
    int st = th_case_read_text("check_tolerance.ini", text, NULL, 0, &c, &err);

    if (st == TH_OK)
        st = th_flow_build(&c->setup, &flow, &err);
    if (st == TH_OK)
        st = th_solve(flow, &usual, &solution, &err);
    for (int i = 0; i < MODES; i++)
        amplitude[i] = seed_amplitude;
    if (st == TH_OK)
        st = solution->count <= MODES
                 ? th_tolerance_sample(&c->setup, solution, &options, &t, &err) : TH_EBUG;
    if (st == TH_OK) {
        double *to = put(put_spread(put_spread(put(out, t.growing), t.growth), t.frequency), t.visible);
        *to++ = t.failed + t.undecided;
        *to++ = t.unstable_least;
        *to++ = t.unstable_most;
        for (int k = 0; k < t.keys; k++) {
            to[2 * t.key[k].key] = t.key[k].share;
            to[2 * t.key[k].key + 1] = t.key[k].share_error;
        }
    }
    snprintf(message, 512, "%s", err.text);
    th_tolerance_clear(&t);
    th_solution_destroy(solution);
    th_flow_destroy(flow);
    th_case_destroy(c);
    return st;
}
"""

POINTS = 10000
KEYS = ("speed", "sound_upstream", "sound_pocket", "sound_downstream", "gap")
AMPLITUDE, THRESHOLD = 1e-3, 0.1

# name, values, relative tolerances, hold time, lattice of starts. The first pocket may be stable, has one
# growing mode or two; the second has many, and which is the fastest changes.
CASES = [
    ("short pocket", (0.75, 1.0, 0.3, 1.1, 2.2), (0.06, 0, 0.1, 0, 0.5), 75.0, (3, 3, 15)),
    ("long pocket", (1.0, 1.5, 0.5, 1.3, 6.0), (0.05, 0.05, 0, 0, 0.2), 75.0, (5, 3, 15)),
]
# A share of 1e-2 of all comparisons may lie farther out; seeds are fixed.
ERRORS = 3.5

results = 0
failures = 0


def check(name, good, *details):
    global results, failures
    results += 1
    failures += not good
    print(f"{'ok' if good else 'not ok'} {results} - {name}")
    for detail in details if not good else ():
        print(f"#   {detail}")


# ---- the reference: value[..., 5] by KEYS, omega complex ----------------------------------------------


def waves(omega, v, c):
    """Wave numbers [..., 4] by rising imaginary part."""
    companion = np.zeros(omega.shape + (4, 4), complex)
    companion[..., 0, 1] = -4 * (c**2 - v**2)
    companion[..., 0, 2] = -8 * v * omega
    companion[..., 0, 3] = 4 * omega**2
    companion[..., 1, 0] = companion[..., 2, 1] = companion[..., 3, 2] = 1
    k = np.linalg.eigvals(companion)
    return np.take_along_axis(k, np.argsort(k.imag, axis=-1), axis=-1)


def columns(k, omega, v):
    """eta, eta', phi, phi' of each wave: [..., 4, waves]"""
    comoving = omega[..., None] - v[..., None] * k
    return np.stack([k**2, 1j * k**3, -1j * comoving, k * comoving], axis=-2)


def determinant(omega, value):
    """Zero at growing modes; without the zeros where two wave numbers outside meet."""
    v, up, pocket, down, gap = np.moveaxis(value, -1, 0)
    left = waves(omega, v, up)[..., :2]  # die out to the left
    right = waves(omega, v, down)[..., 2:]
    inside = waves(omega, v, pocket)
    basis = columns(inside, omega, v)
    weight = np.linalg.solve(basis, columns(left, omega, v))
    carried = basis @ (np.exp(1j * inside * gap[..., None])[..., None] * weight)
    both = np.concatenate([carried, columns(right, omega, v)], axis=-1)
    return np.linalg.det(both) / ((left[..., 0] - left[..., 1]) * (right[..., 0] - right[..., 1]))


def secant(start, value, steps=14):
    """Zeros from starts, arrays of the same length; nan where none in the upper half plane was reached."""
    root = np.full(start.shape, np.nan + 0j)
    at = np.arange(len(start))
    old, new = start * (1 + 1e-4), start.copy()
    f_old = determinant(old, value)
    for _ in range(steps):
        f_new = determinant(new, value[at])
        with np.errstate(all="ignore"):
            step = -f_new * (new - old) / (f_new - f_old)
        done = np.abs(step) < 1e-7 * np.abs(new)  # the next would be 1e-10
        root[at[done]] = (new + step)[done]
        step[np.abs(step) > 0.2] = np.nan
        keep = ~done & np.isfinite(step) & ((new + step).imag > 1e-9)
        at, old, f_old, new = at[keep], new[keep], f_new[keep], (new + step)[keep]
        if not len(at):
            break
    return root


def count(value):
    """Growing modes, both signs of Re omega."""
    v, up, pocket, down, gap = value.T
    k_0, k_u, k_d = (2 * np.sqrt(np.abs(c**2 - v**2)) for c in (pocket, up, down))
    turns = (gap * k_0 - np.arctan(k_u / k_0) - np.arctan(k_d / k_0)) / np.pi
    return np.maximum(np.ceil(turns).astype(int), 0)


def distinct(roots):
    """Modes with Re omega >= 0 in a list of zeros."""
    found = []
    for omega in roots[np.isfinite(roots)]:
        omega = complex(abs(omega.real) if abs(omega.real) > 1e-7 * abs(omega) else 0, omega.imag)
        if all(abs(omega - other) > 1e-6 * abs(omega) for other in found):
            found.append(omega)
    return np.array(found, complex)


def weigh(modes):
    return sum(1 if omega.real == 0 else 2 for omega in modes)


def anywhere():
    """Starts all over the region where growing modes are."""
    re, im = np.meshgrid([0, 0.01, 0.03, 0.06, 0.1, 0.14, 0.18, 0.24, 0.3],
                         [0.003, 0.01, 0.03, 0.06, 0.1, 0.14])
    return np.r_[1j * np.array([1e-5, 1e-4, 3e-4, 1e-3]), (re + 1j * im).ravel()]


def solve_from(values, starts):
    """Modes of each point from its own list of starts."""
    owner = np.repeat(np.arange(len(values)), [len(s) for s in starts])
    if not len(owner):
        return [np.zeros(0, complex) for _ in values]
    roots = secant(np.concatenate(starts), values[owner])
    edges = np.searchsorted(owner, np.arange(len(values) + 1))
    return [distinct(roots[edges[i]: edges[i + 1]]) for i in range(len(values))]


def reference(base, tolerance, u, lattice):
    """Modes at all points, how many there must be, and for how many points that is not so. Starts are the
    modes of the nearest point of a lattice; where they do not lead to all, of its neighbours; then anywhere."""
    moved = np.flatnonzero(tolerance)
    values = base * (1 + tolerance * (2 * u - 1))
    axes = [(np.arange(n) + 0.5) / n for n in lattice]
    nodes = np.full((int(np.prod(lattice)), len(base)), 0.5)
    nodes[:, moved] = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, len(moved))
    known = solve_from(base * (1 + tolerance * (2 * nodes - 1)), [anywhere()] * len(nodes))
    place = np.ravel_multi_index(
        [np.minimum((u[:, d] * n).astype(int), n - 1) for d, n in zip(moved, lattice)], lattice)
    wanted = count(values)
    modes = [np.zeros(0, complex) for _ in values]
    wrong = np.arange(len(values))
    for starts in (lambda p: known[p],
                   lambda p: np.concatenate([known[max(p - 1, 0)], known[min(p + 1, len(nodes) - 1)]]),
                   lambda p: anywhere()):
        found = solve_from(values[wrong], [np.concatenate([modes[i], starts(place[i])]) for i in wrong])
        for i, m in zip(wrong, found):
            modes[i] = m
        wrong = np.array([i for i in wrong if weigh(modes[i]) != wanted[i]], int)
        print(f"# {len(wrong)} of {len(values)} points are left")
    return modes, wanted, len(wrong)


# ---- statistics of independent points ---------------------------------------------------------------------


def part(chosen):
    p = np.mean(chosen)
    return p, np.sqrt(p * (1 - p) / len(chosen))


def quantile(y, q):
    """Value; half the distance of the order statistics one standard deviation away."""
    off = np.sqrt(q * (1 - q) / len(y))
    return np.quantile(y, q), (np.quantile(y, min(q + off, 1)) - np.quantile(y, max(q - off, 0))) / 2


def share(y, u, bins=16):
    """Variance of the means of bins, less what their finite number of points makes of it."""
    def of(y, u):
        place = (u * bins).astype(int)
        n = np.bincount(place, minlength=bins)
        mean = np.bincount(place, y, bins) / n
        within = (np.bincount(place, y**2, bins) / n - mean**2) / (n - 1)
        return np.sum(n * ((mean - y.mean())**2 - within)) / len(y) / np.var(y)

    groups = 20
    without = [of(np.delete(y, np.s_[g::groups]), np.delete(u, np.s_[g::groups])) for g in range(groups)]
    return of(y, u), (groups - 1) / np.sqrt(groups) * np.std(without, ddof=1)


def compare(name, got, want, bar):
    """(value, error) twice; the library's error is below `bar`."""
    off, error = abs(got[0] - want[0]), np.hypot(got[1], want[1])
    print(f"# {name}: {got[0]:.6f} +- {got[1]:.6f}, {POINTS} points {want[0]:.6f} +- {want[1]:.6f}")
    check(name, off <= ERRORS * error and got[1] <= bar, f"off by {off}, errors {error}, bar {bar}")


def main():
    random = np.random.default_rng(1)
    for name, base, tolerance, hold, lattice in CASES:
        text = "[units]\nsystem = reduced\n[ends]\nkind = open\n[flow]\nshape = step\n" + "".join(
            f"{key} = {value:.17g}\n" for key, value in zip(KEYS, base))
        out, message = np.zeros(19 + 2 * len(KEYS)), ctypes.create_string_buffer(512)
        base, tolerance = np.array(base), np.array(tolerance, float)
        pointer = ctypes.c_void_p
        status = shim.shim_sample(
            text.encode(), tolerance.ctypes.data_as(pointer), 2, ctypes.c_double(hold),
            ctypes.c_double(THRESHOLD), ctypes.c_double(AMPLITUDE), out.ctypes.data_as(pointer), message)
        check(f"{name}: sampled", status == 0, message.value.decode())
        if status:
            continue
        u = random.random((POINTS, len(KEYS)))
        modes, wanted, unresolved = reference(base, tolerance, u, lattice)
        # next to switch-ons and mergers zeros are not told apart
        check(f"{name}: the reference finds all modes", unresolved <= POINTS // 1000, unresolved)
        fastest = [max(m, key=lambda w: w.imag, default=0j) for m in modes]
        growth, frequency = np.array([w.imag for w in fastest]), np.array([w.real for w in fastest])
        contrast = np.array([np.sqrt(np.sum(AMPLITUDE**2 * np.exp(2 * hold * m.imag))) for m in modes])
        grows = wanted > 0
        estimate = out[:16].reshape(8, 2)
        spread = np.quantile(growth, 0.95) - np.quantile(growth, 0.05)
        check(f"{name}: all samples are answered", out[16] == 0, out[16])
        check(f"{name}: numbers of growing modes", wanted.min() <= out[17] <= out[18] <= wanted.max(),
              out[17:19], wanted.min(), wanted.max())
        compare(f"{name}: probability of growth", estimate[0], part(grows), 0.02)
        for i, q in enumerate((0.05, 0.5, 0.95)):
            compare(f"{name}: growth rate, {q}", estimate[1 + i], quantile(growth, q), 0.03 * spread)
            compare(f"{name}: frequency, {q}", estimate[4 + i], quantile(frequency[grows], q),
                    0.1 * max(np.ptp(frequency), 1e-9))
        compare(f"{name}: probability of being seen", estimate[7], part(contrast >= THRESHOLD), 0.02)
        for k in np.flatnonzero(tolerance):
            compare(f"{name}: share of {KEYS[k]}", out[19 + 2 * k: 21 + 2 * k], share(growth, u[:, k]), 0.05)


with tempfile.TemporaryDirectory() as folder:
    source, built = os.path.join(folder, "shim.c"), os.path.join(folder, "shim.so")
    with open(source, "w") as file:
        file.write(SHIM)
    subprocess.run([compiler, "-std=c11", "-shared", "-fPIC", "-I", include, source, "-o", built],
                   check=True)
    ctypes.CDLL(os.path.join(os.path.dirname(program), "libtwinhorizon.so"), ctypes.RTLD_GLOBAL)
    shim = ctypes.CDLL(built)
    main()
print(f"1..{results}")
sys.exit(failures > 0)
