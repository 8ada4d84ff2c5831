#!/usr/bin/python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
"""Files of mode shapes read by outside readers: check_modes_file.py PROGRAM. Prints TAP.

h5py and Octave read what `solve --modes` wrote. From the numbers and units in the file alone, modes
must satisfy the equations of motion in SI units, and growing ones have norm zero. Without h5py all
is skipped, without Octave what it reads.

Source of constants: hbar exact by the definition of the SI (2019); atomic mass unit of CODATA 2018;
mass of K-39 from "The AME 2020 atomic mass evaluation", Chin. Phys. C 45, 030003 (2021), from
memory.
"""
import csv
import json
import os
import resource
import shutil
import signal
import stat
import subprocess
import sys
import tempfile

import numpy as np

try:
    import h5py
except ImportError:
    print("1..0 # SKIP python3-h5py is not installed")
    sys.exit(0)

program = os.path.abspath(sys.argv[1])
cases = os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "cases")
HBAR = 1.054571817646156391e-34
K39 = 38.9637064849 * 1.66053906660e-27  # kg

results = 0
failures = 0


def check(name, good, *details):
    global results, failures
    results += 1
    failures += not good
    print(f"{'ok' if good else 'not ok'} {results} - {name}")
    if not good:
        for detail in details:
            print(f"#   {detail}")


def skip(name, why):
    global results
    results += 1
    print(f"ok {results} - {name} # SKIP {why}")


def run(*arguments, **more):
    return subprocess.run(
        [program, *arguments], capture_output=True, text=True, timeout=120, **more
    )


def case(name):
    return os.path.join(cases, name + ".ini")


def read(path):
    """{name: array} with complex fields put together, and the attributes of the file."""
    with h5py.File(path) as f:
        data = {name: item[()] for name, item in f.items()}
        for name in ("eta", "phi", "u", "v", "omega"):
            data[name] = data[name + "_re"] + 1j * data[name + "_im"]
        return data, dict(f.attrs)


def solve(name, *arguments):
    """Path of the file of mode shapes of a case, with a table of modes beside it."""
    path = os.path.join(folder, name + ".h5")
    done = run("solve", case(name), "--modes", path, "--csv", path + ".csv", *arguments)
    assert done.returncode == 0, done.stderr
    return path


def table(path):
    with open(path, newline="") as f:
        rows = list(csv.DictReader(f))
    with open(path + "-metadata.json") as f:
        meta = json.load(f)
    units = {c["name"]: c.get("schema:unitText", "1") for c in meta["tableSchema"]["columns"]}
    return rows, units, meta


# ---- layout --------------------------------------------------------------------------------------
ALONG = {
    "x": ["x", "density", "speed", "sound"],
    "mode": ["mode", "label", "omega_re", "omega_im", "omega_error"],
    "mode, x": [f + p for f in ("eta", "phi", "u", "v") for p in ("_re", "_im")],
}


def check_layout(name, path, amplitude_unit):
    """Names, shapes, axes, units and attributes; units and numbers against the CSV tables."""
    rows, units, _ = table(path + ".csv")
    flow_csv = path + ".flow.csv"
    assert run("flow", case(name), "--csv", flow_csv).returncode == 0
    flow, flow_units, meta = table(flow_csv)
    units.update(flow_units)
    with h5py.File(path) as f:
        wrong = []
        for dimensions, names in ALONG.items():
            axes = dimensions.split(", ")
            shape = tuple({"mode": len(rows), "x": 2001}[axis] for axis in axes)
            for item in names:
                d = f[item]
                want = units.get(item, amplitude_unit if item[:2] in ("u_", "v_") else "1")
                good = d.shape == shape and d.attrs["unit"] == want and d.attrs["title"]
                good = good and d.attrs["dimensions"] == dimensions
                if item not in ("x", "mode"):
                    good = good and all(
                        s.label == axis and list(s.values()) == [f[axis]]
                        for s, axis in zip(d.dims, axes)
                    )
                if not good:
                    wrong.append(f"{item}: {d.shape} {dict(d.attrs)}, want unit {want}")
        names = sum(ALONG.values(), []) + ["legend", "case_text"]
        check(f"{name}: names", sorted(f) == sorted(names), sorted(f))
        check(f"{name}: shapes, axes, units", not wrong, *wrong)
        scales = [h5py.h5ds.is_scale(f[axis].id) for axis in ("x", "mode")]
        check(f"{name}: x and mode are scales", all(scales), scales)
        text = f.attrs["case"]
        check(
            f"{name}: the whole case, twice",
            text == meta["dc:source"] and f["case_text"][()].decode() == text and "[flow]" in text,
            text,
        )
        version = run("--version").stdout.split()[1]
        said = [f.attrs[key] for key in ("version", "title")]
        check(f"{name}: version, title", said[0] == version and "modes" in said[1], said)
        legend = [line.decode() for line in f["legend"]]
        missing = [
            item
            for dimensions, items in ALONG.items()
            for item in items
            if f"{item} [{dimensions}], unit {f[item].attrs['unit']}: {f[item].attrs['title']}"
            not in legend
        ]
        check(f"{name}: the legend says the same", not missing and len(legend) == 17, missing)
    data, _ = read(path)
    same = [
        (data["mode"], [int(r["mode"]) for r in rows]),
        (data["omega_re"], [float(r["omega_re"]) for r in rows]),
        (data["omega_im"], [float(r["omega_im"]) for r in rows]),
        (data["omega_error"], [float(r["omega_error"]) for r in rows]),
        (data["x"][[0, -1]], [float(flow[i]["x"]) for i in (0, -1)]),
        (data["sound"][[0, -1]], [float(flow[i]["sound"]) for i in (0, -1)]),
        (data["density"][[0, -1]], [float(flow[i]["density"]) for i in (0, -1)]),
    ]
    check(
        f"{name}: numbers as in the tables",
        all(np.allclose(a, b, rtol=1e-13, atol=0) for a, b in same)
        and [label.decode() for label in data["label"]] == [r["label"] for r in rows],
        *same,
    )
    step = np.diff(data["x"])
    check(f"{name}: x is even", np.allclose(step, step.mean(), rtol=1e-9))


# ---- physics -------------------------------------------------------------------------------------
def derivative(f, h):
    """First and second derivative, eighth order, of rows; the outer four points are lost."""
    first = [4 / 5, -1 / 5, 4 / 105, -1 / 280]
    second = [8 / 5, -1 / 5, 8 / 315, -1 / 560]
    n = f.shape[-1]
    at = lambda j: f[..., 4 + j : n - 4 + j]  # noqa: E731
    one = sum(c * (at(j) - at(-j)) for j, c in enumerate(first, 1)) / h
    two = sum(c * (at(j) + at(-j)) for j, c in enumerate(second, 1)) - 205 / 72 * at(0)
    return one, two / h**2


def check_amplitudes(name, data):
    root = np.sqrt(data["density"])
    size = abs(data["u"]).max()
    check(
        f"{name}: u, v = sqrt(density) (eta/2 +- i phi)",
        np.allclose(data["u"], root * (data["eta"] / 2 + 1j * data["phi"]), atol=1e-12 * size)
        and np.allclose(data["v"], root * (data["eta"] / 2 - 1j * data["phi"]), atol=1e-12 * size),
    )
    first = np.argmax(abs(data["eta"]) > 1 - 1e-6, axis=1)
    top = data["eta"][np.arange(len(first)), first]
    check(
        f"{name}: largest |eta| is 1, real and positive there",
        np.allclose(abs(data["eta"]).max(axis=1), 1) and np.allclose(top, 1, atol=2e-6),
        top,
    )


def check_motion(name, data, q, tolerance):
    """-i omega eta = -v eta' - (q/n)(n phi')', -i omega phi = -v phi' - (c^2/q) eta +
    (q/(4n))(n eta')' with q = hbar/m, at the points of the file; relative to the largest term."""
    inner = slice(4, -4)
    h = (data["x"][-1] - data["x"][0]) / 2000
    n, v, c = data["density"][inner], data["speed"][inner], data["sound"][inner]
    slope = derivative(data["density"], h)[0] / n
    eta, phi = data["eta"][:, inner], data["phi"][:, inner]
    eta1, eta2 = derivative(data["eta"], h)
    phi1, phi2 = derivative(data["phi"], h)
    omega = data["omega"][:, None]
    flux, force = q * (phi2 + slope * phi1), c**2 / q * eta
    a = -1j * omega * eta + v * eta1 + flux
    b = -1j * omega * phi + v * phi1 + force - q / 4 * (eta2 + slope * eta1)
    worst = max(abs(a).max() / abs(flux).max(), abs(b).max() / abs(force).max())
    check(f"{name}: equations of motion", worst < tolerance, worst)


def tail(omega, n, v, c, q, eta, phi, side):
    """Int 2 n Im(eta phi*) dx from the end of the window outwards: two waves (q k^2, -i (omega - v
    k)) e^{ikx}, and the integral of e^{i (k - k'*) x} is i/(k - k'*) with Im k side > 0."""
    roots = np.roots([q * q / 4, 0, c * c - v * v, 2 * omega * v, -omega * omega])
    k = roots[side * roots.imag > 0]
    assert len(k) == 2, k
    p = -1j * (omega - v * k)
    amplitude = np.linalg.solve([q * k**2, p], [eta, phi])
    total = sum(
        amplitude[i] * q * k[i] ** 2 * np.conj(amplitude[j] * p[j]) * 1j / (k[i] - np.conj(k[j]))
        for i in range(2)
        for j in range(2)
    )
    return 2 * n * (side * total).imag


def check_norm(name, data, q, tolerance):
    """Over the window by Simpson's rule, and over both tails; relative to Int |u|^2 + |v|^2. Of a
    mode that oscillates, the window alone does not have norm zero."""
    simpson = np.ones(2001)
    simpson[1:-1:2], simpson[2:-1:2] = 4, 2
    simpson *= (data["x"][-1] - data["x"][0]) / 2000 / 3
    u2, v2 = abs(data["u"]) ** 2, abs(data["v"]) ** 2
    for i, omega in enumerate(data["omega"]):
        parts = [np.dot(simpson, u2[i] - v2[i])]
        for side, at in ((-1, 0), (1, -1)):
            flow = [data[key][at] for key in ("density", "speed", "sound")]
            parts.append(tail(omega, *flow, q, data["eta"][i, at], data["phi"][i, at], side))
        size = np.dot(simpson, u2[i] + v2[i])
        check(
            f"{name}: norm of growing mode {i + 1} vanishes",
            omega.imag > 0
            and abs(sum(parts)) < tolerance * size
            and (omega.real == 0 or abs(parts[0]) > 1e3 * tolerance * size),
            parts,
            size,
        )


def tanh_sound(x, up, pocket, down, speed, width_b, width_w, gap):
    """The formula of the shape `tanh`, as its documentation gives it."""
    b = -gap / 2 - width_b * np.arctanh((up + pocket - 2 * speed) / (up - pocket))
    w = gap / 2 + width_w * np.arctanh((down + pocket - 2 * speed) / (down - pocket))
    return (
        pocket
        + (up - pocket) * (1 - np.tanh((x - b) / width_b)) / 2
        + (down - pocket) * (1 + np.tanh((x - w) / width_w)) / 2
    )


# ---- Octave --------------------------------------------------------------------------------------
OCTAVE = """
s = load("{path}");
printf("%d %d\\n", size(s.x), size(s.eta_re), size(s.omega_im));
printf("%.17g\\n", s.x(end), s.omega_im(2), s.eta_re(700, 1), s.phi_im(1300, 2), s.v_re(900, 2));
printf("%s\\n", strtrim(s.label(2, :)), class(s.mode), strtrim(s.legend(1, :)));
printf("%s", s.case_text);
e = load("{empty}");
printf("---\\n");
printf("%d %d\\n", size(e.eta_re), size(e.omega_re));
"""


def check_octave(path, empty):
    octave = shutil.which("octave-cli") or shutil.which("octave")
    names = ["sizes", "numbers", "words", "the case", "a file without modes"]
    if octave is None:
        for name in names:
            skip(f"Octave: {name}", "octave is not installed")
        return
    script = OCTAVE.format(path=path, empty=empty)
    done = subprocess.run(
        [octave, "--norc", "--quiet", "--no-gui", "--eval", script],
        capture_output=True, text=True, timeout=120,
    )
    lines = done.stdout.split("\n")
    data, attributes = read(path)
    modes = len(data["mode"])
    # Octave stores by columns, so that its axes come in reverse order
    want = [f"1 2001", f"2001 {modes}", f"1 {modes}"]
    check("Octave: sizes", lines[:3] == want, lines[:3], done.stderr)
    numbers = [
        data["x"][-1], data["omega_im"][1], data["eta_re"][0, 699], data["phi_im"][1, 1299],
        data["v_re"][1, 899],
    ]
    check("Octave: numbers", [f"{v:.17g}" for v in numbers] == lines[3:8], numbers, lines[3:8])
    check(
        "Octave: words",
        lines[8:11] == ["unstable", "int32", "x [x], unit m: position along the flow"],
        lines[8:11],
    )
    text = "\n".join(lines[11:]).partition("---\n")
    check("Octave: the case", text[0] == attributes["case"], text[0])
    check("Octave: a file without modes", text[2] == "2001 0\n1 0\n", text[2])


# ---- refused files -------------------------------------------------------------------------------
def check_refused():
    old = os.path.join(folder, "old.h5")
    with open(old, "w") as f:
        f.write("older")

    def little_room():
        signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
        resource.setrlimit(resource.RLIMIT_FSIZE, (10000, 10000))

    missing = os.path.join(folder, "missing", "a.h5")
    before = "solve: --modes "  # said before any work
    for what, path, start, end, more in [
        ("missing folder", missing, before, "(No such file or directory)", {}),
        ("full device", "/dev/full", "", "(No space left on device)", {}),
        ("a folder", folder, before, "a folder, give a file", {}),
        ("a file too large", old, "", "(File too large)", {"preexec_fn": little_room}),
    ]:
        done = run("solve", case("stable"), "--modes", path, env={"LC_ALL": "C"}, **more)
        check(
            f"{what}: exit 2, one sentence, nothing on standard output",
            done.returncode == 2
            and done.stderr.startswith("twinhorizon: " + start + path)
            and done.stderr.endswith(end + "\n")
            and done.stderr.count("\n") == 1
            and done.stdout == "",
            done,
        )
    check("the device is still one", stat.S_ISCHR(os.stat("/dev/full").st_mode))
    with open(old, "rb") as f:
        check("the older file is still there", f.read() == b"older")
    done = run("solve", case("stable"), "--set", "flow.gap=-1", "--modes", old)
    check("a broken case touches nothing", done.returncode == 2 and os.path.getsize(old) == 5)
    left = [name for name in os.listdir(folder) if name.endswith(".part")]
    check("no part of a file is left", not left, left)


def check_long_case():
    """A case text beyond the 64 KiB of an ordinary attribute, with a byte that is no ASCII."""
    path = os.path.join(folder, "\u00b5.ini")
    values = [f"{0.5 + i * 1e-4:.4f}" for i in range(12000)]
    with open(case("stable")) as f:
        text = f.read().partition("[sweep]")[0]
    lines = [", ".join(values[i : i + 20]) for i in range(0, len(values), 20)]
    with open(path, "w") as f:
        f.write(text + "[sweep]\ngap = " + ",\n  ".join(lines) + "\n")
    done = run("solve", path, "--modes", path + ".h5")
    data, attributes = read(path + ".h5") if done.returncode == 0 else ({}, {"case": ""})
    check(
        "a long case",
        len(attributes["case"]) > 70000 and data["case_text"].decode() == attributes["case"],
        done.stderr,
    )


with tempfile.TemporaryDirectory() as folder:
    guide, well, ring, stable = (solve(n) for n in ("guide", "well", "ring", "stable"))
    check_layout("guide", guide, "m^(-1/2)")
    check_layout("well", well, "1")
    check_layout("ring", ring, "1")
    check_layout("stable", stable, "1")

    data, _ = read(guide)
    check_amplitudes("guide", data)
    # what is left is rounding of the fields, 1e-13, over the square of the grid's k h
    check_motion("guide", data, HBAR / K39, 1e-8)
    check_norm("guide", data, HBAR / K39, 1e-8)
    c = tanh_sound(data["x"] * 1e6, 1.35, 0.45, 1.3, 0.9, 0.8, 0.6, 11) * 1e-3
    check(
        "guide: sound, speed, density in SI units",
        np.allclose(data["sound"], c, rtol=1e-12)
        and np.allclose(data["speed"], 0.9e-3, rtol=1e-12)
        and np.allclose(data["density"], 60e6, rtol=1e-12),
    )
    data, _ = read(well)
    check_amplitudes("well", data)
    check_norm("well", data, 1, 1e-5)  # Simpson's rule over kinks of the density
    data, _ = read(ring)
    check_amplitudes("ring", data)
    check_motion("ring", data, 1, 1e-8)
    check("ring: the seam closes", np.allclose(data["phi"][:, 0], data["phi"][:, -1], atol=1e-10))

    again = os.path.join(folder, "again.h5")
    run("solve", case("guide"), "--modes", again)
    with open(guide, "rb") as f, open(again, "rb") as g:
        check("the same case gives the same bytes", f.read() == g.read())
    check_octave(guide, stable)
    check_long_case()
    check_refused()

print(f"1..{results}")
sys.exit(failures > 0)
