#!/usr/bin/python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
#
# Compares the physical constants of include/twinhorizon/units.h and src/units/quantity.c with
# scipy.constants (CODATA 2018 in scipy 1.10), and the atomic masses of src/units/scale.c with those
# of Debian's python3-qcelemental (the 2012 mass evaluation). Prints TAP.
import os
import re
import sys

root = os.path.join(os.path.dirname(os.path.abspath(__file__)), "..")

# The 2012 and 2020 evaluations differ by up to 1e-8 for the atoms here, half of whose masses were
# measured again in between; by 2.9e-8 for Cr-52.
MASS_TOLERANCE = 1.1e-8
MASS_TOLERANCE_CR52 = 4e-8

tests = []


def check(name, mine, reference, tolerance):
    off = abs(float(mine) / reference - 1)
    tests.append((off <= tolerance, f"{name} = {mine}, reference {reference!r}, off {off:.1e}"))


def skip(name, why):
    tests.append((True, f"{name} # SKIP {why}"))


def read(*path):
    with open(os.path.join(root, *path), encoding="utf-8") as file:
        return file.read()


defined = dict(re.findall(r"#define (\w+)\s+([0-9.]+(?:e-?\d+)?)\s", read("include", "twinhorizon", "units.h")
                          + read("src", "units", "quantity.c")))
try:
    from scipy import constants
except ImportError:
    skip("constants", "python3-scipy is not installed")
else:
    # the last digit written or a rounding of double precision
    check("hbar", defined["TH_PLANCK_HBAR"], constants.hbar, 4e-16)
    check("h", defined["PLANCK"], constants.h, 1e-16)
    check("k_B", defined["TH_BOLTZMANN"], constants.k, 1e-16)
    if constants.physical_constants["atomic mass constant"][0] == 1.66053906660e-27:
        check("u", defined["TH_ATOMIC_MASS_UNIT"], constants.atomic_mass, 1e-16)
        check("a0", defined["TH_BOHR_RADIUS"],
              constants.physical_constants["Bohr radius"][0], 1e-16)
    else:
        skip("u and a0", "this scipy has another CODATA edition than 2018")
    check("2 pi", defined["FULL_ROT"], 2 * constants.pi, 1e-16)

rows = re.findall(r'\{"([A-Z][a-z]?)-(\d+)", ([0-9.]+)\}', read("src", "units", "scale.c"))
tests.append((len(rows) >= 20, f"{len(rows)} species found in the table"))
try:
    from qcelemental import periodictable
except ImportError:
    skip("masses", "python3-qcelemental is not installed")
else:
    for element, number, mass in rows:
        name = f"{element}-{number}"
        check(name, mass, float(periodictable.to_mass(element + number)),
              MASS_TOLERANCE_CR52 if name == "Cr-52" else MASS_TOLERANCE)

print(f"1..{len(tests)}")
for i, (good, text) in enumerate(tests, 1):
    print(f"{'ok' if good else 'not ok'} {i} - {text}")
sys.exit(0 if all(good for good, _ in tests) else 1)
