#!/usr/bin/python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
"""How fast: run.py PROGRAM. BENCH_QUICK=1 in the environment: under a minute instead of several.

 1. Time to 1 % on the growth rate of every growing mode of a typical smooth pocket: PROGRAM against
    naive.py beside this file, in the same run on the same machine. The true values are PROGRAM's,
    with its error bars; the last boxes, which share nothing with it, show whether it is right.
 2. Cost of one configuration against the length of the pocket.
 3. Cost of a sweep against the number of points, and of threads where `sweep` has them.

Nothing here passes or fails by a time. Each time of PROGRAM is that of a whole process, start to
end; those of `solve` are medians, a sweep is run once and averages over its points. naive.py is not
charged for starting Python. "cpu" is processor time: a busy machine disturbs it less than wall
time, but it counts BLAS threads that wait by spinning, which naive.py has and PROGRAM does not.
"""
import csv
import json
import math
import os
import statistics
import subprocess
import sys
import tempfile
import time

QUICK = os.environ.get("BENCH_QUICK", "") not in ("", "0")
PROGRAM = os.path.abspath(sys.argv[1])
NAIVE = os.path.join(os.path.dirname(os.path.abspath(__file__)), "naive.py")
CORES = len(os.sched_getaffinity(0))

GOAL = 0.01  # relative error of a growth rate; what a plot of growth rates can show
PERCENT = f"{100 * GOAL:g} %"
REPEATS = 3 if QUICK else 5

# Dense boxes: as large as a user's patience allows (the cost grows as the cube), at several
# paddings, since no rule gives the best one.
DENSE_UNKNOWNS = 2000
DENSE_PADDINGS = (100,) if QUICK else (40, 100, 200)
# Sparse boxes, spacing and padding: each has about twice the unknowns of the one before. This order
# was found by trial to be a good one for naive.py, which a user does not know beforehand.
BOXES = ((0.05, 200), (0.05, 400), (0.05, 800), (0.05, 1600), (0.025, 1600), (0.025, 3200))
BOXES = BOXES[:5] if QUICK else BOXES
# The loosest accuracy that twinhorizon takes; the other times are at the one it has by itself.
LOOSEST = "1e-3"
# No further box after one that took this long or this much memory.
LONGEST, LARGEST = 90.0, 1000.0  # seconds, MB

GAPS = (5, 10, 20) if QUICK else (5, 10, 25, 50, 100, 200, 400)
POINTS = (50, 100) if QUICK else (125, 250, 500, 1000)

POCKET = """[units]
system = reduced
[flow]
shape = tanh
speed = 1
sound_upstream = 1.35
sound_pocket = 0.55
sound_downstream = 1.45
width_black = 0.5
width_white = 0.5
gap = 10
[ends]
kind = open
"""
STEP = """[units]
system = reduced
[flow]
shape = step
speed = 1
sound_upstream = 1.5
sound_pocket = 0.5
sound_downstream = 1.5
gap = 10
[ends]
kind = open
"""


WELL = """[units]
system = reduced
[flow]
shape = well
mach = 0.6
gap = 1.5
"""
DENSE = []  # wall time of the dense box at one configuration, from part 1


class Run:
    """One process: its output, exit code, wall and processor time in s, peak memory in MB."""

    def __init__(self, *command):
        start = time.perf_counter()
        with subprocess.Popen(command, stdout=subprocess.PIPE, text=True) as process:
            self.output = process.stdout.read()
            _, status, usage = os.wait4(process.pid, 0)
            process.returncode = self.code = os.waitstatus_to_exitcode(status)
        self.wall = time.perf_counter() - start
        self.cpu = usage.ru_utime + usage.ru_stime
        self.peak = usage.ru_maxrss / 1024


def program(*arguments):
    run = Run(PROGRAM, *arguments)
    if run.code not in (0, 1):  # 1: finished, but something is undecided
        sys.exit(f"bench: exit code {run.code} of {PROGRAM} {' '.join(arguments)}")
    return run


def median(runs):
    """The last run with the medians of all: time is what varies."""
    last = runs[-1]
    for name in ("wall", "cpu", "peak"):
        setattr(last, name, statistics.median(getattr(run, name) for run in runs))
    return last


def solve(case, *arguments, repeats=REPEATS):
    """Solves a case; .modes: its growing modes as [omega, error bar], fastest first."""
    run = median([program("solve", case, "--csv", "-", *arguments) for _ in range(repeats)])
    rows = csv.DictReader(run.output.splitlines())
    run.modes = [
        (complex(float(row["omega_re"]), float(row["omega_im"])), float(row["omega_error"]))
        for row in rows
        if row["label"] == "unstable"
    ]
    return run


def naive(*arguments):
    """naive.py in a process of its own; its wall and processor time without Python's start."""
    run = Run(sys.executable, NAIVE, *map(str, arguments))
    if run.code != 0:
        sys.exit("bench: naive.py failed; it needs python3-numpy and python3-scipy")
    answer = json.loads(run.output)
    run.wall, run.cpu = answer["seconds"], answer["processor"]
    run.unknowns, run.blas = answer["unknowns"], answer["blas"]
    run.modes = [m and complex(*m) for m in answer["modes"]]
    return run


def errors(modes, truth):
    """Relative errors of the growth rates; None where a mode is missing. Both fastest first."""
    modes = modes + [None] * len(truth)
    return [m and m.imag / z.imag - 1 for m, z in zip(modes, truth)]


def within(off):
    return all(e is not None and abs(e) <= GOAL for e in off)


def show(off):
    return "".join(f"{'missed' if e is None else f'{100 * e:+.2f} %':>11}" for e in off)


def exponent(x, y):
    """p of y = a x^p between the last two."""
    return math.log(y[-1] / y[-2]) / math.log(x[-1] / x[-2])


def agree(one, other):
    """Whether one who does not know the truth would stop: no mode changed by more than GOAL."""
    pairs = list(zip(one.modes, other.modes))
    return all(a and b and abs(a.imag / b.imag - 1) <= GOAL for a, b in pairs)


def spent(runs):
    return sum(run.wall for run in runs), sum(run.cpu for run in runs)


def ratio(text, runs, own):
    wall, cpu = spent(runs)
    print(f"  {text:<80}{wall / own.wall:8.1f}{cpu / own.cpu:10.1f}")


def growth_rates(folder, summary):
    case = os.path.join(folder, "pocket.ini")
    with open(case, "w", encoding="ascii") as file:
        file.write(POCKET)
    print(f"\n1. Growth rates of a smooth pocket, to {PERCENT} on every growing mode")
    print("   tanh, v = 1, c = 1.35/0.55/1.45, widths 0.5, gap 10, hbar = m = 1\n")
    own = solve(case)
    truth = [z for z, _ in own.modes]
    if not truth:
        sys.exit("bench: twinhorizon found no growing mode of a pocket that has three")
    print("mode  frequency     growth rate        error bar / growth rate")
    for k, (z, bar) in enumerate(own.modes):
        print(f"{k + 1:4}  {z.real:.8f}    {z.imag:.10f}       {bar / z.imag:.1e}")
    heads = "".join(f"{f'mode {k + 1}':>11}" for k in range(len(truth)))
    print(f"\n{'':<31}unknowns   wall s    cpu s     MB  error of the growth rate")
    print(f"{'':<62}{heads}")
    bars = "".join(f"{bar / z.imag:11.0e}" for z, bar in own.modes)
    line = "{:<31}{:>8}{:9.2f}{:9.2f}{:7.0f}{}"
    print(line.format("twinhorizon solve", "", own.wall, own.cpu, own.peak, bars))
    loose = solve(case, "--set", f"solve.accuracy={LOOSEST}")
    bars = "".join(f"{bar / z.imag:11.0e}" for z, bar in loose.modes)
    name = f"twinhorizon solve, to {LOOSEST}"
    print(line.format(name, "", loose.wall, loose.cpu, loose.peak, bars))

    start = None  # the dense box whose modes are the first guesses of the sparse ones
    for padding in DENSE_PADDINGS:
        run = naive("dense", DENSE_UNKNOWNS, padding)
        off = errors(run.modes, truth)
        run.name = f"dense box, padding {padding}"
        print(line.format(run.name, run.unknowns, run.wall, run.cpu, run.peak, show(off)))
        worst = max(math.inf if e is None else abs(e) for e in off)
        if start is None or (len(run.modes), -worst) > (len(start.modes), -start.worst):
            start, start.worst = run, worst
    DENSE.append(start.wall)

    guesses, boxes = start.modes, []
    for spacing, padding in BOXES:
        run = naive("sparse", spacing, padding, *guesses)
        guesses = [m or g for m, g in zip(run.modes, guesses)]
        run.spacing, run.padding, run.off = spacing, padding, errors(run.modes, truth)
        boxes.append(run)
        run.name = f"sparse box, {spacing} x {padding}"
        print(line.format(run.name, run.unknowns, run.wall, run.cpu, run.peak, show(run.off)))
        if run.wall > LONGEST or run.peak > LARGEST:
            break
    print(
        "   dense: several paddings; sparse: spacing x padding, guesses from the best dense box,\n"
        "   then from the sparse box before. Sizes and paddings chosen in hindsight.\n"
        f"   scipy with {' '.join(start.blas) or 'unknown BLAS'}, its own number of threads."
    )

    print(f"\n{'Time of naive.py over that of twinhorizon solve':<82}    wall       cpu")
    tried = [start] + boxes
    hit = next((k for k, run in enumerate(boxes) if within(run.off)), None)
    if hit is None:
        ratio(f"no box within {PERCENT} on all modes; all that were tried: more than", tried, own)
    else:
        box = boxes[hit]
        told = naive("sparse", box.spacing, box.padding, *truth)
        luck = "" if all(within(run.off) for run in boxes[hit:]) else " by luck"
        name = f"box within {PERCENT}{luck}, {box.spacing} x {box.padding}"
        ratio(f"{name}, guesses: the answers", [told], own)
        ratio(f"{name}, guesses: the dense box (included)", [start, box], own)
    pair = next((k for k in range(1, len(boxes)) if agree(boxes[k - 1], boxes[k])), None)
    if pair is None:
        off, more, used = "none did", "more than ", tried
    else:
        worst = max(math.inf if e is None else abs(e) for e in boxes[pair].off)
        off, more, used = f"then {100 * worst:.1f} % off", "", tried[: pair + 2]
    ratio(f"dense box, then sparse ones until two in a row agree to {PERCENT} ({off})", used, own)
    bar = max(bar / z.imag for z, bar in own.modes)
    summary += [
        f"twinhorizon solve: {own.wall:.2f} s, {own.peak:.0f} MB, growth rates to {bar:.0e}",
        f"naive.py until two boxes agree to {PERCENT} ({off}): {more}{spent(used)[0]:.1f} s, "
        f"{max(run.peak for run in used):.0f} MB; ratio {more}{spent(used)[0] / own.wall:.1f}",
    ]


def lengths(folder, summary):
    case = os.path.join(folder, "step.ini")
    with open(case, "w", encoding="ascii") as file:
        file.write(STEP)
    print("\n2. One configuration against the pocket's length (step, v = 1, c = 1.5/0.5/1.5)\n")
    print("  gap   growing modes   largest error bar / growth rate   wall s    cpu s     MB")
    cpu = []
    for gap in GAPS:
        run = solve(case, "--set", f"flow.gap={gap}")
        worst = max(bar / z.imag for z, bar in run.modes)
        note = "" if run.code == 0 else "  undecided"
        # A mode off the imaginary axis stands for its mirror image too.
        count = sum(2 if z.real > 0 else 1 for z, _ in run.modes)
        print(f"{gap:5}{count:16}{worst:34.0e}{run.wall:9.2f}{run.cpu:9.2f}{run.peak:7.0f}{note}")
        cpu.append(run.cpu)
    power = exponent(GAPS, cpu)
    print(f"  Between the last two the cost grows as gap^{power:.1f} (cpu).")
    summary.append(
        f"gap {GAPS[0]} to {GAPS[-1]}: {cpu[-1] / cpu[0]:.1f} times the cpu time, "
        f"at the end as gap^{power:.1f}"
    )


def sweep(case, points, *arguments):
    """A sweep into a folder of its own, which goes away with it."""
    with tempfile.TemporaryDirectory() as target:
        return program("sweep", case[0], "--set", f"sweep.gap={case[1]} in {points}", "--out",
                       os.path.join(target, "tables"), *arguments)


def sweeps(folder, summary):
    cases = []
    for name, shape, gaps in (
        ("step", "shape = step", "0.5 to 20"),
        ("tanh", "shape = tanh\nwidth_black = 0.5\nwidth_white = 0.5", "0.5 to 20"),
        ("well", None, "0.2 to 8"),
    ):
        path = os.path.join(folder, f"sweep-{name}.ini")
        with open(path, "w", encoding="ascii") as file:
            file.write(WELL if shape is None else STEP.replace("shape = step", shape))
        cases.append((path, gaps, name))
    print("\n3. Sweeps, every growing mode certified at every point (all processors)")
    print("   step and tanh (widths 0.5): v = 1, c = 1.5/0.5/1.5, gap 0.5 to 20; well: mach 0.6,\n"
          "   gap 0.2 to 8. dense box: its time at one point (part 1) times the points.\n")
    print("case   points   wall s   cpu s   cpu s/point     MB   dense box, extrapolated / wall")
    for case in cases:
        cpu = []
        for points in POINTS if case[2] == "step" else POINTS[-1:]:
            run = sweep(case, points)
            cpu.append(run.cpu)
            print(f"{case[2]:5}{points:8}{run.wall:9.2f}{run.cpu:8.2f}{run.cpu / points:14.4f}"
                  f"{run.peak:7.0f}{DENSE[0] * points / run.wall:12.0f}")
        if len(cpu) > 1:
            power = exponent(POINTS, cpu)
            print(f"       Between the last two the cost grows as points^{power:.2f} (cpu).")
        summary.append(f"sweep of {POINTS[-1]} gaps, {case[2]}: {run.wall:.1f} s; dense boxes would "
                       f"take {DENSE[0] * POINTS[-1] / run.wall:.0f} times as long")
    print(f"\nthreads   wall s   cpu s   speed-up   ({POINTS[-1]} points, tanh)")
    alone, threads = None, 1
    while threads <= CORES:
        run = sweep(cases[1], POINTS[-1], "--threads", str(threads))
        alone = alone or run.wall
        print(f"{threads:7}{run.wall:9.2f}{run.cpu:8.2f}{alone / run.wall:11.2f}")
        threads *= 2
    summary.append(f"threads: {alone / run.wall:.2f} times faster with {threads // 2}")


def switch_on_map(folder, summary):
    side = 20 if QUICK else 100
    case = os.path.join(folder, "map.ini")
    with open(case, "w", encoding="ascii") as file:
        file.write(STEP.replace("shape = step", "shape = tanh\nwidth_black = 0.5\nwidth_white = 0.5"))
        file.write(f"[sweep]\nsound_pocket = 0.4 to 0.7 in {side}\nspeed = 0.9 to 1.1 in {side}\n")
    run = program("onset", case, "--orders", "6", "--upto", "30", "--csv",
                  os.path.join(folder, "map.csv"))
    text = f"switch-on map, {side} x {side} points, 6 orders, tanh: {run.wall:.1f} s"
    print(f"\n4. {text} ({run.cpu:.1f} s cpu)")
    summary.append(text)


def main():
    start = time.perf_counter()
    load = os.getloadavg()[0]
    busy = " (busy: repeat when it is not)" if load > 0.5 * CORES else ""
    kind = "quick" if QUICK else "full"
    print(f"twinhorizon bench, {kind}: {CORES} cores, load {load:.1f} at the start{busy}, "
          f"medians of {REPEATS}")
    sys.stdout.reconfigure(line_buffering=True)
    with tempfile.TemporaryDirectory() as folder:
        summary = []
        for part in (growth_rates, lengths, sweeps, switch_on_map):
            part(folder, summary)
    print("\nSummary")
    for line in summary:
        print(f"  {line}")
    print(f"  this bench: {time.perf_counter() - start:.0f} s")


main()
