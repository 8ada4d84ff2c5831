#!/usr/bin/python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
"""Seeded growth against a simulation: check_seed.py PROGRAM. Prints TAP.

The reference shares nothing with the library but the equations of motion and the energy
Q = 1/2 Int n (phi'^2 + c^2 eta^2 + eta'^2/4) dx: finite differences of fourth order on an even grid in a
box, all normal modes of Q by numpy's dense symmetric eigensolver, time steps by the implicit midpoint
rule (scipy's sparse factors). Flows are written out here. The box: free ends, the flow ends smoothly
before them, so that a constant phase stays one and nothing is emitted there. Seeds are fixed.

The library is called through a shim compiled against its public headers; without a C compiler all is
skipped.
"""
import ctypes
import os
import shutil
import subprocess
import sys
import tempfile

import numpy as np
import scipy.interpolate as interpolate
import scipy.linalg as dense
import scipy.sparse as sparse
import scipy.sparse.linalg as splinalg

program = os.path.abspath(sys.argv[1])
include = os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "include")
compiler = next((shutil.which(c) for c in ("cc", "gcc", "clang") if shutil.which(c)), None)
if compiler is None:
    print("1..0 # SKIP no C compiler")
    sys.exit(0)

SHIM = r"""
#include <stdio.h>
#include <twinhorizon/case.h>
#include <twinhorizon/seed.h>

/* row [cap][8]: omega_re, omega_im, known, amplitude, error, place, squeezing, 0 */
int shim_open(const char *text, double density, double temperature, void **seed, int cap,
              double *row, int *count, char *message)
{
    const th_solve_options usual = {.accuracy = 1e-9};
    const th_seed_options options = {.density = density, .temperature = temperature};
    const th_seed_mode *mode;
    th_case *c = NULL;
    th_flow *flow = NULL;
    th_solution *solution = NULL;
    th_error err = {0};
    int st = th_case_read_text("check_seed.ini", text, NULL, 0, &c, &err);

    if (st == TH_OK)
        st = th_flow_build(&c->setup, &flow, &err);
    if (st == TH_OK)
        st = th_solve(flow, &usual, &solution, &err);
    if (st == TH_OK)
        st = th_seed_create(flow, solution, &options, (th_seed **)seed, &err);
    if (st == TH_OK) {
        mode = th_seed_modes(*seed, count);
        for (int i = 0; i < *count && i < cap; i++) {
            double *r = row + 8 * i;
            r[0] = mode[i].omega_re; r[1] = mode[i].omega_im; r[2] = mode[i].known;
            r[3] = mode[i].amplitude; r[4] = mode[i].error; r[5] = mode[i].place;
            r[6] = mode[i].squeezing; r[7] = 0;
        }
    }
    snprintf(message, 512, "%s", err.text);
    th_solution_destroy(solution);
    th_flow_destroy(flow);
    th_case_destroy(c);
    return st;
}

int shim_contrast(void *seed, int kind, double time, int count, const double *x, double *rms)
{
    return th_seed_contrast(seed, (th_seed_kind)kind, time, count, x, rms, NULL);
}

void shim_close(void *seed) { th_seed_destroy(seed); }
"""

results = 0
failures = 0


def check(name, good, *details):
    global results, failures
    results += 1
    failures += not good
    print(f"{'ok' if good else 'not ok'} {results} - {name}")
    for detail in details if not good else ():
        print(f"#   {detail}")


class Seed:
    """The library's answer for a case text."""

    def __init__(self, text, density, temperature):
        handle, count = ctypes.c_void_p(), ctypes.c_int()
        rows = np.zeros((16, 8))
        message = ctypes.create_string_buffer(512)
        status = shim.shim_open(
            text.encode(), ctypes.c_double(density), ctypes.c_double(temperature),
            ctypes.byref(handle), 16, rows.ctypes.data_as(ctypes.c_void_p), ctypes.byref(count),
            message)
        if status:
            raise RuntimeError(message.value.decode())
        self.handle = handle
        rows = rows[: count.value]
        self.omega = rows[:, 0] + 1j * rows[:, 1]
        self.known, self.amplitude, self.place, self.squeezing = (
            rows[:, 2], rows[:, 3], rows[:, 5], rows[:, 6])

    def contrast(self, time, x):
        x = np.ascontiguousarray(x, dtype=float)
        rms = np.zeros_like(x)
        status = shim.shim_contrast(
            self.handle, 1, ctypes.c_double(time), x.size, x.ctypes.data_as(ctypes.c_void_p),
            rms.ctypes.data_as(ctypes.c_void_p))
        assert status == 0
        return rms

    def close(self):
        shim.shim_close(self.handle)


# ---- flows: n(x), c(x) and the constant n v ------------------------------------------------------

HEAD = "[units]\nsystem = reduced\n[ends]\nkind = open\n[flow]\n"


def step(x):
    return np.ones_like(x), np.where(np.abs(x) < 1.0, 0.3, 1.0)


def tanh(x):
    v, c_u, c_p, w, gap = 1.0, 1.5, 0.5, 0.5, 8.0
    shift = gap / 2 + w * np.arctanh((c_u + c_p - 2 * v) / (c_u - c_p))
    return np.ones_like(x), c_p + (c_u - c_p) * (
        1 - np.tanh((x + shift) / w) / 2 + np.tanh((x - shift) / w) / 2)


def well(x):
    m, gap = 0.6, 1.5
    away = np.maximum(np.abs(x) - gap / 2, 0.0)
    n = m**2 + (1 - m**2) * np.tanh(np.sqrt(1 - m**2) * away) ** 2
    return n, np.sqrt(n)


# Horizons of the well: c = v, n^(3/2) = m, beyond the plateau.
WELL_POCKET = 1.5 + 2 * np.arctanh(np.sqrt((0.6 ** (2 / 3) - 0.36) / 0.64)) / 0.8

# name, case, fields, n v, length of the pocket, half length of the box, spacing. Half length: the partners of the fastest
# modes have died to e^-3 or less there, so that the end takes less than 3e-3 off a mean square.
# Spacing: the edges of the step lie halfway between grid points; growth rates come out to 0.3 %.
FLOWS = [
    ("step", HEAD + "shape = step\nspeed = 0.75\nsound_upstream = 1\nsound_pocket = 0.3\n"
     "sound_downstream = 1\ngap = 2\n", step, 0.75, 2.0, 100.0, 0.1),
    ("tanh", HEAD + "shape = tanh\nspeed = 1\nsound_upstream = 1.5\nsound_pocket = 0.5\n"
     "sound_downstream = 1.5\nwidth_black = 0.5\nwidth_white = 0.5\ngap = 8\n",
     tanh, 1.0, 8.0, 200.0, 0.2),
    ("well", HEAD + "shape = well\nmach = 0.6\ngap = 1.5\n", well, 0.6, WELL_POCKET, 75.0, 0.075),
]
DENSITY = 37.0  # far upstream


class Box:
    """Matrices of a flow: z = (eta, phi) sqrt(n dx), z_t = generator z, Q = (q A q + p B p)/2."""

    def __init__(self, fields, flux, pocket, half, dx):
        self.pocket = pocket
        size = int(round(2 * half / dx))
        self.x = (np.arange(size) - (size - 1) / 2) * dx
        n, c = fields(self.x)
        between = fields((self.x[1:] + self.x[:-1]) / 2)[0]
        # staggered first derivative, fourth order inside, second at the two outermost points
        slope = sparse.lil_matrix((size - 1, size))
        for i in range(size - 1):
            if 0 < i < size - 2:
                slope[i, i - 1: i + 3] = np.array([1, -27, 27, -1]) / (24 * dx)
            else:
                slope[i, i: i + 2] = np.array([-1, 1]) / dx
        middle = sparse.diags(
            [np.full(size - abs(d), w / (12 * dx)) for d, w in ((-2, 1), (-1, -8), (1, 8), (2, -1))],
            [-2, -1, 1, 2])
        end = (half - np.abs(self.x)) / 10  # the flow ends on the last ten lengths
        taper = np.clip(end - 0.1, 0, 1)
        taper = taper**2 * (3 - 2 * taper)
        root = sparse.diags(1 / np.sqrt(n))
        stiff = root @ slope.T @ sparse.diags(between) @ slope @ root
        advection = root @ sparse.diags(flux * taper) @ middle @ root
        self.root = np.sqrt(n * dx)
        self.a = (sparse.diags(c**2) + stiff / 4).tocsc()
        self.b = stiff.tocsc()
        # n d_t phi = -J phi' - ..., n d_t eta = dH/dphi: the transpose
        self.generator = sparse.bmat(
            [[advection.T, self.b], [-self.a, -advection]]).tocsc()
        self.states = None

    def normal_modes(self):
        """A = L L^T, L^T B L = U Omega^2 U^T: q = L^-T U Q, p = L U P, Q = (Q^2 + Omega^2 P^2)/2."""
        if self.states is None:
            low = np.linalg.cholesky(self.a.toarray())
            square, vectors = np.linalg.eigh(low.T @ (self.b @ low))
            frequency = np.sqrt(np.maximum(square, 0))
            frequency[0] = 0  # a constant phase
            self.states = (dense.solve_triangular(low.T, vectors), low @ vectors, frequency)
        return self.states

    def widths(self, temperature):
        """Standard deviations of Q and P; the constant phase is left out."""
        frequency = self.normal_modes()[2]
        f = frequency[1:]
        coth = 1 / np.tanh(f / (2 * temperature)) if temperature > 0 else np.ones_like(f)
        return (np.sqrt(np.r_[temperature, f * coth / 2]), np.sqrt(np.r_[0, coth / (2 * f)]))

    def draw(self, temperature, members, seed):
        random = np.random.default_rng(seed)
        q, p, _ = self.normal_modes()
        wide_q, wide_p = self.widths(temperature)
        return np.vstack([q @ (wide_q[:, None] * random.standard_normal((len(wide_q), members))),
                          p @ (wide_p[:, None] * random.standard_normal((len(wide_p), members)))])

    def left(self, omega):
        """(eigenvector, left eigenvector with product 1) next to omega."""
        start = np.random.default_rng(5).standard_normal(2 * len(self.x)).astype(complex)
        _, right = splinalg.eigs(self.generator.astype(complex), 1, sigma=-1j * omega, v0=start)
        _, left = splinalg.eigs(
            self.generator.T.tocsc().astype(complex), 1, sigma=-1j * omega, v0=start)
        right, left = right[:, 0], left[:, 0]
        return right, left / (left @ right)

    def amplitude(self, omega, temperature):
        """rms contrast of a mode in the pocket at t = 0, averaged over its oscillation; squeezing."""
        q, p, _ = self.normal_modes()
        wide_q, wide_p = self.widths(temperature)
        right, left = self.left(omega)
        size = len(self.x)
        parts = np.r_[(left[:size] @ q) * wide_q, (left[size:] @ p) * wide_p]
        mean, square = np.sum(np.abs(parts) ** 2), np.sum(parts**2)
        fine = np.linspace(-self.pocket / 2, self.pocket / 2, 2001)
        eta = np.abs(interpolate.CubicSpline(self.x, right[:size] / self.root)(fine))
        share = 1 if omega.real == 0 else 2
        return np.sqrt(share * mean) * eta.max(), abs(square) / mean

    def stepper(self, dt):
        size = 2 * len(self.x)
        one = sparse.identity(size, format="csc")
        solve = splinalg.splu((one - dt / 2 * self.generator).tocsc())
        forward = (one + dt / 2 * self.generator).tocsr()
        return lambda z: solve.solve(forward @ z)


# ---- checks --------------------------------------------------------------------------------------


def growth(box, dt, start, steps):
    """omega of the mode that outgrows all others, from eta at one place in the pocket: its last
    values satisfy e(t + T) - 2 Re(g) e(t) + |g|^2 e(t - T) = 0, g = e^{-i omega T}; for a real mode
    e(t + T) = g e(t). The field begins as one bump at rest."""
    advance = box.stepper(dt)
    z = np.r_[box.root * np.exp(-(box.x - 0.3) ** 2), box.root * 0]
    at = np.argmin(np.abs(box.x - 0.4))
    record = []
    for i in range(start + steps):
        z = advance(z)
        if i >= start:
            record.append(z[at] / box.root[at])
    e = np.array(record)
    lag = steps // 8
    ratio = e[lag:] / e[:-lag]
    if np.ptp(ratio) < 1e-2 * abs(ratio.mean()):
        return 1j * np.log(ratio[-1]) / (lag * dt)
    rows = np.c_[e[lag:-lag], -e[: -2 * lag]]
    trace, product = np.linalg.lstsq(rows, e[2 * lag:], rcond=None)[0]
    g = np.roots([1, -trace, product])
    return max(1j * np.log(g.astype(complex)) / (lag * dt), key=lambda w: (round(w.imag, 9), w.real))


def main():
    members, accuracy = 200, 0.01
    dt = 0.2  # the midpoint rule errs by (omega dt)^2/12 of a frequency: 3e-5
    for number, (name, text, fields, flux, pocket, half, dx) in enumerate(FLOWS):
        box = Box(fields, flux, pocket, half, dx)
        vacuum = Seed(text, DENSITY, 0.0)
        first = vacuum.omega[0]
        seen = growth(box, dt, int(6 / first.imag / dt), int(3 / first.imag / dt))
        check(f"{name}: e-foldings of a simulated bump", abs(seen.imag / first.imag - 1) < accuracy,
              f"omega {seen}, library {first}")
        check(f"{name}: its frequency", abs(seen.real - first.real) < accuracy * abs(first),
              f"omega {seen}, library {first}")
        # Five e-foldings: what does not grow is then a thousandth of the mean square, and 0.3 % of the
        # growth rate is 1.5 % of the contrast.
        time = 5 / first.imag
        points = box.x[np.abs(box.x) < 1.0][::5]
        for temperature in (0.0, 0.4):  # at 0.4 thermal and quantum fluctuations both count
            seed = Seed(text, DENSITY, temperature)
            for j, omega in enumerate(seed.omega):
                if omega.imag < 0.02:  # its partner is longer than the box
                    continue
                want, squeezing = box.amplitude(omega, temperature)
                want /= np.sqrt(DENSITY)
                print(f"# amplitude {seed.amplitude[j]:.6f}, normal modes {want:.6f}")
                check(f"{name}, T = {temperature}: amplitude of mode {j}",
                      abs(seed.amplitude[j] / want - 1) < accuracy,
                      f"library {seed.amplitude[j]}, normal modes {want}")
                check(f"{name}, T = {temperature}: squeezing of mode {j}",
                      abs(seed.squeezing[j] - squeezing) < accuracy,
                      f"library {seed.squeezing[j]}, normal modes {squeezing}")
            # The sample variance of `members` Gaussian numbers has a relative error of
            # sqrt(2/members), the rms half of that: 5 %; three of these.
            z = box.draw(temperature, members, 20260 + number)
            advance = box.stepper(dt)
            for _ in range(int(round(time / dt))):
                z = advance(z)
            rows = np.searchsorted(box.x, points)
            eta = z[rows] / box.root[rows, None] / np.sqrt(DENSITY)
            got = np.sqrt(np.mean(eta**2, axis=1))
            want = seed.contrast(time, points)
            loud = want > 0.5 * want.max()
            worst = np.max(np.abs(got / want - 1)[loud])
            check(f"{name}, T = {temperature}: {members} simulated fields",
                  worst < 3 / np.sqrt(2 * members),
                  f"rms {got}", f"library {want}")
            print(f"# simulated/library {np.mean((got / want)[loud]):.4f}")
            seed.close()
        vacuum.close()


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
