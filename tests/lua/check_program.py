"""The program around the scripts: --help and --version, plan of every example (and that it leaves nothing behind), what a run folder
holds, a report made again, stages and names in the ledger, a start from an array, inputs with units, ways out of the closed
environment, a stop by SIGTERM in the middle of a schedule."""
import csv
import json
import os
import signal
import subprocess
import sys
import tempfile
import time

import numpy as np

mottle, source = os.environ["MOTTLE"], os.environ["SOURCE"]
folder = tempfile.mkdtemp(prefix="mottle-program-")


def need(condition, what):
    if not condition:
        sys.exit("FAILED: " + what)


def program(*arguments, code=0):
    done = subprocess.run([mottle, *arguments], capture_output=True, text=True, cwd=folder, timeout=60)
    need(done.returncode == code, f"{arguments}: exit code {done.returncode}, expected {code}: {done.stderr}")
    return done.stdout, done.stderr


def script(name, text):
    path = os.path.join(folder, name + ".lua")
    with open(path, "w") as f:
        f.write(text)
    return path


def ledger(run):
    with open(os.path.join(folder, run, "ledger.csv"), newline="") as f:
        return list(csv.reader(f))


# --- the command line ----------------------------------------------------------------------------------------------------------------
out, err = program("--help")
need(not err and all(w in out for w in ("mottle run SCRIPT", "mottle plan", "mottle report", "--threads", "Exit codes", "130")), "--help")
for command in ("run", "plan", "report"):
    need(program(command, "--help")[0] == out, command + " --help says the same")
    need("which" in program(command, code=2)[1], command + " asks for its argument")
need(program("--version")[0].startswith("mottle 0."), "--version")
out, err = program(code=2)
need("mottle run SCRIPT" in err and not out, "without a command the usage goes to standard error")
path = script("no_run", "print('hello')")
out, err = program("run", path)
need(out == "hello\n" and "without a run" in err and not os.path.exists(os.path.join(folder, "no_run.run")), "a script without a run")

# --- plan of every example ------------------------------------------------------------------------------------------------------------
before = set(os.listdir(folder))
for name, words in (
    ("shortest", ("256 x 256 cells", "c = 0.5", "Fastest wavelength 8.886", "one step takes about")),
    ("two_step_ageing", ("first ageing", "second ageing", "Fastest wavelength 6 nm", "770 K", "MB of")),
    ("order_and_composition", ("192 x 192 cells", "eta", "potential")),
    ("sealed_film", ("256 x 64 cells", "walls periodic x mirror")),
    ("seeded_particles", ("192 x 192 cells", "stable", "cannot nucleate")),
):
    out, err = program("plan", f"{source}/examples/{name}.lua")
    missing = [w for w in words if w not in out]
    need(not missing and not err, f"plan of {name} does not say {missing}:\n{out}{err}")
need(set(os.listdir(folder)) == before, "plan leaves nothing")

# --- a run folder -----------------------------------------------------------------------------------------------------------------------
np.save(os.path.join(folder, "start.npy"), 0.5 + 0.1 * np.random.default_rng(5).uniform(-1, 1, (15, 21)))
aged = """
local T1 = input("T1", 900*unit.K, "first temperature")
local g = grid{ cells = {21, 15}, spacing = 1*unit.nm }
local c = g:field("c", from_array{ file = "start.npy" })
local T = param("T", 1000*unit.K)
local m = model{ energy = 1e8*(c^2*(1 - c)^2 + 0.5e-18*gradsq(c)) }
m:conserve(c, { mobility = 1e-27*T/1000 })
m:record{ every = 20*unit.s, T, m:energy(), mean(c):as("mean of c"), maximum(c) }
m:picture{ c, low = 0, high = 1 }
m:save{ c, every = 60*unit.s }
m:run(schedule{ T, start = 1000*unit.K, quench{ to = T1 }, hold{ 1*unit.minute, name = "first" }, ramp{ to = 800*unit.K, rate = 5*unit.K/unit.s }, hold{ 40*unit.s } })
"""
path = script("aged", aged)
program("run", path, "T1=627degC")
run = os.path.join(folder, "aged.run")
need(sorted(os.listdir(run)) == [".mottle", "fields", "inputs", "ledger.csv", "pictures", "report.html", "script.lua", "summary.json"], f"the run folder holds {sorted(os.listdir(run))}")
rows = ledger("aged.run")
need(rows[0] == ["time [s]", "stage", "step [s]", "T [K]", "energy [J/m]", "mean of c", "maximum(c)"], f"the head of the ledger: {rows[0]}")
need([r[1] for r in rows[1:]] == ["first"] * 4 + ["ramp 1"] * 2 + ["hold 2"] * 3, f"stages: {[r[:2] for r in rows]}")
# the first row is the start, before the quench at time 0
for row, time_and_T in zip(rows[1:], ((0, 1000), (20, 900.15), (40, 900.15), (60, 900.15), (80, 800.15), (80.03, 800), (100, 800), (120, 800), (120.03, 800))):
    need(abs(float(row[0]) - time_and_T[0]) < 1e-6 and abs(float(row[3]) - time_and_T[1]) < 1e-6, f"row {row}, expected {time_and_T}")
start = np.load(os.path.join(folder, "start.npy"))
need(abs(np.load(os.path.join(run, "fields", "c-0000.npy")).reshape(15, 21) - start).max() < 1e-14, "the start is the array")
need(abs(float(rows[1][6]) - start.max()) < 1e-14 and abs(float(rows[-1][5]) - start.mean()) < 1e-14, "maximum and mean are those of the array")
need(len(os.listdir(os.path.join(run, "fields"))) == 4, "fields at 0, 60, 120 s and the end")
with open(os.path.join(run, "summary.json")) as f:
    summary = json.load(f)
need(summary["inputs"][0]["name"] == "T1" and abs(summary["inputs"][0]["value"] - 900.15) < 1e-9, "inputs are in the summary")
with open(os.path.join(run, "script.lua")) as f:
    need(f.read() == aged, "the script is kept")
need(np.array_equal(np.load(os.path.join(run, "inputs", "start.npy")), start), "the array it read is kept")

# Everything a script reads is kept under a name of its own, whether it is read before or after the folder is made.
os.makedirs(os.path.join(folder, "data"))
np.save(os.path.join(folder, "data", "a.npy"), np.full((8, 8), 0.5))
np.save(os.path.join(folder, "data_a.npy"), np.full((8, 8), 0.25))
script("helper", "return { rate = 1 }\n")
reads = script("reads", """
local rate = require("helper").rate
local g = grid{ cells = {8, 8}, spacing = 1 }
local c = g:field("c", from_array{ file = "data/a.npy" } + from_array{ file = "data/a.npy" })
local m = model{}
m:evolve(c, -rate*c)
m:run{ duration = 1 }
set(c, from_array{ file = "data_a.npy" })
""")
for again in ([], ["--replace"]):
    program("run", reads, *again)
    kept = os.path.join(folder, "reads.run", "inputs")
    need(sorted(os.listdir(kept)) == ["data_a.npy", "data_a_2.npy", "helper.lua"], f"inputs/ holds {os.listdir(kept)}")
for copy, original in (("data_a.npy", "data/a.npy"), ("data_a_2.npy", "data_a.npy"), ("helper.lua", "helper.lua")):
    with open(os.path.join(kept, copy), "rb") as f, open(os.path.join(folder, original), "rb") as g:
        need(f.read() == g.read(), f"{copy} is {original}")
with open(os.path.join(folder, "reads.run", "summary.json")) as f:
    need({s["file"]: s["copy"] for s in json.load(f)["sources"]} == {"helper.lua": "inputs/helper.lua", "data/a.npy": "inputs/data_a.npy",
         "data_a.npy": "inputs/data_a_2.npy"}, "the summary tells which copy is which")


def page():
    with open(os.path.join(run, "report.html")) as f:
        return f.read()


first = page()
need(all(w in first for w in ("first temperature", "mean of c", "ramp 1", "Numerically converged")), "the report tells inputs, columns and stages")
os.remove(os.path.join(run, "report.html"))
program("report", run)
need(page() == first, "the report made again is the same page")

# --- ways out: each is refused with its line --------------------------------------------------------------------------------------------
attempts = """io.open("/etc/passwd")|io.popen("true")|os.execute("true")|os.getenv("HOME")|os.remove("start.npy")|load("return 1")|loadfile("x")|dofile("x")|debug.sethook()
package.loadlib("x", "y")|package.path|require("/etc/passwd")|require("..")|require("../x")|require("..%2fx")|require("a/b")|require("core")|require("sandbox")|require("io")|require("debug")
require("")|require(1)|collectgarbage()|getmetatable("").__index|_G.io.open("x")|_ENV.os.time()|coroutine.running().x|string.format.x
from_array{ file = "/etc/passwd" }|from_array{ file = "../start.npy" }|from_array{ file = "sub/../../x.npy" }|from_image{ file = "/dev/zero" }|from_array{ file = "link.npy" }"""
os.symlink("/etc/passwd", os.path.join(folder, "link.npy"))
for attempt in attempts.replace("\n", "|").split("|"):
    text = f'grid{{ cells = 4, spacing = 1 }}:field("c", {attempt})' if attempt.startswith("from_") else "local x = " + attempt
    done = subprocess.run([mottle, "run", script("out", text), "--quiet"], capture_output=True, text=True, cwd=folder, timeout=20)
    files = (2, 4) if attempt.startswith("from_") else (2,)  # 4: the file could not be read
    need(done.returncode in files and "out.lua:1: " in done.stderr and "root:" not in done.stderr, f"{attempt}: exit code {done.returncode}: {done.stderr}")
need(not os.path.exists(os.path.join(folder, "out.run")), "a refused script leaves no folder")
done = subprocess.run([mottle, "run", script("bytecode", ""), "--quiet"], capture_output=True, text=True, cwd=folder)
with open(os.path.join(folder, "bytecode.lua"), "wb") as f:
    f.write(b"\x1bLua\x54\x00\x19\x93\r\n\x1a\n" + bytes(40))
need("binary" in program("run", "bytecode.lua", code=2)[1], "a script of bytecode is refused by name")

# --- SIGTERM in a schedule: whole lines, whole files, a report that says so ------------------------------------------------------------------
p = subprocess.Popen([mottle, "run", script("night", aged.replace("{21, 15}", "{63, 45}").replace('from_array{ file = "start.npy" }', "0.5 + 0.1*noise.normal{ seed = 1 }")
                     .replace("40*unit.s }", "4e6*unit.s }").replace("m:save{ c, every = 60*unit.s }", "m:save{ c, every = 1*unit.s }")), "--quiet"],
                     cwd=folder, stderr=subprocess.PIPE, text=True)
time.sleep(1.5)
p.send_signal(signal.SIGTERM)
began = time.time()
err = p.communicate(timeout=20)[1]
need(p.returncode == 130 and "stopped" in err and time.time() - began < 3, f"SIGTERM: exit code {p.returncode} after {time.time() - began:.1f} s: {err}")
rows = ledger("night.run")
need(len(rows) > 2 and len({len(r) for r in rows}) == 1, "whole lines in the ledger of a stopped run")
for where, _, files in os.walk(os.path.join(folder, "night.run")):
    for file in files:
        need(file == ".mottle" or file.endswith((".csv", ".png", ".npy", ".html", ".json", ".lua")), f"{file} is left half-written")
        need(not file.endswith(".npy") or np.load(os.path.join(where, file)).shape[-2:] == (45, 63), file + " is whole")
with open(os.path.join(folder, "night.run", "report.html")) as f:
    need("did not reach its end" in f.read(), "the report of a stopped run says so")
print("the program holds")
