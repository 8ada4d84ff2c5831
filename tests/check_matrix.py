#!/usr/bin/python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
"""The matrix against outside eigensolvers: check_matrix.py PROGRAM. Prints TAP.

`solve --matrix` writes the Bogoliubov matrix A; every mode that `solve --csv` lists must be an
eigenvalue lambda of A with omega = i lambda, by scipy.linalg.eigvals and, for one case, by octave's
eig.
"""
import csv
import io
import os
import shutil
import subprocess
import sys
import tempfile

program = os.path.abspath(sys.argv[1])
results = failures = 0

# The listed frequency is polished by other means, so the error bar does not cover what a dense
# eigensolver adds: some eps |A| condition, 2e-16 x 500 x 30. Measured: 3e-12 (ring), else 2e-13.
ROUNDING = 1e-11

STEP = {"shape": "step", "speed": 0.75, "sound_upstream": 1, "sound_pocket": 0.3,
        "sound_downstream": 1.1, "gap": 8}
TANH = {"shape": "tanh", "speed": 1, "sound_upstream": 1.5, "sound_pocket": 0.5,
        "sound_downstream": 1.4, "width_black": 0.5, "width_white": 0.6, "gap": 8}
RING = {"shape": "tanh", "sound_upstream": 1.4, "sound_pocket": 0.6, "sound_downstream": 1.4,
        "width_black": 0.5, "width_white": 0.5, "gap": 10}
WELL = {"shape": "well", "mach": 0.6, "gap": 1.5}
FAST = {"shape": "continuity", "speed_upstream": 0.6, "speed_pocket": 1.4, "speed_downstream": 0.5,
        "sound_upstream": 1, "width_black": 0.5, "width_white": 0.7, "gap": 6}
SHEETS = {"shape": "potential", "profile": "barriers", "mach": 0.5, "gap": 6, "width": 0.6,
          "state": "transverse", "scattering_length": 0.4}
CASES = {
    "step": (STEP, {"kind": "open"}),
    "tanh": (TANH, {"kind": "open"}),
    "well": (WELL, {"kind": "open"}),
    "continuity": (FAST, {"kind": "open"}),
    "continuity ring": ({**FAST, "speed_upstream": None, "speed_downstream": None},
                        {"kind": "ring", "circumference": 40, "winding": 5}),
    "potential": (SHEETS, {"kind": "open"}),
    "ring": (RING, {"kind": "ring", "circumference": 50, "winding": 8}),
    "walls": (STEP, {"kind": "walls", "padding": 12}),
}


def check(name, good, *why):
    global results, failures
    results += 1
    failures += not good
    print(f"{'ok' if good else 'not ok'} {results} - {name}")
    if not good:
        for line in why:
            print(f"# {line}")


def skip(name, why):
    global results
    results += 1
    print(f"ok {results} - {name} # SKIP {why}")


def write_case(path, flow, ends):
    with open(path, "w", encoding="utf-8") as file:
        file.write("[units]\nsystem = reduced\n[flow]\n")
        file.writelines(f"{key} = {value}\n" for key, value in flow.items() if value is not None)
        file.write("[ends]\n")
        file.writelines(f"{key} = {value}\n" for key, value in ends.items())
        file.write("[solve]\naccuracy = 1e-9\n")


def solve(case, matrix):
    """The rows of --csv as dicts."""
    run = subprocess.run([program, "solve", case, "--csv", "-", "--matrix", matrix],
                         capture_output=True, text=True, check=False)
    assert run.returncode == 0, run.stderr + run.stdout
    return list(csv.DictReader(io.StringIO(run.stdout, newline="")))


def compare(name, rows, omegas):
    """Each row has an eigenvalue nearby."""
    worst, where = 0, ""
    for row in rows:
        mode = complex(float(row["omega_re"]), float(row["omega_im"]))
        allowed = max(10 * float(row["omega_error"]), ROUNDING)
        off = min(abs(omega - mode) for omega in omegas) / allowed
        if off >= worst:
            worst, where = off, f"{mode}: off by {off * allowed:.2g}, allowed {allowed:.2g}"
    check(f"{name}: every mode is an eigenvalue", rows and worst <= 1, where or "no mode listed")
    print(f"# {name}: worst {where}")


try:
    import numpy
    import scipy.io
    import scipy.linalg
except ImportError:
    for name in CASES:
        skip(name, "python3-scipy is not installed")
else:
    with tempfile.TemporaryDirectory() as folder:
        for name, (flow, ends) in CASES.items():
            case = os.path.join(folder, name + ".ini")
            matrix = os.path.join(folder, name + ".mtx")
            write_case(case, flow, ends)
            rows = solve(case, matrix)
            a = scipy.io.mmread(matrix).toarray()
            n = len(a)
            check(f"{name}: square, two unknowns a node", a.shape == (n, n) and n % 2 == 0, a.shape)
            real = ends["kind"] != "open"
            check(f"{name}: {'real' if real else 'complex'}", numpy.isrealobj(a) == real)
            # A = J H, J = [0 1; -1 0] for each node: J^T A is symmetric to the last bit
            h = numpy.empty_like(a)
            h[0::2], h[1::2] = -a[1::2], a[0::2]
            check(f"{name}: Hamiltonian to the last bit", (h == h.T).all(),
                  f"{(h != h.T).sum()} entries differ")
            omegas = 1j * scipy.linalg.eigvals(a)
            compare(name, rows, omegas)
            growing = [row for row in rows if row["label"] == "unstable"]
            check(f"{name}: some mode grows", growing)
            if name == "ring":
                # the free phase and its partner: a defective pair, split by rounding; the list
                # must be free of it, and it is the only pair that near to zero
                zeros = sum(abs(omegas) < 1e-4)
                check("ring: two zero modes in the matrix, none in the list",
                      zeros == 2 and all(abs(complex(float(r["omega_re"]), float(r["omega_im"])))
                                         > 1e-3 for r in rows), zeros)
            if real:
                # nothing grows in the band that is not in the list
                top = max(float(r["omega_re"]) for r in rows)
                grows = [w for w in omegas if w.imag > 1e-6 and abs(w) > 1e-4 and
                         -1e-9 < w.real <= top]
                listed = sum(1 for _ in growing)
                check(f"{name}: nothing else grows", len(grows) == listed, grows)
            if name == "tanh":
                octave = shutil.which("octave-cli") or shutil.which("octave")
                if octave is None:
                    skip("octave: every mode is an eigenvalue", "octave is not installed")
                else:
                    # coordinates, one entry a line, below the comments and the size
                    script = (
                        f"f = fopen('{matrix}'); l = fgetl(f); while l(1) == '%', l = fgetl(f); end;"
                        "s = sscanf(l, '%d'); d = fscanf(f, '%f', [4, s(3)]);"
                        "a = sparse(d(1,:), d(2,:), d(3,:) + 1i * d(4,:), s(1), s(2));"
                        "w = 1i * eig(full(a)); printf('%.17g %.17g\\n', [real(w), imag(w)].');"
                    )
                    run = subprocess.run([octave, "--no-gui", "--no-init-file", "--quiet", "--eval",
                                          script], capture_output=True, text=True, check=False)
                    found = [complex(*map(float, line.split()))
                             for line in run.stdout.splitlines()]
                    if run.returncode != 0 or len(found) != n:
                        check("octave reads the matrix", False, run.stderr, run.stdout[:200])
                    else:
                        compare("octave", rows, found)

print(f"1..{results}")
sys.exit(failures > 0)
