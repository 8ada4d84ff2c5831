#!/usr/bin/env python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
#
# Sweeps as a user runs them: threads, interruptions, parts, the staircase, events. TAP; $1 is the
# program.
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
    for name in ("points.csv", "modes.csv", "events.csv"):
        for ending in ("", "-metadata.json"):
            with open(os.path.join(folder, name + ending), "rb") as file:
                out.append(file.read())
    return out


def same(folder, reference):
    return tables(folder) == reference


def write(name, text):
    with open(name, "w", encoding="utf-8") as file:
        file.write(text)


def rows_of(folder, name):
    with open(os.path.join(folder, name), newline="") as file:
        return list(csv.DictReader(file))


def switch_on(order):
    """The closed form of the switch-on lengths of STEP."""
    v, c_u, c_p, c_d = 1.0, 1.5, 0.5, 1.5
    k0 = 2 * math.sqrt(v * v - c_p * c_p)
    phase = sum(math.atan(2 * math.sqrt(c * c - v * v) / k0) for c in (c_u, c_d))
    return (phase + order * math.pi) / k0


def staircase(folder):
    """The count at every gap is the number of switch-on lengths below it."""
    rows = rows_of(folder, "points.csv")
    wrong = 0
    for row in rows:
        expected = sum(switch_on(j) < float(row["gap"]) for j in range(50))
        wrong += not (int(row["unstable"]) == int(row["census"]) == int(row["index"]) == expected)
        wrong += row["status"] != "ok"
    return len(rows) == 1000 and wrong == 0


def branches(folder):
    """Along the sweep a branch moves smoothly: no step is ten times its neighbours'."""
    line = {}
    for row in rows_of(folder, "modes.csv"):
        at = complex(float(row["omega_re"]), float(row["omega_im"]))
        line.setdefault(row["branch"], []).append((float(row["gap"]), at))
    jumps = 0
    for points in line.values():
        steps = [abs(b[1] - a[1]) for a, b in zip(points, points[1:])]
        gaps = [b[0] - a[0] for a, b in zip(points, points[1:])]
        jumps += any(g > 0.02 for g in gaps)  # a branch has no holes (grid step 0.0195)
        jumps += any(s > 0.1 for s in steps)
    return len(line) > 5 and jumps == 0


def sums(folder, axes=()):
    """Between neighbours that are ok the changes add up to that of `unstable`; elsewhere there is
    no event. False when there is nothing to see."""
    points, events = rows_of(folder, "points.csv"), rows_of(folder, "events.csv")
    left = len(events)
    good = left > 0
    for a, b in zip(points, points[1:]):
        here = [e for e in events if (e["from"], e["to"]) == (a["gap"], b["gap"])
                and all(e[x] == a[x] == b[x] for x in axes)]
        left -= len(here)
        if a["status"] != "ok" or b["status"] != "ok":
            good &= not here
        elif all(a[x] == b[x] for x in axes):
            good &= (sum(int(e["count_change"]) for e in here)
                     == int(b["unstable"]) - int(a["unstable"]))
    return good and left == 0


def foretold(folder, lengths, axes=()):
    """Events are births at even switch-on lengths, where a purely growing mode comes, and mergers at
    odd ones, where the slowest mode turns into a pair. lengths: (values of the axes, gap, even);
    branch: that of a mode beyond the event, of a merger an oscillating one."""
    first = min(float(p["gap"]) for p in rows_of(folder, "points.csv"))
    events, modes = rows_of(folder, "events.csv"), rows_of(folder, "modes.csv")
    lengths = [x for x in lengths if x[1] > first]
    good = len(lengths) == len(events) > 1
    for values, gap, even in lengths:
        there = [e for e in events if float(e["from"]) < gap <= float(e["to"])
                 and tuple(float(e[a]) for a in axes) == values
                 and (e["event"], e["count_change"]) == ("birth" if even else "merger", "1")]
        kinds = [float(m["omega_re"]) > 0 for e in there for m in modes
                 if m["gap"] == e["to"] and m["branch"] == e["branch"]
                 and all(m[a] == e[a] for a in axes)]
        good &= len(there) == 1 and kinds == [not even]
    return good


def onset_lengths(case, axes=()):
    out = run("onset", case, "--csv", "-").stdout
    return [(tuple(float(r[a]) for a in axes), float(r["gap"]), r["kind"] == "growing")
            for r in csv.DictReader(out.splitlines())]


def events():
    """Events of sweeps of three shapes against closed form and `onset`."""
    closed = [((), switch_on(j), j % 2 == 0) for j in range(50) if switch_on(j) < 20]
    check(sums("one") and foretold("one", closed), "events of step are at L_j, 1000 gaps")
    write("coarse.ini", STEP % 40)
    run("sweep", "coarse.ini", "--out", "coarse")
    check(sums("coarse") and foretold("coarse", closed)
          and foretold("coarse", onset_lengths("coarse.ini")), "so they are on 40 gaps")
    run("sweep", "coarse.ini", "--set", "sweep.gap=20 to 0.5 in 40", "--out", "down")
    kinds = [[(e["event"], e["count_change"]) for e in rows_of(f, "events.csv")]
             for f in ("coarse", "down")]
    back = {("birth", "1"): ("death", "-1"), ("merger", "1"): ("split", "-1")}
    check(sums("down") and kinds[1] == [back[k] for k in reversed(kinds[0])],
          "backwards they are deaths and splits")
    write("tanh2.ini", (STEP % 40).replace("shape = step", "shape = tanh\nwidth_black = 0.5\n"
                                           "width_white = 0.7")
          .replace("gap = 0.5 to 20", "sound_pocket = 0.5, 0.6\ngap = 1 to 7"))
    run("sweep", "tanh2.ini", "--out", "tanh2")
    axes = ("sound_pocket",)
    check(sums("tanh2", axes) and foretold("tanh2", onset_lengths("tanh2.ini", axes), axes),
          "events of tanh are where onset says, two lines")
    write("well.ini", "[units]\nsystem = reduced\n[flow]\nshape = well\nmach = 0.6\n"
          "[sweep]\ngap = 0.5 to 3.5 in 30\n")
    run("sweep", "well.ini", "--out", "well")
    check(sums("well") and foretold("well", onset_lengths("well.ini")),
          "events of well are where onset says")


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
    events()
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
    rows = rows_of("partly", "points.csv")
    check(partly.returncode == 1 and [r["status"] for r in rows] == ["ok"] * 3 + ["failed"] * 3,
          "points without a flow are recorded as failed, the sweep goes on")
    check(sums("partly", ("sound_pocket",)), "and have no events")
    # exactly at the first switch-on of a smooth pocket the index cannot tell; solve says so too
    write("switch.ini", (STEP % 3).replace("shape = step", "shape = tanh\nwidth_black = 0.5\n"
                                           "width_white = 0.7").replace("= 1.5", "= 1.35", 1)
          .replace("= 1.5", "= 1.45").replace("pocket = 0.5", "pocket = 0.55")
          .replace("gap = 0.5 to 20 in 3", "gap = 1.2, 1.38057805767058, 1.5"))
    at = run("solve", "switch.ini", "--set", "flow.gap=1.38057805767058")
    switch = run("sweep", "switch.ini", "--out", "switch")
    rows = rows_of("switch", "points.csv")
    check(at.returncode == 1 and switch.returncode == 1
          and [r["status"] for r in rows] == ["ok", "undecided", "ok"],
          "a point on a switch-on is undecided, in a sweep as alone")
    check(not rows_of("switch", "events.csv"), "and has no events")
    # the table of a case goes with the sweep: parts merge without the original, another table is
    # another case, and no file of the sweep is overwritten
    os.mkdir("camera")
    with open("camera/profile.csv", "w", encoding="ascii") as file:
        file.write("x,speed,sound\n")
        file.writelines(f"{i / 10},1,{1.5 - 1.1 * math.exp(-(i / 30) ** 2)!r}\n"
                        for i in range(-120, 121))
    write("camera/table.ini", "[units]\nsystem = reduced\n[flow]\nshape = table\n"
          "file = profile.csv\n[sweep]\nstretch = 0.8 to 1.2 in 6\n")
    whole = run("sweep", "camera/table.ini", "--out", "table")
    halves = [run("sweep", "camera/table.ini", "--out", f"table{k}", "--part", f"{k}/2")
              for k in (1, 2)]
    os.rename("camera/profile.csv", "camera/points.csv")
    merged = run("merge", "table1", "table2", "--out", "table12")
    check(whole.returncode == merged.returncode == 0 and all(h.returncode == 0 for h in halves)
          and open("table/points.csv").read() == open("table12/points.csv").read(),
          "a sweep keeps its table: parts merge when the original has moved")
    with open("table2/profile.csv", "a", encoding="ascii") as file:
        file.write("12.5,1,1.5\n")
    changed = run("merge", "table2", "table1", "--out", "table21")
    check(changed.returncode == 2 and "is not the one that was swept" in changed.stderr,
          "a changed copy of the table is noticed")
    taken = run("sweep", "camera/table.ini", "--set", "flow.file=camera/points.csv", "--out", "taken")
    check(taken.returncode == 2 and "needs another name" in taken.stderr
          and not os.path.exists("taken/points.csv"), "a table may not be called like a sweep's own")
    with open("camera/profile.csv", "w", encoding="ascii") as file:
        file.write(open("camera/points.csv", encoding="ascii").read().replace("12.0,1,", "12.0,1.0,"))
    other = run("sweep", "camera/table.ini", "--out", "table", "--resume")
    check(other.returncode == 2 and "rows, hash" in other.stderr,
          "a sweep does not go on with another table")
    nowhere = run("sweep", "step.ini", "--out", "no/such/folder")
    check(nowhere.returncode == 2 and nowhere.stderr.count("\n") == 1, "a missing folder is named")
    print("1..%d" % count)
    return 0


sys.exit(main())
