#!/usr/bin/python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
"""The contract of the command line of solve and sweep: check_solve.py PROGRAM. Prints TAP.

Columns, metadata, exit codes, what stays when a run fails, and that the same case gives the same
bytes. Physics is tested elsewhere (tests/test_modes.c).
"""
import csv
import io
import json
import math
import os
import stat
import subprocess
import sys
import tempfile

program = os.path.abspath(sys.argv[1])
results = failures = 0

MODE_COLUMNS = ("mode,label,omega_re,omega_im,omega_error,norm,pocket_share,nodes,condition,"
                "residual,confirmed").split(",")
POINT_COLUMNS = "horizon_distance,index,census,unstable,growth_max,omega_re_fastest,status".split(",")
SWEEP_MODE_COLUMNS = "mode,branch,label,omega_re,omega_im,omega_error,confirmed".split(",")
RATES = {"omega_re", "omega_im", "omega_error", "growth_max", "omega_re_fastest"}

STEP = """[units]
system = reduced
[flow]
shape = step
speed = 0.75
sound_upstream = 1
sound_pocket = 0.3
sound_downstream = 1
gap = 5
"""
TANH = """[units]
system = reduced
[flow]
shape = tanh
speed = 1
sound_upstream = 1.5
sound_pocket = 0.5
sound_downstream = 1.4
width_black = 0.5
width_white = 0.6
gap = 6
"""
SI = """[units]
system = SI
[atom]
species = K-39
[flow]
shape = step
speed = 0.75 mm/s
sound_upstream = 1 mm/s
sound_pocket = 0.3 mm/s
sound_downstream = 1.1 mm/s
gap = 8 um
"""


def check(name, good, *why):
    global results, failures
    results += 1
    failures += not good
    print(f"{'ok' if good else 'not ok'} {results} - {name}")
    if not good:
        for line in why:
            print(f"# {line}")


def run(*arguments, env=None, stdout=subprocess.PIPE):
    return subprocess.run([program, *arguments], stdout=stdout, stderr=subprocess.PIPE, text=True,
                          check=False, env={**os.environ, **(env or {})})


def exits(name, code, *arguments, lines=1, says=(), env=None):
    """The run ends with this code, and failures with so many lines on standard error."""
    done = run(*arguments, env=env)
    errors = done.stderr.splitlines()
    good = done.returncode == code and len(errors) == lines
    good = good and all(word in done.stderr for word in says)
    if code == 2:
        good = good and done.stdout == "" and errors[0].startswith("twinhorizon: ")
    check(name, good, f"exit {done.returncode}, want {code}", done.stderr, done.stdout[:300])
    return done


def rows_of(path):
    with open(path, encoding="utf-8", newline="") as file:
        return list(csv.reader(file))


def dicts_of(path):
    rows = rows_of(path)
    return [dict(zip(rows[0], row)) for row in rows[1:]]


def metadata_of(path, columns, case_words, unit):
    """The metadata beside a table: JSON, its columns with units, the whole case."""
    with open(path + "-metadata.json", encoding="utf-8") as file:
        data = json.load(file)
    described = data["tableSchema"]["columns"]
    name = os.path.basename(path)
    check(f"{name}: metadata describe the columns", [c["name"] for c in described] == columns,
          [c["name"] for c in described])
    units = {c["name"]: c.get("schema:unitText") for c in described}
    check(f"{name}: rates carry their unit",
          all(units[c] == unit for c in columns if c in RATES), units)
    check(f"{name}: the whole case is there",
          all(word in data["dc:source"] for word in case_words), data["dc:source"])
    check(f"{name}: the version is there", data["dc:creator"]["schema:softwareVersion"])
    return units


def write(folder, name, text):
    path = os.path.join(folder, name)
    with open(path, "w", encoding="utf-8") as file:
        file.write(text)
    return path


def read(path):
    with open(path, "rb") as file:
        return file.read()


def check_solve(folder):
    step = write(folder, "step.ini", STEP)
    si = write(folder, "si.ini", SI)
    out = os.path.join(folder, "modes.csv")

    done = exits("solve ends with 0", 0, "solve", step, lines=0)
    check("the view says the verdict first", "unstable" in done.stdout.splitlines()[0].lower(),
          done.stdout)
    done = exits("solve --csv - ends with 0", 0, "solve", step, "--csv", "-", lines=0)
    printed = done.stdout
    rows = list(csv.reader(io.StringIO(printed, newline="")))
    check("--csv - prints the table and nothing else",
          rows[0] == MODE_COLUMNS and all(len(r) == len(MODE_COLUMNS) for r in rows), rows[0])
    done = exits("solve --csv FILE ends with 0", 0, "solve", step, "--csv", out, lines=0)
    check("the view is printed beside the file", done.stdout != "")
    check("file and standard output hold the same table", rows_of(out) == rows)
    check("nothing half-written stays", sorted(os.listdir(folder)) ==
          ["modes.csv", "modes.csv-metadata.json", "si.ini", "step.ini"], os.listdir(folder))
    data = dicts_of(out)
    check("rows are numbered and sorted by growth",
          [r["mode"] for r in data] == [str(i + 1) for i in range(len(data))] and
          all(float(a["omega_im"]) >= float(b["omega_im"]) for a, b in zip(data, data[1:])))
    check("labels and norms are words of the contract",
          all(r["label"] in ("unstable", "trapped", "stable", "undecided") and
              r["norm"] in ("-1", "0", "1") for r in data))
    # closed count of the step: L_j = 1.11, 3.40, 5.68, ...; gap 5 has passed two, one pair
    unstable = [r for r in data if r["label"] == "unstable"]
    check("a pair is one row", len(unstable) == 1 and float(unstable[0]["omega_re"]) > 0, unstable)
    check("an unstable mode is confirmed",
          all("matrix" in r["confirmed"].split("+") and "index" in r["confirmed"].split("+")
              for r in unstable))
    metadata_of(out, MODE_COLUMNS, ("shape = step", "gap = 5"), None)

    exits("an SI case ends with 0", 0, "solve", si, "--csv", out, "--set", "flow.gap=9 um", lines=0)
    metadata_of(out, MODE_COLUMNS, ("system = SI", "gap = 9 um"), "1/s")

    exits("--help ends with 0", 0, "solve", "--help", lines=0)
    exits("no case", 2, "solve", says=["case file"])
    exits("no such case", 2, "solve", os.path.join(folder, "none.ini"), says=["none.ini"])
    exits("two cases", 2, "solve", step, si)
    exits("no such option", 2, "solve", step, "--cvs", "-", says=["--cvs"])
    exits("option without value", 2, "solve", step, "--csv", says=["--csv"])
    exits("option given twice", 2, "solve", step, "--csv", "-", "--csv", "-", says=["twice"])
    exits("no such command", 2, "slove", step, says=["slove"])
    exits("broken rule", 2, "solve", step, "--set", "flow.gap=-1", says=["gap", "-1"])
    exits("no such key", 2, "solve", step, "--set", "flow.gapp=1", says=["gapp"])
    check("no command ends with 2", run().returncode == 2)

    # at a switch-on length nothing can be decided: 1, and the text says so
    k_0, k = 2 * math.sqrt(0.75**2 - 0.3**2), 2 * math.sqrt(1 - 0.75**2)
    switch = 2 * math.atan(k / k_0) / k_0
    done = exits("undecided ends with 1", 1, "solve", step, "--set", f"flow.gap={switch!r}",
                 lines=0)
    check("the view says undecided", "undecided" in done.stdout.splitlines()[0].lower(),
          done.stdout)

    # what was there stays when a run fails
    before = read(out)
    exits("a failing run", 2, "solve", step, "--csv", out, "--set", "flow.gap=-1")
    check("an older table stays", read(out) == before)
    exits("an unwritable place", 2, "solve", step, "--csv", os.path.join(folder, "no", "x.csv"),
          says=["x.csv"])
    exits("a folder instead of a file", 2, "solve", step, "--csv", folder)
    exits("an unwritable matrix", 2, "solve", step, "--matrix", os.path.join(folder, "no", "x.mtx"),
          says=["x.mtx"])
    if os.path.exists("/dev/full"):
        with open("/dev/full", "w", encoding="utf-8") as full:
            done = run("solve", step, stdout=full)
        check("a full disk ends with 2 and one line",
              done.returncode == 2 and len(done.stderr.splitlines()) == 1, done.stderr)
    readonly = os.path.join(folder, "readonly")
    os.mkdir(readonly)
    os.chmod(readonly, stat.S_IRUSR | stat.S_IXUSR)
    if os.access(readonly, os.W_OK):  # root may write anywhere
        check("a read-only folder # SKIP this user may write everywhere", True)
    else:
        exits("a read-only folder", 2, "solve", step, "--csv", os.path.join(readonly, "x.csv"))

    # the same bytes, whatever the library's threads
    tables = [run("solve", step, "--csv", "-", env=env).stdout
              for env in ({}, {}, {"OPENBLAS_NUM_THREADS": "1"}, {"OPENBLAS_NUM_THREADS": "2"})]
    check("the same bytes each time and with 1 or 2 threads", set(tables) == {printed})
    locale = run("solve", step, "--csv", "-", env={"LC_ALL": "de_DE.UTF-8"}).stdout
    check("the same bytes in another locale", locale == printed)


def check_sweep(folder):
    grid = write(folder, "grid.ini", TANH + "[sweep]\nsound_pocket = 0.5, 0.6\ngap = 4 to 6 in 5\n")
    fails = write(folder, "fails.ini", TANH + "[sweep]\nsound_pocket = 0.5, 1.2, 0.6\n")
    si = write(folder, "si.ini", SI + "[sweep]\ngap = 6 um to 8 um in 3\n")
    place = lambda name: os.path.join(folder, name)
    file = lambda name, table: os.path.join(folder, name, table)

    done = exits("sweep ends with 0", 0, "sweep", grid, "--out", place("one"), lines=0)
    check("the last line counts", "10 points" in done.stdout, done.stdout)
    points, modes = (rows_of(file("one", t)) for t in ("points.csv", "modes.csv"))
    check("columns of points.csv", points[0] == ["sound_pocket", "gap"] + POINT_COLUMNS, points[0])
    check("columns of modes.csv", modes[0] == ["sound_pocket", "gap"] + SWEEP_MODE_COLUMNS, modes[0])
    wanted = [(s, g) for s in (0.5, 0.6) for g in (4, 4.5, 5, 5.5, 6)]
    found = [(float(r[0]), float(r[1])) for r in points[1:]]
    check("one row a configuration, first axis slowest",
          len(found) == 10 and all(math.isclose(a, b, rel_tol=1e-14) for f, w in zip(found, wanted)
                                   for a, b in zip(f, w)), found)
    data, listed = dicts_of(file("one", "points.csv")), dicts_of(file("one", "modes.csv"))
    check("every state is ok", all(r["status"] == "ok" for r in data))
    check("the counts agree", all(r["index"] == r["unstable"] and r["census"] in ("", r["unstable"])
                                  for r in data))
    for point in data:
        here = [m for m in listed if m["gap"] == point["gap"] and
                m["sound_pocket"] == point["sound_pocket"] and m["label"] == "unstable"]
        count = sum(2 if float(m["omega_re"]) > 0 else 1 for m in here)
        fastest = max(here, key=lambda m: float(m["omega_im"]))
        same = all(math.isclose(float(point[a]), float(fastest[b]), rel_tol=1e-14)
                   for a, b in (("growth_max", "omega_im"), ("omega_re_fastest", "omega_re")))
        if count != int(point["unstable"]) or not same:
            check("both tables tell the same", False, point, here)
            break
    else:
        check("both tables tell the same", True)
    for s in ("0.5", "0.6"):
        line = [m for m in listed if m["sound_pocket"] == s]
        first = [m for m in line if float(m["gap"]) == 4]
        check(f"sound_pocket {s}: branches start at 1",
              [m["branch"] for m in first] == [str(i + 1) for i in range(len(first))], first)
        check(f"sound_pocket {s}: no branch twice at a point",
              len({(m["gap"], m["branch"]) for m in line}) == len(line))
        jumps = []
        for a in line:
            for b in line:
                if a["branch"] == b["branch"] and \
                   math.isclose(float(b["gap"]) - float(a["gap"]), 0.5):
                    jumps.append(math.hypot(float(a["omega_re"]) - float(b["omega_re"]),
                                            float(a["omega_im"]) - float(b["omega_im"])))
        # branches may move by a tenth of the band (0.295 and 0.24) beside their extrapolation
        check(f"sound_pocket {s}: branches are continuous", jumps and max(jumps) < 0.06, jumps)
    metadata_of(file("one", "points.csv"), points[0], ("[sweep]", "gap = 4 to 6 in 5"), None)
    metadata_of(file("one", "modes.csv"), modes[0], ("[sweep]", "gap = 4 to 6 in 5"), None)

    exits("sweep again", 0, "sweep", grid, "--out", place("two"), lines=0)
    exits("sweep with one BLAS thread", 0, "sweep", grid, "--out", place("three"), lines=0,
          env={"OPENBLAS_NUM_THREADS": "1"})
    exits("sweep with two BLAS threads", 0, "sweep", grid, "--out", place("four"), lines=0,
          env={"OPENBLAS_NUM_THREADS": "2"})
    exits("sweep with one thread", 0, "sweep", grid, "--out", place("five"), "--threads", "1",
          lines=0)
    exits("sweep with three threads", 0, "sweep", grid, "--out", place("six"), "--threads", "3",
          lines=0)
    for table in ("points.csv", "modes.csv"):
        check(f"{table}: the same bytes each time",
              len({read(file(n, table)) for n in ("one", "two", "three", "four", "five", "six")})
              == 1)

    # sound_pocket = 1.2 is no pocket for tanh edges at speed 1: that point fails, the others do not
    done = exits("a failing point ends with 1", 1, "sweep", fails, "--out", place("fails"),
                 says=["point 2", "sound_pocket"])
    data = dicts_of(file("fails", "points.csv"))
    check("it is recorded as failed", [r["status"] for r in data] == ["ok", "failed", "ok"], data)
    check("and its cells are empty",
          all(data[1][c] == "" for c in POINT_COLUMNS if c != "status"), data[1])

    exits("sweep of an SI case", 0, "sweep", si, "--out", place("si"), lines=0)
    units = metadata_of(file("si", "points.csv"), ["gap"] + POINT_COLUMNS, ("gap = 6 um to 8 um",),
                        "1/s")
    check("lengths carry their unit", units["gap"] == units["horizon_distance"] == "m", units)
    check("the axis is in metres",
          [float(r["gap"]) for r in dicts_of(file("si", "points.csv"))]
          == [6e-6, 7e-6, 8e-6])

    before = read(file("one", "points.csv")), read(file("one", "modes.csv"))
    exits("an occupied folder", 2, "sweep", grid, "--out", place("one"), says=["one"])
    exits("another case into it", 2, "sweep", fails, "--out", place("one"))
    exits("a broken case into it", 2, "sweep", grid, "--out", place("one"), "--set",
          "flow.speed=-1", says=["speed"])
    check("older tables stay",
          (read(file("one", "points.csv")), read(file("one", "modes.csv"))) == before)
    exits("no axes", 2, "sweep", write(folder, "plain.ini", TANH), "--out", place("none"),
          says=["[sweep]"])
    check("and no folder is made for it", not os.path.exists(place("none")))
    exits("no folder", 2, "sweep", grid, says=["--out"])
    exits("a file instead of a folder", 2, "sweep", grid, "--out", grid)
    exits("an unwritable place", 2, "sweep", grid, "--out", file("no", "where"), says=["where"])
    exits("--help ends with 0", 0, "sweep", "--help", lines=0)


for part in (check_solve, check_sweep):
    with tempfile.TemporaryDirectory() as scratch:
        part(scratch)
print(f"1..{results}")
sys.exit(failures > 0)
