"""Every example runs in a short form and does what its story says; plan warns where it should; the main example's ledger shows
what a practitioner would check: energy falls within each hold, the mean stays, domains coarsen."""
import csv
import os
import subprocess
import sys
import tempfile

mottle, source = os.environ["MOTTLE"], os.environ["SOURCE"]
folder = tempfile.mkdtemp(prefix="mottle-examples-")


def run(name, *arguments):
    out = os.path.join(folder, name)
    done = subprocess.run([mottle, "run", f"{source}/examples/{name}.lua", *arguments, "--into", out, "--quiet"],
                          capture_output=True, text=True)
    if done.returncode:
        sys.exit(f"{name}: exit code {done.returncode}: {done.stderr}")
    for file in ("ledger.csv", "report.html", "summary.json", "script.lua"):
        if not os.path.getsize(os.path.join(out, file)):
            sys.exit(f"{name}: {file} is empty")
    if not os.listdir(os.path.join(out, "pictures")):
        sys.exit(f"{name}: no pictures")
    with open(os.path.join(out, "ledger.csv"), newline="") as f:
        rows = list(csv.DictReader(f))
    print(name, "ends with", {k: v for k, v in rows[-1].items() if k != "stage"})
    return rows, done.stdout


def need(condition, what):
    if not condition:
        sys.exit("FAILED: " + what)


def column(rows, name):
    key = next(k for k in rows[0] if k.split(" [")[0] == name)
    return [float(r[key]) if r[key] else None for r in rows]


rows, _ = run("shortest")
energy = column(rows, "energy")
need(all(b <= a for a, b in zip(energy, energy[1:])), "shortest: the energy falls")

rows, _ = run("two_step_ageing")
stages = [r["stage"] for r in rows]
for hold in ("first ageing", "second ageing"):
    energy = [e for e, s in zip(column(rows, "energy"), stages) if s == hold]
    need(all(b <= a + 1e-12 * abs(a) for a, b in zip(energy, energy[1:])), f"energy falls in the {hold}")
mean = column(rows, "mean(x)")
need(max(abs(m - mean[0]) for m in mean) <= 1e-12 * mean[0], "the mean stays")
amplitude, count, lam = (column(rows, n) for n in ("amplitude(x)", "domain_count(x)", "lambda"))
formed = [i for i, a in enumerate(amplitude) if a > 0.6]  # once the phases are there
need(len(formed) > 50 and lam[formed[-1]] > 2 * lam[formed[0]], "the wavelength rises once the phases are there")
need(count[formed[-1]] < 0.5 * count[formed[0]], "the domain count falls")
second = [i for i, s in enumerate(stages) if s == "second ageing"]
need(all(lam[j] > lam[i] for i, j in zip(second[::6], second[6::6])), "the wavelength rises through the second hold")
temperature = column(rows, "T")
need(temperature[0] == 1020 and temperature[-1] == 815, "temperature follows the schedule")

rows, out = run("order_and_composition", "duration=120")
need("dF/deta = " in out, "the potential is printed")
need(0.4 < column(rows, "ordered fraction")[-1] < 0.75, "the alloy orders by the lever rule, (0.5 - 0.15)/(0.75 - 0.15)")
run("sealed_film", "limit=300")

rows, out = run("seeded_particles")
particles = column(rows, "particles")
need(particles[0] == 5 and particles[-1] == 2, "small seeds dissolve, large ones stay")
need("the small seeds are gone" in out, "the hook speaks")
fraction = column(rows, "fraction")
need(fraction[-1] > fraction[particles.index(2.0)], "the large ones grow")

plan = subprocess.run([mottle, "plan", f"{source}/examples/two_step_ageing.lua"], capture_output=True, text=True, check=True).stdout
for words in ("stable against waves", "unstable. Fastest wavelength 6 nm", "cells per fastest wavelength", "potential"):
    need(words in plan, f"plan says '{words}'")
print("examples run")
