#!/usr/bin/python3
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
"""Figures and reports: check_figures.py PROGRAM. Prints TAP.

Figures are read back: SVG by Python's XML parser, PDF and PNG by their first bytes; what they must say is
looked for as text. The numbers of a report are compared with the tables of `solve`, `onset` and `plan`. With
Chromium at hand (Debian package chromium) the page is loaded without a screen: its console must be silent
and every figure must have a size, on a desk and on a phone.
"""
import csv
import html.parser
import os
import re
import shutil
import subprocess
import sys
import tempfile
import xml.etree.ElementTree as xml

program = os.path.abspath(sys.argv[1])
cases = os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "cases")
results = failures = 0

if shutil.which("gnuplot") is None:
    print("1..0 # SKIP no gnuplot")
    sys.exit(0)


def check(name, good, *details):
    global results, failures
    results += 1
    failures += not good
    print(f"{'ok' if good else 'not ok'} {results} - {name}")
    for detail in details if not good else ():
        print(f"#   {detail}")


def run(*arguments, path=None):
    environment = dict(os.environ) if path is None else {**os.environ, "PATH": path}
    return subprocess.run([program, *arguments], capture_output=True, text=True, timeout=300,
                          check=False, env=environment)


def case(name):
    return os.path.join(cases, name)


def said(path):
    """All text of an SVG, and whether anything in it could run or load."""
    tree = xml.parse(path)
    text = " ".join("".join(node.itertext()) for node in tree.iter() if node.tag.endswith("text")
                    or node.tag.endswith("title"))
    active = [node.tag for node in tree.iter() if node.tag.endswith("script")
              or any(name.lower().startswith("on") for name in node.attrib)
              or any(name.endswith("href") and not value.startswith(("#", "data:image/png"))
                     for name, value in node.attrib.items())]
    return text, active


HEADS = {"svg": b"<?xml", "pdf": b"%PDF-", "png": b"\x89PNG\r\n"}
folder = tempfile.mkdtemp(prefix="figures of 'a \"b\" ")  # names with blanks and quotes are names


def place(name):
    return os.path.join(folder, name)


# ---- each figure in each form ----------------------------------------------------------------------
sweep = place("sweep")
COMMANDS = {
    "flow": (["flow", case("guide.ini")], ["flow speed v", "sound speed c", "black-hole horizon",
                                          "white-hole horizon", "x (µm)", "density", "potential"]),
    "flow-jump": (["flow", case("step.ini")], ["speed (reduced)"]),
    "spectrum": (["solve", case("guide.ini")], ["frequency (Hz)", "growth rate (1/s)", "unstable",
                                               "certified", "mode 1: frequency 0 Hz"]),
    "spectrum-stable": (["solve", case("stable.ini")], ["growth rate"]),
    "line": (["sweep", case("step.ini"), "--out", sweep + "1"],
             ["gap (reduced)", "branch 1", "branch 4", "vertical lines"]),
    "map": (["sweep", case("step.ini"), "--set", "sweep.sound_pocket=0.4 to 0.7 in 4", "--set",
             "sweep.gap=0.5 to 8 in 7", "--out", sweep + "2"],
            ["largest growth rate", "sound_pocket (reduced)", "a mode switches on", "stable"]),
    "ring": (["sweep", case("ring.ini"), "--set", "sweep.gap=9.75,10", "--out", sweep + "3"],
             ["growth rate (reduced)"]),
}
for name, (command, words) in COMMANDS.items():
    for ending, head in HEADS.items():
        if ending != "svg" and name not in ("flow", "line", "map"):
            continue
        again = ["--resume"] if command[0] == "sweep" and ending != "svg" else []
        done = run(*command, *again, "--figure", place(f"{name}.{ending}"))
        there = os.path.exists(place(f"{name}.{ending}"))
        check(f"{name} as {ending}", done.returncode == 0 and there
              and open(place(f"{name}.{ending}"), "rb").read(len(head)) == head, done.stderr)
    text, active = said(place(f"{name}.svg"))
    check(f"{name} says what it shows", all(w in text for w in words),
          [w for w in words if w not in text], text[:300])
    check(f"{name} runs and loads nothing", not active, active)

done = run("solve", case("guide.ini"), "--figure-modes", place("shapes.svg"))
text, active = said(place("shapes.svg"))
check("shapes", done.returncode == 0 and "|u|" in text and "mode 2" in text and not active, done.stderr)

# The script draws the same picture by itself.
done = run("flow", case("guide.ini"), "--figure", place("again.svg"), "--script", place("again.gp"))
with open(place("drawn.svg"), "wb") as file:
    subprocess.run(["gnuplot", "-d", place("again.gp")], stdout=file, check=True)
check("the script draws the figure", done.returncode == 0
      and said(place("drawn.svg"))[0] == said(place("again.svg"))[0], done.stderr)

# ---- refusals --------------------------------------------------------------------------------------
for arguments, word in (
        (["flow", case("step.ini"), "--figure", place("x.jpg")], "must end in .svg, .pdf or .png"),
        (["flow", case("step.ini"), "--script", place("x.gp")], "goes with --figure"),
        (["flow", case("step.ini"), "--figure", place("no/x.svg")], "its folder cannot be written"),
        (["sweep", case("step.ini"), "--out", sweep + "4", "--figure", place("no/x.svg")],
         "its folder cannot be written"),
        (["sweep", case("step.ini"), "--out", sweep + "4", "--part", "1/2", "--figure",
          place("x.svg")], "--figure is for all points"),
        (["flow", case("step.ini"), "--figure", case("step.ini") + "/x.svg"],
         "its folder cannot be written"),
        (["report", case("step.ini")], "--out FILE.html is wanted")):
    done = run(*arguments)
    check(f"refused: {word}", done.returncode == 2 and word in done.stderr
          and done.stderr.count("\n") == 1, done.stderr)
done = run("flow", case("step.ini"), "--figure", place("none.svg"), path="/nonexistent")
check("without gnuplot one sentence", done.returncode == 2 and "gnuplot" in done.stderr
      and done.stderr.count("\n") == 1 and not os.path.exists(place("none.svg")), done.stderr)


# ---- report ----------------------------------------------------------------------------------------
class Page(html.parser.HTMLParser):
    """Tables of a page: rows of (text, title)."""

    def __init__(self, text):
        super().__init__()
        self.tables, self.headings, self.outside, self.svgs = [], [], [], 0
        self.cell = self.heading = None
        self.feed(text)

    def handle_starttag(self, tag, attrs):
        attrs = dict(attrs)
        self.svgs += tag == "svg"
        self.outside += [v for k, v in attrs.items() if k in ("src", "href")
                         and v and not v.startswith(("#", "data:"))]
        self.outside += [k for k in attrs if k.startswith("on")] + (["script"] if tag == "script" else [])
        if tag == "table":
            self.tables.append([])
        elif tag == "tr":
            self.tables[-1].append([])
        elif tag in ("td", "th"):
            self.cell = ["", attrs.get("title", "")]
        elif tag == "h2":
            self.heading = ""

    def handle_endtag(self, tag):
        if tag in ("td", "th") and self.cell is not None:
            self.tables[-1][-1].append(tuple(self.cell))
            self.cell = None
        elif tag == "h2":
            self.headings.append(self.heading)
            self.heading = None

    def handle_data(self, data):
        if self.cell is not None:
            self.cell[0] += data
        elif self.heading is not None:
            self.heading += data


def table(page, *words):
    """The table whose header holds these words."""
    for rows in page.tables:
        head = [cell[0] for cell in rows[0]]
        if all(any(word in h for h in head) for word in words):
            return rows
    return [[]]


def rows_of(*arguments):
    done = run(*arguments, "--csv", "-")
    return list(csv.DictReader(done.stdout.splitlines()))


small = ["--set", "plan.samples=64"]
for name in ("guide.ini", "ring.ini", "stable.ini", "profile.ini"):
    if name == "ring.ini":
        extra = ["--set", "plan.gap_range=9.9 to 10.1"]
    else:
        extra = small if name == "guide.ini" else []
    target = place(name + ".html")
    done = run("report", case(name), *extra, "--out", target)
    check(f"report of {name}", done.returncode == 0, done.stderr)
    if done.returncode != 0:
        continue
    text = open(target, encoding="utf-8").read()
    page = Page(text)
    check(f"{name}: nothing from elsewhere", not page.outside and "url(" not in text, page.outside[:5])
    check(f"{name}: all parts", [h for h in page.headings] == [
        "Verdict", "Flow", "Modes", "Lengths of the pocket", "Limits of the model", "Plan",
        "Where this comes from"], page.headings)
    check(f"{name}: figures", page.svgs == (3 if name == "stable.ini" and "Shapes of" not in text else 4),
          page.svgs)
    modes = rows_of("solve", case(name), *extra)
    shown = table(page, "label", "growth rate", "confirmed by")[1:]
    check(f"{name}: modes as in the table", len(shown) == len(modes) and all(
        row[2][1].split(" ")[0] == m["omega_re"] and row[3][1].split(" ")[0] == m["omega_im"]
        and row[1][0] == m["label"] and row[8][0] == m["confirmed"]
        for row, m in zip(shown, modes)), shown[:2], modes[:2])
    if name == "guide.ini":
        onset = rows_of("onset", case(name), "--upto", "14 um")
        shown = table(page, "order", "what")[1:]
        check("switch-on lengths as in the table", len(shown) == len(onset) > 0 and all(
            abs(float(row[1][1].split(" ")[0]) / float(o["gap"]) - 1) < 1e-12
            for row, o in zip(shown, onset)), shown[:2], onset[:2])
        numbers = {(r["topic"], r["item"], r["quantity"]): r["value"]
                   for r in rows_of("plan", case(name), *extra)}
        shown = {row[0][0]: row[2][1] for row in table(page, "check", "limit")[1:]}
        check("limits as in the plan", len(shown) == 10 and all(
            value == "" or abs(float(value) / float(numbers["validity", key, "value"]) - 1) < 1e-12
            for key, value in shown.items()), shown)
        check("the text of the plan is there", all(
            html_line in text for html_line in ("Seeded", "Tolerances", "e-foldings")))

browser = shutil.which("chromium")
if browser is None:
    print(f"ok {results + 1} - in a browser # SKIP no Chromium")
    results += 1
else:
    # Sizes are written into the title by a script of the test's own, in a copy of the page.
    probe = ("<script>onerror=e=>document.title='error '+e;onload=()=>{document.title='sizes '+"
             "[...document.querySelectorAll('figure svg')].map(s=>{const r=s.getBoundingClientRect();"
             "return Math.round(r.width)+'x'+Math.round(r.height)}).join(' ')+' page '+"
             "document.documentElement.scrollWidth}</script></body>")
    page = open(place("guide.ini.html"), encoding="utf-8").read()
    with open(place("probe.html"), "w", encoding="utf-8") as file:
        file.write(page.replace("</body>", probe))
    for width in (1000, 500):
        done = subprocess.run(
            [browser, "--headless", "--no-sandbox", "--disable-gpu", "--enable-logging=stderr",
             f"--window-size={width},1200", "--dump-dom", "file://" + place("probe.html")],
            capture_output=True, text=True, timeout=120, check=False)
        title = re.search(r"<title>(.*?)</title>", done.stdout)
        title = title.group(1) if title else "none"
        sizes = [tuple(map(int, s.split("x"))) for s in re.findall(r"\d+x\d+", title)]
        check(f"in a browser {width} wide: figures have a size", title.startswith("sizes")
              and len(sizes) == 4 and all(w > 0.8 * min(width, 940) - 40 and h > 100 for w, h in sizes),
              title)
        check(f"in a browser {width} wide: the page does not scroll sideways",
              int(title.rsplit(" ", 1)[-1]) <= width if title.startswith("sizes") else False, title)
        console = [line for line in done.stderr.splitlines() if "CONSOLE" in line]
        check(f"in a browser {width} wide: silent console", not console, *console[:3])
shutil.rmtree(folder)
print(f"1..{results}")
sys.exit(failures > 0)
