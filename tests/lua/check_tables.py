"""Tables of distributions in the run folder: one file a measurement, rows by time and stage, units in the header, the same numbers
as `now` gives; runs in real units show lengths in nm."""
import csv
import json
import os
import sys

import numpy as np

sys.path.insert(0, os.path.join(os.environ["SOURCE"], "tests", "reference"))
from scripts import Run  # noqa: E402


def need(condition, what):
    if not condition:
        sys.exit("FAILED: " + what)


def read(run, name):
    with open(os.path.join(run.out, "tables", name + ".csv"), newline="") as f:
        head, *rows = list(csv.reader(f))
    return head, rows


SCRIPT = """
local nm, s = unit.nm, unit.s
local g = grid{ cells = {32, 24}, spacing = 0.5*nm }
local c = g:field("c", 0.5 + 0.3*cos(2*math.pi*g.x/(8*nm))*cos(2*math.pi*g.y/(12*nm)))
local m = model{ energy = 1e6*c^2*(1 - c)^2 + 1e-12*gradsq(c) }
m:conserve(c, { mobility = 1e-30 })
m:record{ every = 1*s, domains(c), domains(c).mean_diameter }
m:tabulate{ domains(c), domains(c), structure_factor(c):as("spectrum, fine"), every = 2*s }
m:tabulate{ domains(c, { side = "below" }):as("matrix") }
local T = param("T", 300)
m:run(schedule{ T, start = 300, hold{ 3*s, name = "soak" }, hold{ 2*s, name = "rest" } })
print(now(domains(c)).sizes[1])
"""
run = Run(SCRIPT)
head, rows = read(run, "domains_c")
need(head[:5] == ["time [s]", "stage", "domain", "size [nm^2]", "diameter [nm]"], f"head {head}")
times = sorted({float(r[0]) for r in rows})
need(times == [0, 2, 3, 4, 5], f"beat and ends of stages: {times}")
need({r[1] for r in rows if float(r[0]) == 3} == {"soak"} and {r[1] for r in rows if float(r[0]) > 3} == {"rest"}, "stages")
need(all(len([r for r in rows if float(r[0]) == t]) == 4 for t in times), "four domains at each time")
need(abs(float(rows[-4][3]) * 1e-18 / float(run.stdout.split()[0]) - 1) < 1e-9, "first size as now gives it")
need(read(run, "domains_c-2")[1] == rows, "a second table of one name has a number")
head, rows = read(run, "spectrum_fine")
need(head == ["time [s]", "stage", "k [nm^-1]", "S [nm^2]", "modes"], f"head {head}")
need(np.all(np.isfinite([[float(x) for x in r[2:]] for r in rows])), "numbers throughout")
need({float(r[0]) for r in read(run, "matrix")[1]} == {0, 3, 5}, "without a beat: start and ends of stages")
ledger = run.ledger()
need(list(ledger)[3:] == ["domains(c)", "domains(c).mean_diameter"] and ledger["domains(c)"][-1] == 4, "ledger")
with open(os.path.join(run.out, "summary.json")) as f:
    tables = json.load(f)["tables"]
need([t["file"] for t in tables] == [f"tables/{n}.csv" for n in ("domains_c", "domains_c-2", "spectrum_fine", "matrix")], f"summary: {tables}")
with open(os.path.join(run.out, "report.html")) as f:
    need("tables/spectrum_fine.csv" in f.read(), "the report names the tables")
print("tables are as promised")
