"""mottle check from outside: a resolved script suffices, a coarse grid and loose steps are named, orders and error bars are those of
the method, finer grids start from the same field, nothing is left behind unless asked for, and what cannot be checked says why."""
import csv
import os
import subprocess
import sys
import tempfile

mottle = os.environ["MOTTLE"]
os.chdir(tempfile.mkdtemp(prefix="mottle-check-"))

SCRIPT = """
local h = input("h", 1)
local g = grid{ cells = {math.floor(96/h), math.floor(96/h)}, spacing = h, walls = {"periodic", "mirror"} }
local c = g:field("c", 0.5 + 0.1*cos(2*math.pi*g.x/12)*cos(2*math.pi*g.y/16) + 0.05*cos(2*math.pi*g.x/48)*cos(math.pi*g.y/48))
local m = model{ energy = c^2*(1 - c)^2 + 0.5*gradsq(c) }
m:conserve(c, { mobility = 1 MORE })
m:record{ m:energy(), variance(c), interface(c), mean(c), minimum(c), maximum(c), every = 10 }
for i = 1, 3 do m:run{ duration = 400, accuracy = input("acc" .. i, 0.01) STEP } end
"""


def need(condition, what):
    if not condition:
        sys.exit("FAILED: " + what)


def check(*arguments, text=SCRIPT, code=0, more="", step=""):
    with open("case.lua", "w") as f:
        f.write(text.replace("MORE", more).replace("STEP", step))
    done = subprocess.run([mottle, "check", "case.lua", *arguments], capture_output=True, text=True)
    need(done.returncode == code, f"exit code {done.returncode}, expected {code}: {done.stdout}{done.stderr}")
    return done.stdout + done.stderr


def rows(folder):
    with open(os.path.join(folder, "check.csv"), newline="") as f:
        return {r["column"]: {k: float(v) if v else None for k, v in r.items() if k not in ("column", "unit")} for r in csv.DictReader(f)}


out = check("--into", "fine")
need("Accuracy: suffices" in out and "Grid: suffices" in out and "Box: suffices" in out, "a resolved script suffices")
fine = rows("fine")
need(0 < fine["energy"]["error bar"] < 1e-3 * fine["energy"]["value"], "its energy's error bar")
need(fine["mean(c)"]["error bar"] < 1e-13, "the mean is exact")
need(open("fine/check.txt").read() == out, "the text is kept")
need(sorted(os.listdir("fine")) == ["check.csv", "check.txt"] or ".mottle" in str(os.listdir("fine")), "nothing else is")
need(not os.path.exists("case.run"), "no run folder")
need("exists" in check("--into", "fine", code=3), "a folder is not written over")
check("--into", "fine", "--replace")

out = check("h=3", code=6)
need("Grid: does NOT suffice" in out and "smaller spacing" in out, "a coarse grid is named")

# fixed steps: the order is the method's, and the error bar at a step h is about 8 times that at h/2
out = check("--into", "steps", "--for", "20", step=", step = 0.1")
need("steps of 0.1" in out, "a fixed step is told")
order = rows("steps")["variance(c)"]["order"]
need(1.7 < order < 3.3, f"order {order}: that of the start (2) or of the method (3)")

out = check("acc1=0.9", "--for", "100", code=6)
need("Accuracy: does NOT suffice" in out and "smaller accuracy" in out, "loose steps are named")
loose = float(out.split("Largest change ")[1].split(" %")[0])
tight = float(check("acc1=0.001", "--for", "100").split("Largest change ")[1].split(" %")[0])
need(loose > 30 * tight, f"loose steps err more: {loose} % and {tight} %")

need("thermal noise" in check(more=", thermal_noise = { kT = 1e-6, seed = 1, thickness = 1 }", code=2), "noise cannot be checked so")
need("nothing to check" in check(text="print(1)", code=2), "a script without a run")
need("--for" in check("--for", "soon", code=2), "a length that is none")
need("no such input" in check("nonsense=1", code=2), "an input that is none")
print("check checks")
