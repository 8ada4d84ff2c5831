#!/usr/bin/python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
"""What is written for users against what is there: check_manual.py PROGRAM. Prints TAP.

Manual pages against the help texts and the case reader; every command line of README.md and of the pages is
run; the installed copy is used by the example in C, linked both ways, and the example in Python. References:
the program's own help, man's warnings, pkg-config, the compiler.
"""
import os
import re
import shutil
import subprocess
import sys
import tempfile

program = os.path.abspath(sys.argv[1])
root = os.path.abspath(os.path.join(os.path.dirname(os.path.abspath(__file__)), ".."))
build = os.path.dirname(program)
results = failures = 0


def check(name, good, *details):
    global results, failures
    results += 1
    failures += not good
    print(f"{'ok' if good else 'not ok'} {results} - {name}")
    for detail in details if not good else ():
        print("#   " + str(detail).replace("\n", "\n#   "))


def skip(name, why):
    global results
    results += 1
    print(f"ok {results} - {name} # SKIP {why}")


def run(command, **more):
    return subprocess.run(command, capture_output=True, text=True, timeout=300, check=False, **more)


def plain(text):
    """Roff text as a reader sees it, roughly."""
    return re.sub(r"\\f.", "", text.replace("\\-", "-").replace("\\e", "\\"))


# ---- manual pages ------------------------------------------------------------------------------------
page = plain(open(os.path.join(root, "src", "cli", "twinhorizon.1"), encoding="utf-8").read())
commands = re.findall(r"^  twinhorizon ([a-z]+) .*\.\.\. ", run([program, "--help"]).stdout, re.M)
check("the help lists commands", len(commands) >= 7, commands)
for command in commands:
    options = set(re.findall(r"^  (--[a-z-]+)", run([program, command, "--help"]).stdout, re.M))
    section = re.search(rf"^\.SS {command}\n(.*?)(?=^\.S[SH] )", page, re.M | re.S)
    written = set(re.findall(r"^\.BI? (--[a-z-]+)", section.group(1), re.M)) if section else set()
    check(f"twinhorizon(1) has the options of {command}",
          written == options - {"--help", "--set", "--time-limit"}, written ^ options)

case_page = plain(run([program, "--case-manual"]).stdout)
keys = set(re.findall(r"^\.B ([\w.]+)$", case_page, re.M))
source = open(os.path.join(root, "src", "case", "keys.h"), encoding="utf-8").read()
parsed = set(re.findall(r'X\(\w+, "\w+", "([\w.]+)"', source))
for name in os.listdir(os.path.join(root, "src", "flow")):
    if name.startswith("shape_"):
        text = open(os.path.join(root, "src", "flow", name), encoding="utf-8").read()
        parsed |= set(re.findall(r'\.key = "(\w+)"', text))
check("twinhorizon-case(5) has every key of the sources and no other", parsed <= keys and len(parsed) > 40,
      parsed - keys, keys - parsed)
# The other way round: a case with a key of the page is never told that the key is unknown.
unknown = []
for section, key in re.findall(r"^\.SS \[(\w+)\]\n|^\.B ([\w.]+)$", case_page, re.M):
    current = section or current
    if key and "KEY" not in key and current != "sweep":
        with tempfile.NamedTemporaryFile("w", suffix=".ini") as file:
            text = ("[units]\nsystem = reduced\n[flow]\nshape = step\nspeed = 1\nsound_upstream = 2\n"
                    "sound_pocket = 0.5\nsound_downstream = 2\ngap = 3\n")
            file.write(text)
            file.flush()
            said = run([program, "flow", file.name, "--set", f"{current}.{key}=1"]).stderr
            unknown += [key] if "unknown key" in said else []
    if current == "plan" and key == "seed":
        break  # what follows belongs to shapes
check("no key of the page is unknown", not unknown, unknown)
if shutil.which("man"):
    for name in ("twinhorizon.1", "twinhorizon-case.5"):
        done = run(["man", "--warnings", "-E", "UTF-8", "-l", os.path.join(build, name)],
                   env={**os.environ, "MANWIDTH": "100"})
        check(f"{name} is clean roff", done.returncode == 0 and not done.stderr
              and len(done.stdout) > 2000, done.stderr)
else:
    skip("roff", "no man")

# ---- every command line that is written ------------------------------------------------------------
readme = open(os.path.join(root, "README.md"), encoding="utf-8").read()
lines = re.findall(r"^    (?:\$ )?build/(twinhorizon .*)$", readme, re.M)
lines += re.findall(r"^(twinhorizon (?:solve|sweep|onset|report|plan|flow) cases.*)$", page, re.M)
work = tempfile.mkdtemp()
os.symlink(os.path.join(root, "cases"), os.path.join(work, "cases"))
os.mkdir(os.path.join(work, "build"))
os.mkdir(os.path.join(work, "build", "sub"))
for line in dict.fromkeys(lines):
    words = [program] + [w.strip('"') for w in re.findall(r'"[^"]*"|\S+', line)][1:]
    figures = any(w in ("--figure", "--figure-modes", "report") for w in words)
    if figures and shutil.which("gnuplot") is None:
        skip(line, "no gnuplot")
        continue
    done = run(words, cwd=work)
    check(line, done.returncode == 0, done.returncode, done.stderr)

# ---- the installed copy ------------------------------------------------------------------------------
prefix = os.path.join(work, "prefix")
done = run(["make", "-s", "-C", root, "install", f"PREFIX={prefix}",
            f"BUILD={os.path.relpath(build, root)}"])
check("make install", done.returncode == 0, done.stderr)
compiler = next((c for c in ("cc", "gcc", "clang") if shutil.which(c)), None)
example = os.path.join(root, "cases", "pocket.c")
check("the example is short", len(open(example, encoding="utf-8").readlines()) < 60)
if compiler and done.returncode == 0 and "sanitize" not in build:
    environment = {**os.environ, "PKG_CONFIG_PATH": prefix + "/lib/pkgconfig",
                   "LD_LIBRARY_PATH": prefix + "/lib"}
    shared = run(["pkg-config", "--cflags", "--libs", "twinhorizon"], env=environment).stdout.split()
    private = run(["pkg-config", "--static", "--libs", "twinhorizon"], env=environment).stdout.split()
    static = [w if w != "-ltwinhorizon" else prefix + "/lib/libtwinhorizon.a" for w in shared + private]
    outputs = []
    for name, flags in (("shared", shared), ("static", static)):
        target = os.path.join(work, name)
        made = run([compiler, "-std=c11", "-Wall", example, *flags, "-lm", "-o", target], env=environment)
        ran = run([target], env=environment) if made.returncode == 0 else made
        outputs.append(ran.stdout)
        check(f"the example in C, {name}", ran.returncode == 0 and "growing modes" in ran.stdout
              and "undecided" not in ran.stdout, made.stderr, ran.stdout, ran.stderr)
    check("both print the same", outputs[0] == outputs[1], *outputs)
else:
    skip("the example in C", "no compiler, or an instrumented build")
done = run([os.path.join(prefix, "bin", "twinhorizon"), "--version"])
check("the installed program", done.returncode == 0 and "GSL" in done.stdout and "HDF5" in done.stdout,
      done.stdout, done.stderr)
if shutil.which("bash"):
    script = (f"source {prefix}/share/bash-completion/completions/twinhorizon; PATH={prefix}/bin:$PATH;"
              "COMP_WORDS=(twinhorizon pl); COMP_CWORD=1; _twinhorizon; echo \"${COMPREPLY[@]}\";"
              "COMP_WORDS=(twinhorizon solve --fig); COMP_CWORD=2; _twinhorizon; echo \"${COMPREPLY[@]}\"")
    done = run(["bash", "-c", script])
    check("completion", done.stdout.split("\n")[0] == "plan"
          and done.stdout.split("\n")[1].split() == ["--figure", "--figure-modes"], done.stdout, done.stderr)
done = run(["make", "-s", "-C", root, "uninstall", f"PREFIX={prefix}",
            f"BUILD={os.path.relpath(build, root)}"])
left = [f for _, _, files in os.walk(prefix) for f in files]
check("make uninstall leaves nothing", done.returncode == 0 and not left, left)

# ---- the example in Python --------------------------------------------------------------------------
try:
    import h5py  # noqa: F401
    import matplotlib  # noqa: F401
    sweep, shapes, picture = (os.path.join(work, n) for n in ("swept", "m.h5", "p.png"))
    run([program, "sweep", os.path.join(root, "cases", "guide.ini"), "--out", sweep])
    run([program, "solve", os.path.join(root, "cases", "guide.ini"), "--modes", shapes])
    done = run([sys.executable, os.path.join(root, "cases", "replot.py"), sweep, shapes, picture],
               env={**os.environ, "MPLCONFIGDIR": work})
    check("the example in Python", done.returncode == 0
          and open(picture, "rb").read(4) == b"\x89PNG", done.stderr)
    done = run([sys.executable, os.path.join(root, "cases", "replot.py"), sweep, picture],
               env={**os.environ, "MPLCONFIGDIR": work})
    check("the same without shapes", done.returncode == 0, done.stderr)
except ImportError as error:
    skip("the example in Python", error)
shutil.rmtree(work)
print(f"1..{results}")
sys.exit(failures > 0)
