#!/usr/bin/python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
"""Command lines that would lose a file, and where the program may write: check_cli.py PROGRAM
prints TAP. Each wrong call gives one line on standard error, exit code 2 and leaves the files alone."""
import os
import re
import subprocess
import sys
import tempfile

PROGRAM = os.path.abspath(sys.argv[1])
CASE = """[units]
system = reduced
[flow]
shape = step
speed = 1
sound_upstream = 1.5
sound_pocket = 0.5
sound_downstream = 1.5
gap = 2
"""
count = bad = 0


def check(good, name, detail=""):
    global count, bad
    count += 1
    bad += not good
    print(f"{'ok' if good else 'not ok'} {count} - {name}" + ("" if good else f" # {detail}"))


def run(*words):
    return subprocess.run([PROGRAM, *words], capture_output=True, text=True, check=False)


def files():
    return {name: open(name, "rb").read() for name in os.listdir(".") if os.path.isfile(name)}


def refused(want, *words):
    before = files()
    done = run(*words)
    good = (done.returncode == 2 and done.stderr.count("\n") == 1 and want in done.stderr
            and done.stdout == "" and files() == before)
    check(good, " ".join(words).encode("unicode_escape").decode(), repr(done.stderr))


def main():
    with open("my.ini", "w", encoding="ascii") as file:
        file.write(CASE)
    os.mkdir("folder")
    os.link("my.ini", "hard.csv")
    os.symlink("my.ini", "soft.csv")
    os.symlink("nothing", "dangling.csv")
    refused("would be one file", "solve", "my.ini", "--csv", "same", "--matrix", "same")
    refused("would be one file", "solve", "my.ini", "--csv", "./x", "--modes", "folder/../x")
    refused("would be one file", "solve", "my.ini", "--csv", "x", "--modes", "x-metadata.json")
    refused("would be one file", "solve", "my.ini", "--matrix", "x-metadata.json", "--csv", "x")
    refused("would write over my.ini", "solve", "my.ini", "--csv", "my.ini")
    refused("would write over", "flow", "./my.ini", "--csv", "folder/../my.ini")
    refused("would write over my.ini", "onset", "my.ini", "--csv", "hard.csv")
    refused("would write over my.ini", "solve", "my.ini", "--matrix", "soft.csv")
    refused("would be one file", "solve", "my.ini", "--csv", "x", "--matrix", "x.part")
    refused("would be one file", "solve", "my.ini", "--modes", "x", "--csv", "x.part")
    os.rename("my.ini", "x.part")
    refused("would write over x.part", "solve", "x.part", "--csv", "x")
    os.rename("x.part", "my.ini")
    os.mkdir("grid")
    os.link("my.ini", "grid/points.csv")
    refused("would be written over by the sweep", "sweep", "grid/points.csv", "--set",
            "sweep.gap=1,2", "--out", "grid")
    os.rename("my.ini", "c-metadata.json")
    refused("would write over c-metadata.json", "flow", "c-metadata.json", "--csv", "c")
    os.rename("c-metadata.json", "my.ini")
    refused("a link that leads to no file", "solve", "my.ini", "--csv", "dangling.csv")
    refused("standard output", "solve", "my.ini", "--modes", "-")
    refused("standard output", "solve", "my.ini", "--matrix", "-")
    refused("its folder cannot be written", "solve", "my.ini", "--csv", "no/x")
    refused("a folder, give a file", "solve", "my.ini", "--csv", "folder")
    refused("a name of 0 bytes", "solve", "my.ini", "--csv", "")
    refused("/dev/full: matrix", "solve", "my.ini", "--matrix", "/dev/full")
    refused("so\\x0alve", "so\nlve", "my.ini")
    refused("--c\\x0asv", "solve", "my.ini", "--c\nsv", "x")
    refused("my.ini: a file, want a folder", "sweep", "my.ini", "--set", "sweep.gap=1,2", "--out",
            "my.ini")
    refused("--out DIR is wanted", "sweep", "my.ini")
    usage = run("sweep", "--help").stdout.splitlines()[0]
    check(" --out DIR " in usage and "[--out" not in usage, "help shows what is needed", usage)
    # a link is followed: the link stays, what it leads to is written whole
    os.symlink("real.csv", "link.csv")
    open("real.csv", "w", encoding="ascii").close()
    done = run("solve", "my.ini", "--csv", "link.csv")
    check(done.returncode == 0 and os.path.islink("link.csv")
          and open("real.csv", encoding="ascii").read().startswith("mode,label"), "a link is followed",
          done.stderr)
    done = run("solve", "my.ini", "--csv", "/dev/null", "--matrix", "/dev/null")
    check(done.returncode == 0, "a device takes two outputs", done.stderr)
    # one part of a sweep twice, under two names
    run("sweep", "my.ini", "--set", "sweep.gap=1 to 2 in 40", "--out", "one", "--part", "1/2")
    os.symlink("one", "same")
    refused("are one folder", "merge", "one", "same", "--out", "whole")
    run("sweep", "my.ini", "--set", "sweep.gap=1 to 2 in 40", "--out", "two", "--part", "2/2")
    done = run("merge", "--out", "one", "one", "two")
    check(done.returncode == 0 and "40 points" in done.stdout, "parts into one of them", done.stderr)
    with open("edge.ini", "w", encoding="ascii") as file:
        file.write("[units]\nsystem = reduced\n[flow]\nshape = potential\nmach = 0.6\nprofile = step\n")
    refused("no pocket of a length", "onset", "edge.ini")
    done = run("solve", "my.ini", "--set", "ends.kind=walls", "--set", "ends.padding=1e9")
    check(done.returncode == 1 and "padding" in done.stderr, "too long a box has no answer", done.stderr)
    # a table without noise, a strength that asks for more knots than there are: an answer, not a hang
    for level in ("1", "1.1"):
        with open("flat.csv", "w", encoding="ascii") as file:
            file.write("x,speed,sound\n" + "".join(f"{i / 20},0.5,{level}\n" for i in range(1001)))
        with open("flat.ini", "w", encoding="ascii") as file:
            file.write("[units]\nsystem = reduced\n[flow]\nshape = table\nfile = flat.csv\nsmoothing = 0.2\n")
        done = subprocess.run([PROGRAM, "flow", "flat.ini"], capture_output=True, text=True, check=False,
                              timeout=60)
        check(done.returncode == 0, f"a flat table of {level}", done.stderr)
    # --time-limit: one sentence and no part of a file; a sweep goes on where it was
    with open("slow.ini", "w", encoding="ascii") as file:
        file.write(CASE.replace("gap = 2", "gap = 300") + "[ends]\nkind = open\n[sweep]\ngap = 300 to 301 in 400\n")
    before = set(files())
    done = run("plan", "slow.ini", "--time-limit", "1", "--csv", "late.csv")
    check(done.returncode == 1 and "the time limit of 1 s is over" in done.stderr
          and done.stderr.count("\n") == 1 and set(files()) == before, "a plan ends in time", done.stderr)
    done = run("sweep", "slow.ini", "--time-limit", "2", "--out", "late")
    first = re.match(r"(\d+) of 400 points finished", done.stdout)
    check(done.returncode == 1 and first and 0 < int(first.group(1)) < 400, "a sweep keeps what is done",
          done.stdout + done.stderr)
    done = run("sweep", "slow.ini", "--time-limit", "2", "--out", "late", "--resume")
    again = re.match(r"(\d+) of 400 points finished", done.stdout)
    check(again and int(again.group(1)) > int(first.group(1)), "and goes on", done.stdout + done.stderr)
    refused("whole number", "solve", "my.ini", "--time-limit", "0.5")
    refused("given twice", "solve", "my.ini", "--time-limit", "5", "--time-limit", "6")
    print(f"1..{count}")
    return bad > 0


with tempfile.TemporaryDirectory() as folder:
    os.chdir(folder)
    code = main()
    os.chdir("/")
sys.exit(code)
