#!/usr/bin/python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
"""The script that one would write without twinhorizon: a big box, finite differences, scipy.

    naive.py dense  UNKNOWNS PADDING            every eigenvalue by scipy.linalg.eigvals
    naive.py sparse SPACING PADDING GUESS ...   the growing mode nearest to each complex GUESS
                                                by shift-invert, scipy.sparse.linalg.eigs

Prints one line of JSON: the growing modes with Re omega >= 0 (dense: the fastest first; sparse: one
a guess, null for none), the seconds from assembling the matrix to the last eigenvalue (neither the
interpreter nor its imports), and the BLAS in use.

The flow is uniform but for its sound speed c(x): tanh edges around a pocket. With
psi = (1 + u e^{-i omega t} + conj(w) e^{i omega* t}) times the flow, hbar = m = n = 1,

    omega u = -u''/2 - i v u' + c^2 (u + w),    omega w = w''/2 - i v w' - c^2 (u + w),

or, for eta = u + w and 2 phi = -i (u - w), in real numbers, lambda = -i omega:

    lambda eta = -v eta' - (2 phi)''/2,    lambda 2 phi = -2 c^2 eta + eta''/2 - v (2 phi)'.

Second-order central differences, zero at both ends of the box. Where a choice of form changes the
cost, the cheaper one was taken: real numbers for the dense solver (3 times faster than complex),
u and w of a point side by side for the sparse one (1.5 times faster than all u before all w), one
factorisation a guess, and a single eigenvalue asked for unless that one does not grow.
"""
import json
import re
import sys
import time

import numpy
import scipy.linalg
import scipy.sparse
import scipy.sparse.linalg

# A closed box has growth or nothing: what is below is rounding (1e-13 to 1e-9 here).
GROWS = 1e-6
# How many eigenvalues around the guess: more only while none of them grows.
NEIGHBOURS = (1, 4, 8, 16)
# Restarts of the Arnoldi iteration; the modes found here need fewer than 20.
RESTARTS = 500

SPEED, GAP, WIDTH = 1.0, 10.0, 0.5
UPSTREAM, POCKET, DOWNSTREAM = 1.35, 0.55, 1.45


def sound(x):
    """c(x); each edge is shifted so that c = v at -GAP/2 and at +GAP/2."""
    shift = [
        WIDTH * numpy.arctanh((c + POCKET - 2 * SPEED) / (c - POCKET))
        for c in (UPSTREAM, DOWNSTREAM)
    ]
    left = 1 - numpy.tanh((x + GAP / 2 + shift[0]) / WIDTH)
    right = 1 + numpy.tanh((x - GAP / 2 - shift[1]) / WIDTH)
    return POCKET + (UPSTREAM - POCKET) * left / 2 + (DOWNSTREAM - POCKET) * right / 2


def differences(points, padding):
    """Grid, first and second derivative."""
    step = (GAP + 2 * padding) / (points + 1)
    x = -GAP / 2 - padding + step * numpy.arange(1, points + 1)
    shape = (points, points)
    first = scipy.sparse.diags([-1, 1], [-1, 1], shape=shape) / (2 * step)
    second = scipy.sparse.diags([1, -2, 1], [-1, 0, 1], shape=shape) / step**2
    return x, first, second


def dense(unknowns, padding):
    x, first, second = differences(unknowns // 2, padding)
    drift = -SPEED * first
    restore = second / 2 - 2 * scipy.sparse.diags(sound(x) ** 2)
    matrix = scipy.sparse.bmat([[drift, -second / 2], [restore, drift]]).toarray()
    omega = 1j * scipy.linalg.eigvals(matrix, overwrite_a=True, check_finite=False)
    grows = omega[(omega.imag > GROWS) & (omega.real > -GROWS)]
    return sorted(grows, key=lambda z: -z.imag), unknowns


def sparse(spacing, padding, guesses):
    points = round((GAP + 2 * padding) / spacing) - 1
    x, first, second = differences(points, padding)
    drift = -1j * SPEED * first
    c2 = scipy.sparse.diags(sound(x) ** 2)
    matrix = scipy.sparse.bmat([[drift - second / 2 + c2, c2], [-c2, drift + second / 2 - c2]])
    together = numpy.arange(2 * points).reshape(2, points).T.ravel()
    matrix = matrix.tocsr()[together][:, together].tocsc()
    one = scipy.sparse.identity(2 * points, format="csc")
    found = [growing(matrix, guess, one) for guess in guesses]
    return found, 2 * points


def growing(matrix, guess, one):
    """The growing mode nearest to the guess, or None when no near eigenvalue grows."""
    factors = scipy.sparse.linalg.splu(matrix - guess * one)
    inverse = scipy.sparse.linalg.LinearOperator(matrix.shape, factors.solve, dtype=complex)
    for count in NEIGHBOURS:
        try:
            near = scipy.sparse.linalg.eigs(
                matrix, count, sigma=guess, OPinv=inverse, return_eigenvectors=False,
                maxiter=RESTARTS,
            )
        except scipy.sparse.linalg.ArpackNoConvergence as failure:
            near = failure.eigenvalues
        near = [z for z in near if z.imag > GROWS]
        if near:
            return min(near, key=lambda z: abs(z - guess))
    return None


def blas():
    """The BLAS and LAPACK libraries that scipy has loaded, by file name; Linux only."""
    try:
        with open("/proc/self/maps", encoding="ascii", errors="replace") as maps:
            files = {line.split("/")[-1].strip() for line in maps if "/" in line}
    except OSError:
        return []
    return sorted(name for name in files if re.match(r"lib.*(blas|atlas|mkl)", name))


start, processor = time.perf_counter(), time.process_time()
if sys.argv[1] == "dense":
    modes, size = dense(int(sys.argv[2]), float(sys.argv[3]))
else:
    modes, size = sparse(float(sys.argv[2]), float(sys.argv[3]), [complex(g) for g in sys.argv[4:]])
print(json.dumps({
    "seconds": time.perf_counter() - start,
    "processor": time.process_time() - processor,
    "unknowns": size,
    "modes": [z and [z.real, z.imag] for z in modes],
    "blas": blas(),
}))
