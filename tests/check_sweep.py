#!/usr/bin/env python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
#
# Sweeps as a user runs them: threads, interruptions, parts, the staircase. TAP; $1 is the program.
# The reference is the undisturbed run on one thread, and for the staircase the closed form of the
# switch-on lengths of a step pocket, L_j = [atan(k_u/k_0) + atan(k_d/k_0) + j pi]/k_0 with
# k_0 = 2 sqrt(v^2 - c_p^2), k_u,d = 2 sqrt(c_u,d^2 - v^2): static linearised equation at fixed
# current, set-up of "Saturation of black hole lasers in Bose-Einstein condensates",
# Phys. Rev. D 88, 125012 (2013).
import csv
import math
import os
import random
import re
import signal
import subprocess
import sys
import tempfile
import time

PROGRAM = os.path.abspath(sys.argv[1])
STEP = """[units]
system = reduced
[flow]
shape = step
speed = 1
sound_upstream = 1.5
sound_pocket = 0.5
sound_downstream = 1.5
[sweep]
gap = 0.5 to 20 in %d
"""
count = 0


def check(good, name):
    global count
    count += 1
    print(("ok" if good else "not ok"), count, "-", name)


def run(*arguments, **options):
    return subprocess.run([PROGRAM, *arguments], capture_output=True, text=True, **options)


def tables(folder):
    out = []
    for name in ("points.csv", "modes.csv", "points.csv-metadata.json", "modes.csv-metadata.json"):
        with open(os.path.join(folder, name), "rb") as file:
            out.append(file.read())
    return out


def same(folder, reference):
    return tables(folder) == reference


def write(name, text):
    with open(name, "w", encoding="utf-8") as file:
        file.write(text)


def staircase(folder):
    """The count at every gap is the number of switch-on lengths below it."""
    v, c_u, c_p, c_d = 1.0, 1.5, 0.5, 1.5
    k0 = 2 * math.sqrt(v * v - c_p * c_p)
    phase = sum(math.atan(2 * math.sqrt(c * c - v * v) / k0) for c in (c_u, c_d))
    rows = list(csv.DictReader(open(os.path.join(folder, "points.csv"), newline="")))
    wrong = 0
    for row in rows:
        gap = float(row["gap"])
        expected = max(0, math.ceil((gap * k0 - phase) / math.pi))
        wrong += not (int(row["unstable"]) == int(row["census"]) == int(row["index"]) == expected)
        wrong += row["status"] != "ok"
    return len(rows) == 1000 and wrong == 0


def branches(folder):
    """Along the sweep a branch moves smoothly: no step is ten times its neighbours'."""
    line = {}
    for row in csv.DictReader(open(os.path.join(folder, "modes.csv"), newline="")):
        at = complex(float(row["omega_re"]), float(row["omega_im"]))
        line.setdefault(row["branch"], []).append((float(row["gap"]), at))
    jumps = 0
    for points in line.values():
        steps = [abs(b[1] - a[1]) for a, b in zip(points, points[1:])]
        gaps = [b[0] - a[0] for a, b in zip(points, points[1:])]
        jumps += any(g > 0.02 for g in gaps)  # a branch has no holes (grid step 0.0195)
        jumps += any(s > 0.1 for s in steps)
    return len(line) > 5 and jumps == 0


def interrupted(case, reference, seed):
    """kill -9 at twenty random moments, resuming each time."""
    pick = random.Random(seed)
    folder = "killed"
    kills = 0
    while kills < 20:
        process = subprocess.Popen(
            [PROGRAM, "sweep", case, "--out", folder, "--threads", "2", "--resume"],
            stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
        time.sleep(pick.uniform(0.01, 0.15))
        if process.poll() is not None:
            break
        process.send_signal(signal.SIGKILL)
        process.wait()
        kills += 1
    last = run("sweep", case, "--out", folder, "--resume")
    return last.returncode == 0 and kills >= 5 and same(folder, reference), kills


def gentle(case, reference):
    """Ctrl-C: the points in flight are finished, the message says how to go on."""
    folder = "gentle"
    process = subprocess.Popen([PROGRAM, "sweep", case, "--out", folder, "--threads", "2"],
                               stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    time.sleep(0.3)
    process.send_signal(signal.SIGINT)
    out, err = process.communicate(timeout=60)
    told = process.returncode == 1 and "--resume" in out and err == ""
    if process.returncode == 0:  # a fast machine: it was through before the signal came
        told = True
    run("sweep", case, "--out", folder, "--resume")
    return told and same(folder, reference)


def main():
    os.chdir(tempfile.mkdtemp())
    write("step.ini", STEP % 1000)
    first = run("sweep", "step.ini", "--out", "one", "--threads", "1")
    check(first.returncode == 0 and re.match(r"1000 points: ", first.stdout), "1000 points")
    reference = tables("one")
    check(staircase("one"), "count = index = census = switch-on lengths below the gap, 1000 gaps")
    check(branches("one"), "branches are continuous lines")
    for threads in ("2", "7"):
        run("sweep", "step.ini", "--out", "t" + threads, "--threads", threads)
        check(same("t" + threads, reference), "same bytes on %s threads" % threads)
    good, kills = interrupted("step.ini", reference, 20261201)
    check(good, "same bytes after %d kills and resumes" % kills)
    check(gentle("step.ini", reference), "an interrupt finishes in order")
    for k in ("1", "2", "3"):
        run("sweep", "step.ini", "--out", "part" + k, "--part", k + "/3")
    merged = run("merge", "part1", "part2", "part3", "--out", "merged")
    check(merged.returncode == 0 and same("merged", reference), "three parts merge to same bytes")
    lacking = run("merge", "part1", "part3", "--out", "lacking")
    check(lacking.returncode == 2 and "missing" in lacking.stderr, "a missing part is named")
    again = run("sweep", "step.ini", "--out", "one")
    check(again.returncode == 2 and "--resume" in again.stderr and same("one", reference),
          "a finished folder is not overwritten")
    write("other.ini", STEP.replace("0.5\n", "0.6\n", 1) % 1000)
    other = run("sweep", "other.ini", "--out", "one", "--resume")
    check(other.returncode == 2 and "sound_pocket" in other.stderr and "0.6" in other.stderr
          and same("one", reference), "a changed case is refused, and the change is named")
    write("tall.ini", STEP.replace("gap = 0.5", "sound_pocket = 0.5, 1.2\ngap = 0.5") % 3)
    for arguments, word in ((("--threads", "0"), "threads"), (("--threads", "x"), "threads"),
                            (("--part", "4/3"), "part"), (("--part", "0/3"), "part")):
        bad = run("sweep", "tall.ini", "--out", "bad", *arguments)
        check(bad.returncode == 2 and word in bad.stderr and bad.stderr.count("\n") == 1
              and not os.path.exists("bad"), "refused: " + " ".join(arguments))
    write("tanh.ini", (STEP % 3).replace("shape = step", "shape = tanh\nwidth_black = 0.5\n"
                                         "width_white = 0.5")
          .replace("gap = 0.5 to 20", "sound_pocket = 0.5, 1.2\ngap = 2 to 4"))
    partly = run("sweep", "tanh.ini", "--out", "partly")
    rows = list(csv.DictReader(open("partly/points.csv", newline="")))
    check(partly.returncode == 1 and [r["status"] for r in rows] == ["ok"] * 3 + ["failed"] * 3,
          "points without a flow are recorded as failed, the sweep goes on")
    # exactly at the first switch-on of a smooth pocket the index cannot tell; solve says so too
    write("switch.ini", (STEP % 3).replace("shape = step", "shape = tanh\nwidth_black = 0.5\n"
                                           "width_white = 0.7").replace("= 1.5", "= 1.35", 1)
          .replace("= 1.5", "= 1.45").replace("pocket = 0.5", "pocket = 0.55")
          .replace("gap = 0.5 to 20 in 3", "gap = 1.2, 1.38057805767058, 1.5"))
    at = run("solve", "switch.ini", "--set", "flow.gap=1.38057805767058")
    switch = run("sweep", "switch.ini", "--out", "switch")
    rows = list(csv.DictReader(open("switch/points.csv", newline="")))
    check(at.returncode == 1 and switch.returncode == 1
          and [r["status"] for r in rows] == ["ok", "undecided", "ok"],
          "a point on a switch-on is undecided, in a sweep as alone")
    nowhere = run("sweep", "step.ini", "--out", "no/such/folder")
    check(nowhere.returncode == 2 and nowhere.stderr.count("\n") == 1, "a missing folder is named")
    print("1..%d" % count)
    return 0


sys.exit(main())
