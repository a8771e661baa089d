"""The same bits on 1 and 2 threads and from one process to the next, for 200 steps of fixed length and for adaptive runs: fields
compared byte by byte, for every mixture of walls in 2-D and for 3-D. Also: what plan says of coarse grids and small boxes, and
that a report made again from the folder shows the same ledger."""
import filecmp
import os
import subprocess
import sys
import tempfile

mottle = os.environ["MOTTLE"]
folder = tempfile.mkdtemp(prefix="mottle-bits-")
script = """
local g = grid{ cells = CELLS, spacing = 1, walls = WALLS }
local c = g:field("c", 0.5 + 0.02*noise.normal{ seed = 3 })
local m = model{ energy = c*log(c) + (1 - c)*log(1 - c) + 2.6*c*(1 - c) + 0.5*gradsq(c) }
m:conserve(c, { mobility = MOBILITY })
m:record{ every = 1e9, m:energy(), wavelength(c), interface(c), domain_count(c) }
m:save{ c }
m:run{ duration = DURATION, STEP }
"""


def run(text, name, threads):
    path, out = os.path.join(folder, name + ".lua"), os.path.join(folder, f"{name}-{threads}")
    with open(path, "w") as f:
        f.write(text)
    done = subprocess.run([mottle, "run", path, "--into", out, "--replace", "--quiet", "--threads", threads[0]],
                          capture_output=True, text=True)
    if done.returncode:
        sys.exit(f"{name}: {done.stderr}")
    return out


cases = [("{60, 44}", f'{{"{x}", "{y}"}}', "1", "10", "step = 0.05") for x in ("periodic", "mirror") for y in ("periodic", "mirror")]
cases += [("{64, 64}", '"periodic"', "c*(1 - c)", "30", ""), ("{20, 18, 22}", '{"periodic", "mirror", "periodic"}', "1", "30", ""),
          ("{16, 16, 16}", '"mirror"', "1 - 0.5*c", "20", ""), ("{300}", '"periodic"', "1", "50", "")]
for i, (cells, walls, mobility, duration, step) in enumerate(cases):
    text = script
    for key, value in (("CELLS", cells), ("WALLS", walls), ("MOBILITY", mobility), ("DURATION", duration), ("STEP", step)):
        text = text.replace(key, value)
    folders = [run(text, f"case{i}", t) for t in ("1", "2", "2 again")]
    files = [os.path.join(f, name) for f in folders for name in ("fields/c-0000.npy", "ledger.csv")]
    if not all(filecmp.cmp(a, files[j % 2], shallow=False) for j, a in enumerate(files)):
        sys.exit(f"FAILED: {cells} {walls}: other bits with other threads")
    print(cells, walls, mobility, step or "adaptive", "same bits")

coarse = os.path.join(folder, "coarse.lua")
with open(coarse, "w") as f:
    f.write('local g = grid{ cells = {16, 16}, spacing = 2 }\nlocal c = g:field("c", 0.5)\nlocal m = model{ energy = c^2*(1 - c)^2 + 0.5*gradsq(c) }\n'
            "m:conserve(c, { mobility = 1 })\nm:run{ duration = 1 }\nerror('not reached')")
plan = subprocess.run([mottle, "plan", coarse], capture_output=True, text=True, check=True).stdout
# lambda = 2 sqrt(2) pi sqrt(kappa/-f'') = 8.886 and growth time 4 for this double well at 1/2 (Cahn 1961)
for words in ("too coarse", "box is small", "Fastest wavelength 8.886", "growth time (amplitude times e) 4", "critical wavelength 6.283"):
    if words not in plan:
        sys.exit(f"FAILED: plan does not say '{words}':\n{plan}")

# Gradient energy kappa = 0.25 along y against 1 along x: lambda goes with sqrt(kappa), the growth rate f''^2/(4 kappa) with 1/kappa
# (Cahn & Hilliard's linear theory, as above), so y has half the wavelength and a quarter of the time; its cells are too wide.
with open(coarse, "w") as f:
    f.write('local g = grid{ cells = {100, 100}, spacing = {1, 0.8} }\nlocal c = g:field("c", 0.5)\n'
            "local m = model{ energy = c^2*(1 - c)^2 + 0.5*dx(c)^2 + 0.125*dy(c)^2 }\nm:conserve(c, { mobility = 1 })\nm:run{ duration = 1 }")
plan = subprocess.run([mottle, "plan", coarse], capture_output=True, text=True, check=True).stdout
for words in ("Fastest wavelength 4.443 (along y)", "growth time (amplitude times e) 1,", "critical wavelength 3.142", "8.89 cells per fastest wavelength, 11.3 fastest wavelengths per box\n",
              "5.55 cells per fastest wavelength, 18 fastest wavelengths per box along y\n    WARNING: the grid is too coarse"):
    if words not in plan:
        sys.exit(f"FAILED: plan does not say '{words}':\n{plan}")

with open(os.path.join(os.environ["SOURCE"], "examples/two_step_ageing.lua")) as f:
    alloy = f.read()
for wavelength, words in (("0.9*nm", "is near the distance of atoms, where a continuum model has no meaning"), ("2*nm", "interfaces will be about")):
    with open(coarse, "w") as f:
        f.write(alloy.replace("wavelength = 6*nm", "wavelength = " + wavelength).replace("0.6*nm", "0.1*nm"))
    plan = subprocess.run([mottle, "plan", coarse, "cells=128"], capture_output=True, text=True, check=True).stdout
    if words not in plan:
        sys.exit(f"FAILED: plan does not say '{words}':\n{plan}")

page = os.path.join(folders[0], "report.html")
before = open(page).read()
subprocess.run([mottle, "report", folders[0]], check=True, capture_output=True)
after = open(page).read()
if before.split("<h2>Charts")[1].split("<h2>")[0] != after.split("<h2>Charts")[1].split("<h2>")[0] or len(after) < 0.99 * len(before):
    sys.exit("FAILED: the report made again differs")
print("bits, plan and report hold")
