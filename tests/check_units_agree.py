#!/usr/bin/python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
"""One physical case in SI and in reduced units: check_units_agree.py PROGRAM. Prints TAP.

The conversion is done here with scipy.constants (CODATA 2018 in scipy 1.10): mass m, one speed s of
the flow as the unit, length hbar/(m s), time hbar/(m s^2), energy m s^2. All numbers must agree to
12 digits.
"""
import csv
import io
import math
import os
import re
import subprocess
import sys
import tempfile

program = os.path.abspath(sys.argv[1])
results = failures = 0
DIGITS = 1e-12


def check(name, good, *why):
    global results, failures
    results += 1
    failures += not good
    print(f"{'ok' if good else 'not ok'} {results} - {name}")
    if not good:
        for line in why:
            print(f"# {line}")


try:
    from scipy import constants
except ImportError:
    print("1..0 # SKIP python3-scipy is not installed")
    sys.exit(0)

MASS = 38.9637 * constants.atomic_mass
SPEED = 1.35e-3
LENGTH = constants.hbar / (MASS * SPEED)
TIME = constants.hbar / (MASS * SPEED**2)
ENERGY = MASS * SPEED**2

# in m/s and m
PHYSICAL = {"speed": 0.9e-3, "sound_upstream": 1.35e-3, "sound_pocket": 0.45e-3,
            "sound_downstream": 1.3e-3, "width_black": 0.8e-6, "width_white": 0.6e-6, "gap": 9e-6}
SI = """[units]
system = SI
[atom]
mass = 38.9637 u
[flow]
shape = tanh
density = 60 /um
speed = 0.9 mm/s
sound_upstream = 1.35 mm/s
sound_pocket = 0.45 mm/s
sound_downstream = 1.3 mm/s
width_black = 0.8 um
width_white = 0.6 um
gap = 9 um
[sweep]
gap = 5 um, 7 um
"""
OTHER_WORDS = (SI.replace("0.9 mm/s", "900 um/s").replace("gap = 9 um", "gap = 9000 nm")
               .replace("0.8 um", "800 nm").replace("60 /um", "6e7 /m")
               .replace("5 um, 7 um", "5000 nm, 7000 nm"))
REDUCED = ("[units]\nsystem = reduced\n[flow]\nshape = tanh\n"
           + f"density = {6e7 * LENGTH!r}\n"
           + "".join(f"{key} = {value / (LENGTH if 'width' in key or key == 'gap' else SPEED)!r}\n"
                     for key, value in PHYSICAL.items())
           + f"[sweep]\ngap = {5e-6 / LENGTH!r}, {7e-6 / LENGTH!r}\n")


def run(*arguments):
    done = subprocess.run([program, *arguments], capture_output=True, text=True, check=False)
    assert done.returncode == 0, (arguments, done.stderr, done.stdout)
    return done.stdout


def table(text):
    return list(csv.DictReader(io.StringIO(text, newline="")))


def agree(name, mine, reference, factors, together=False):
    """Columns of `mine` are those of `reference` times a factor, to 12 digits: of each number, or
    with `together` of the largest in these columns, for parts of one complex number and for what
    passes through zero."""
    def wanted(row, column):
        return float(row[column] or "nan") * factors[column]

    largest = max(abs(wanted(row, column)) for row in reference for column in factors
                  if row[column])
    worst = (0, "")
    for a, b in zip(mine, reference):
        for column in factors:
            if a[column] == b[column] == "":
                continue
            size = largest if together else abs(wanted(b, column))
            off = abs(float(a[column] or "nan") - wanted(b, column)) / size
            if not off <= worst[0]:
                worst = (off, f"{column} {a[column]} and {wanted(b, column)!r}")
    check(name, len(mine) == len(reference) > 0 and worst[0] <= DIGITS, worst,
          f"{len(mine)} and {len(reference)} rows")
    print(f"# {name}: largest relative difference {worst[0]:.1e}")


with tempfile.TemporaryDirectory() as folder:
    files = {}
    for name, text in (("si", SI), ("words", OTHER_WORDS), ("reduced", REDUCED)):
        files[name] = os.path.join(folder, name + ".ini")
        with open(files[name], "w", encoding="utf-8") as file:
            file.write(text)

    modes = {name: table(run("solve", path, "--csv", "-")) for name, path in files.items()}
    omega = {"omega_re": 1 / TIME, "omega_im": 1 / TIME}
    agree("frequencies in SI and reduced", modes["si"], modes["reduced"], omega, True)
    agree("frequencies in other unit words", modes["words"], modes["si"],
          {"omega_re": 1, "omega_im": 1}, True)
    check("labels, norms, nodes and confirmations are the same",
          [[r[c] for c in ("mode", "label", "norm", "nodes", "confirmed")] for r in modes["si"]]
          == [[r[c] for c in ("mode", "label", "norm", "nodes", "confirmed")]
              for r in modes["reduced"]])
    check("something grows", any(r["label"] == "unstable" for r in modes["si"]))

    flows = {name: table(run("flow", path, "--csv", "-")) for name, path in files.items()}
    agree("flow: positions", flows["si"], flows["reduced"], {"x": LENGTH}, True)
    agree("flow: speeds", flows["si"], flows["reduced"], {"speed": SPEED, "sound": SPEED})
    agree("flow: density", flows["si"], flows["reduced"], {"density": 1 / LENGTH})
    agree("flow: potential", flows["si"], flows["reduced"], {"potential": ENERGY},
          True)

    for name, path in files.items():
        run("sweep", path, "--out", os.path.join(folder, name))
    points = {}
    for name in files:
        with open(os.path.join(folder, name, "points.csv"), encoding="utf-8", newline="") as file:
            points[name] = list(csv.DictReader(file))
    agree("sweep: lengths", points["si"], points["reduced"],
          {"gap": LENGTH, "horizon_distance": LENGTH})
    agree("sweep: rates", points["si"], points["reduced"],
          {"growth_max": 1 / TIME, "omega_re_fastest": 1 / TIME}, True)
    agree("sweep: other unit words", points["words"], points["si"],
          {"gap": 1, "horizon_distance": 1, "growth_max": 1})
    check("sweep: the same counts",
          [[r[c] for c in ("index", "unstable", "status")] for r in points["si"]]
          == [[r[c] for c in ("index", "unstable", "status")] for r in points["reduced"]])

    # Surface gravity of a tanh edge of c from c_o to c_p at c = v: |c'| = (2/w) (c_o - v)(v - c_p)
    # /(c_o - c_p), the other edge 9 um away adds less than 1e-9. T = hbar kappa/(2 pi k_B)
    # (common practice, no source). The text shows 6 digits.
    found = re.findall(r"surface gravity ([0-9.e+-]+) /s, Hawking temperature ([0-9.e+-]+) nK",
                       run("flow", files["si"]))
    check("flow names two horizons", len(found) == 2, found)
    for (kappa, temperature), outer, width in zip(found, (1.35e-3, 1.3e-3), (0.8e-6, 0.6e-6)):
        wanted = 2 / width * (outer - 0.9e-3) * (0.9e-3 - 0.45e-3) / (outer - 0.45e-3)
        check("surface gravity", abs(float(kappa) / wanted - 1) < 5e-6, kappa, wanted)
        wanted = constants.hbar * wanted / (2 * math.pi * constants.k) * 1e9
        check("Hawking temperature", abs(float(temperature) / wanted - 1) < 5e-6,
              temperature, wanted)

    # Flows whose density varies. Unit of speed: sound_upstream. The flow of a potential is solved for,
    # so its frequencies carry the rounding of that: 1e-10 of the largest.
    unit = constants.hbar / (MASS * 1.1e-3)  # length
    rate = 1.1e-3 / unit
    atom = "[units]\nsystem = SI\n[atom]\nmass = 38.9637 u\n[flow]\n"
    plain = "[units]\nsystem = reduced\n[flow]\n"
    dense = 5e7 * unit
    pairs = {
        "continuity": (
            atom + "shape = continuity\nspeed_upstream = 0.6 mm/s\nspeed_pocket = 1.5 mm/s\n"
            "speed_downstream = 0.5 mm/s\nsound_upstream = 1.1 mm/s\nwidth_black = 0.9 um\n"
            "width_white = 1.2 um\ngap = 9 um\ndensity = 50 /um\nstate = transverse\n"
            "scattering_length = 90 a0\n",
            plain + f"shape = continuity\nspeed_upstream = {0.6 / 1.1!r}\n"
            f"speed_pocket = {1.5 / 1.1!r}\nspeed_downstream = {0.5 / 1.1!r}\nsound_upstream = 1\n"
            f"width_black = {0.9e-6 / unit!r}\nwidth_white = {1.2e-6 / unit!r}\n"
            f"gap = {9e-6 / unit!r}\ndensity = {dense!r}\nstate = transverse\nscattering_length = "
            f"{90 * constants.physical_constants['Bohr radius'][0] / unit!r}\n"),
        "potential": (
            atom + "shape = potential\nprofile = well\nsound_upstream = 1.1 mm/s\n"
            "flux = 33000 /s\ndensity = 50 /um\ngap = 5 um\nwidth = 0.3 um\n"
            "depth = 0.8 mm^2/s^2\n",
            plain + f"shape = potential\nprofile = well\nflux = {33000 / rate!r}\n"
            f"density = {dense!r}\ngap = {5e-6 / unit!r}\nwidth = {0.3e-6 / unit!r}\n"
            f"depth = {0.8e-6 / 1.1e-3**2!r}\n"),
    }
    for name, texts in pairs.items():
        rows = []
        for text in texts:
            path = os.path.join(folder, "pair.ini")
            with open(path, "w", encoding="utf-8") as file:
                file.write(text)
            rows.append([complex(float(row["omega_re"]), float(row["omega_im"]))
                         for row in table(run("solve", path, "--csv", "-"))
                         if row["label"] == "unstable"])
        largest = max(map(abs, rows[0]), default=0)
        off = max((abs(a - b * rate) / largest for a, b in zip(*rows)), default=1)
        check(f"{name}: growing modes in SI and reduced", len(rows[0]) == len(rows[1]) > 0
              and off < 1e-10, off, len(rows[0]), len(rows[1]))
        print(f"# {name}: largest relative difference {off:.1e}")

print(f"1..{results}")
sys.exit(failures > 0)
