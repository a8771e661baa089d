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

amplitudes = {}
for noise in ("true", "false"):
    rows, out = run("hot_fluctuations", "cells=64", "ageing=40min", "noise=" + noise, "--replace")
    mean, variances = column(rows, "mean(x)"), column(rows, "variance(x)")
    need(max(abs(v - 0.42) for v in mean) < 1e-13, "fluctuations: the mean stays")
    need(0.015 < variances[0] ** 0.5 < 0.045, "fluctuations: equipartition's size, some per cent in cells of 400 atoms")
    amplitudes[noise] = column(rows, "amplitude(x)")
    need(amplitudes[noise][-1] > 3 * amplitudes[noise][0], "fluctuations: the alloy unmixes")
need(amplitudes["true"][-1] != amplitudes["false"][-1], "fluctuations: noise matters")

# the examples of the bundled models, in short forms
def value(text, before):
    return float(text.split(before)[1].split()[0].rstrip(",;:%"))


rests = {}
for rate in ("10K/min", "20K/min"):
    rows, out = run("blend_arrest", "cells=128", "rate=" + rate, "--replace")
    rests[rate] = value(out, "wavelength of")
    mean, glass, high = column(rows, "mean(phi)"), column(rows, "share of glass"), column(rows, "maximum(phi)")
    need(max(abs(m - mean[0]) for m in mean) <= 1e-12 * mean[0], "blend: its mass stays")
    last = [i for i, r in enumerate(rows) if r["stage"] == "on the shelf"]
    need(glass[0] == 0 and glass[-1] > 0.9, "blend: it turns to glass")
    need(abs(high[last[0]] - high[-1]) < 1e-5 and high[-1] > 0.54, "blend: what has unmixed is arrested on the shelf")
need(rests["20K/min"] < rests["10K/min"] < 150, "blend: faster cooling leaves a finer structure")

rows, out = run("copolymer_period", "cells=128", "duration=500")
period, smooth = value(out, "period"), value(out, "theory:")
need(abs(period / smooth - 1) < 0.08, "copolymer: the period of the theory")
lam = [p for p in column(rows, "period") if p]
need(abs(lam[-1] / lam[len(lam) // 2] - 1) < 0.03, "copolymer: domains do not coarsen")
rows, out = run("copolymer_period", "cells=96", "duration=300", "mean=-0.35", "--replace")
need(column(rows, "domains")[-1] > 30, "copolymer: unequal blocks give dots")
need(abs(column(rows, "mean(u)")[-1] - column(rows, "mean(u)")[0]) < 1e-13, "copolymer: its mass stays")

rows, out = run("crystal_seeds", "cells=200", "duration=400")
atoms, energy = column(rows, "atoms"), column(rows, "energy")
perfect = value(out, "fills the box has")
need(atoms[0] < 0.2 * perfect and 0.93 * perfect < atoms[-1] < 1.02 * perfect, f"crystal: seeds fill the box with {atoms[-1]} of {perfect} atoms")
need(all(b <= a for a, b in zip(energy, energy[1:])), "crystal: the energy falls")
density = value(out, "crystal")
side = 200 * 4 * 3.14159265358979 / 3**0.5 / 10
need(abs(energy[-1] / side**2 / density - 1) < 0.01 < energy[0] / side**2 / density - 1, "crystal: from the melt's energy to the perfect one's")

rows, out = run("dendrite", "cells=112", "duration=150")
axis, diagonal = column(rows, "along the axis"), column(rows, "along the diagonal")
need(abs(axis[0] - 16) < 1.5 and abs(diagonal[0] - 16) < 1.5, "dendrite: the seed is round")
need(axis[-1] > 1.25 * diagonal[-1], "dendrite: arms grow along the axes")
solid, heat = [x / (112 * 1.8)**2 for x in column(rows, "solid")], column(rows, "mean(T)")
need(abs(heat[-1] / (1.6 * (solid[-1] - solid[0])) - 1) < 0.01, "dendrite: the heat is that of the melt that froze")
need(max(column(rows, "warmest")) < 1.0, "dendrite: the solid stays below the melting point")

rows, out = run("grain_growth", "cells=112", "grains=24", "duration=150")
count, energy = column(rows, "grains"), column(rows, "energy")
need(all(b <= a for a, b in zip(energy, energy[1:])), "grains: the energy falls")
need(count[-1] < 0.8 * max(count), "grains: small ones vanish")
need(value(out, "boundaries of length") > 1.3 * value(out.split("at the end")[1], "boundaries of length"), "grains: boundaries shorten")

rows, out = run("three_metals", "cells=96", "duration=200")
for name in ("mean(Ca)", "mean(Ld)", "mean(Er)"):
    mean = column(rows, name)
    need(max(abs(m - mean[0]) for m in mean) < 1e-13, f"three metals: {name} stays")
need(value(out, "derivative") < 0 and column(rows, "amplitude(Ca)")[-1] > 0.5, "three metals: Ca parts from the others")
need(column(rows, "Ld with Er")[-1] > 0 and column(rows, "least Er")[-1] > 0, "three metals: Er goes with Ld")
energy = column(rows, "energy")
need(all(b <= a + 1e-12 * abs(a) for a, b in zip(energy, energy[1:])), "three metals: the energy falls")

rows, out = run("lopsided_gap", "cells=96", "duration=300")
poor, rich, share = value(out, "phases"), value(out, "and"), value(out, "second") / 100
need(abs(column(rows, "share of rich")[-1] - share) < 0.03, "lopsided gap: the lever rule")
need(abs(column(rows, "poor")[-1] - poor) < 0.02 and abs(column(rows, "rich")[-1] - rich) < 0.03, "lopsided gap: the phases of the common tangent")

plan = subprocess.run([mottle, "plan", f"{source}/examples/two_step_ageing.lua"], capture_output=True, text=True, check=True).stdout
for words in ("stable against waves", "unstable. Fastest wavelength 6 nm", "cells per fastest wavelength", "potential"):
    need(words in plan, f"plan says '{words}'")
print("examples run")
