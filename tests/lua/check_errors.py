"""Bad scripts and bad command lines: each ends with its exit code and a message that says the line, what was expected, what was
found; nothing is left half-written. Scripts cannot leave their environment. A stop from outside is obeyed everywhere."""
import csv
import os
import resource
import signal
import subprocess
import sys
import tempfile
import time

mottle = os.environ["MOTTLE"]
folder = tempfile.mkdtemp(prefix="mottle-errors-")
box = 'local g = grid{ cells = {16, 16}, spacing = 1 }\nlocal c = g:field("c", 0.5 + 0.01*noise.uniform{ seed = 1 })\n'
model = box + "local m = model{ energy = c^2*(1 - c)^2 + 0.5*gradsq(c) }\n"
full = model + "m:conserve(c, { mobility = 1 })\n"
failures = []


def start(text, *arguments, out="out", command="run"):
    path = os.path.join(folder, "script.lua")
    with open(path, "w") as f:
        f.write(text)
    line = [mottle, command, path, *arguments]
    if command == "run":
        line += ["--into", os.path.join(folder, out), "--replace", "--quiet"]
    return subprocess.Popen(line, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)


def check(name, got, text, code, fragments):
    missing = [f for f in fragments if f not in text]
    left = [f for _, _, files in os.walk(folder) for f in files if f.endswith(".part")]
    if got != code or missing or left:
        failures.append(f"{name}: exit code {got} (expected {code}), missing {missing}, left {left}\n    {text.strip()}")


def bad(name, text, code, *fragments, arguments=()):
    p = start(text, *arguments)
    out, err = p.communicate(timeout=60)
    check(name, p.returncode, err, code, fragments)


bad("unknown option", full + "m:run{ durration = 10 }", 2, "script.lua:5:", "durration", "did you mean 'duration'")
bad("wrong type", "local g = grid{ cells = {16, 16}, spacing = \"fine\" }", 2, "script.lua:1:", "spacing", "fine")
bad("another grid", full.replace("m:conserve", 'local h = grid{ cells = {8, 8}, spacing = 1 }\nlocal d = h:field("d", 0.1)\nm:conserve')
    + "m:evolve(d, laplacian(d))", 2, "script.lua:7:", "another grid")
bad("two grids in one energy", box + 'local h = grid{ cells = {8, 8}, spacing = 1 }\nlocal d = h:field("d", 0.1)\nlocal m = model{ energy = c^2 + d^2 }',
    2, "script.lua:5:", "different grids")
bad("missing mobility", model + "m:conserve(c, {})", 2, "script.lua:4:", "mobility", "missing")
bad("negative mobility", model + "m:conserve(c, { mobility = -1 })", 6, "script.lua:4:", "mobility", "-1")
bad("mobility negative in a cell", model + "m:conserve(c, { mobility = c - 0.5 })\nm:run{ duration = 1 }", 6, "script.lua:5:", "mobility", "cell (")
bad("outside the logarithm", 'local g = grid{ cells = {16}, spacing = 1 }\nlocal c = g:field("c", 0.1*cos(g.x))\nlocal m = model{ energy = c*log(c) + gradsq(c) }\n'
    "m:conserve(c, { mobility = 1 })\nm:run{ duration = 1 }", 6, "script.lua:5:", "logarithm", "cell (")
bad("zero cells", "local g = grid{ cells = {0, 16}, spacing = 1 }", 2, "script.lua:1:", "cells along x", "0")
bad("absurd cells", "local g = grid{ cells = {90000, 90000}, spacing = 1 }", 2, "script.lua:1:", "GB")
bad("syntax", "local g = grid{ cells = {16 }\nm:run{", 2, "script.lua:2")
bad("unknown name", "local g = grdi{ cells = {16}, spacing = 1 }", 2, "script.lua:1:", "'grdi' is not defined", "did you mean 'grid'")
bad("comparison", box + "local e = c < c + 1", 2, "script.lua:3:", "above(a, b)")
bad("input", 'local T2 = input("T2", 900)\n' + full + "m:run{ duration = 1 }", 2, "script.lua:1:", "T2=hot", "a number", arguments=["T2=hot"])
bad("unknown input", 'local T2 = input("T2", 900)\n' + full + "m:run{ duration = 1 }", 2, "T3", "did you mean 'T2'", arguments=["T3=900"])
bad("wall", 'local g = grid{ cells = {16}, spacing = 1, walls = "glass" }', 2, "script.lua:1:", "mirror", "glass")
bad("empty schedule", full + 'local T = param("T", 1)\nm:run(schedule{ T })', 2, "script.lua:6:", "no stages")
bad("energy without field", "local m = model{ energy = 3 }", 2, "script.lua:1:", "energy")
bad("nothing drives it", model.replace("c^2*(1 - c)^2 + 0.5*gradsq(c)", "c^2") + 'local d = g:field("d", 1)\nm:conserve(d, { mobility = 1 })', 2,
    "script.lua:5:", "does not occur")
bad("neither even nor odd", 'local g = grid{ cells = {16}, spacing = 1, walls = "mirror" }\nlocal c = g:field("c", 0.5)\nlocal m = model{}\nm:evolve(c, c*dx(c))\n'
    "m:run{ duration = 1 }", 2, "script.lua:5:", "mirror")
bad("missing file", 'local g = grid{ cells = {16}, spacing = 1 }\nlocal c = g:field("c", from_array{ file = "no.npy" })', 4, "script.lua:2:", "no.npy")
bad("error in a hook", full + "m:every(1, function() error('mine') end)\nm:run{ duration = 5 }", 2, "script.lua:5:", "mine")
bad("a run from a hook", full + "m:every(1, function() m:run{ duration = 1 } end)\nm:run{ duration = 5 }", 2, "script.lua:5:", "hook")
bad("an error after one that was caught", model + "pcall(m.conserve, m, c, { mobility = -1 })\nerror('mine')", 2, "script.lua:5:", "mine")
bad("Lua's own error", "local x = nil + 1", 2, "script.lua:1:", "nil")

# Each: what stands in line 5 after the model, and what the message has to say beside the line.
for text, *words in (
    ("m:run{ duration = 1, accuracy = -1 }", "'accuracy'", "positive number", "-1"), ("m:run{ duration = 0/0 }", "'duration'", "nan"),
    ("m:run{ duration = 1/0 }", "'duration'", "inf"), ("m:run{}", "either duration or schedule"), ("m.run{ duration = 1 }", "with a colon"),
    ("m:runn{ duration = 1 }", "'runn'", "did you mean 'run'"), ("m:record{ c }", "field", "mean(...)"), ("m:record{ every = 1 }", "no columns"),
    ("m:picture{ c, map = 'rainbow' }\nm:run{ duration = 1 }", "'rainbow'", "slate"), ("g:field('c', 1)", "of that name already"), ("g:field('d')", "its start is missing"),
    ("m:conserve(c, { mobility = 1 })", "said already"), ("m:every(-1, print)", "positive time"), ("m:at(1)", "function", "nil"),
    ("m:when(true, print)", "true or false"), ("m.accuracy = 1", "'accuracy' cannot be set"), ("m:run(schedule{ param('T', 1), quench{ to = 3 } })", "take no time", "hold{...}"),
    ("m:run(schedule{ hold{ 1 } })", "expected the param"), ("m:run(schedule{ param('T', 1), 3 })", "entry 2", "number"), ("m:run(schedule{ param('T', 1), hold{ 0 } })", "duration"),
    ("ramp{ to = 1 }", "either rate or duration"), ("place{ radius = 1, value = 1 }", "one of fraction, count or at"), ("noise.uniform{}", "'seed' is missing"),
    ("set(c, 'x')", "starting state", "string"), ("local T = unit.kelvin", "kelvin"), ("require 'thermos'", "no module 'thermos'"), ("input('a b', 1)", "letters, digits and _"),
    ("grid{ cells = {4, 4, 4, 4}, spacing = 1 }", "1, 2 or 3 entries", "4"), ("grid{ cells = 16.5, spacing = 1 }", "whole number", "16.5"), ("grid{ cells = 16, spacing = 0 }", "positive", "0"),
    ("grid{ cells = {4, 4}, spacing = {1} }", "axis y"), ("grid{ cells = 1e300, spacing = 1 }", "GB"), ("grid{ cell = 4, spacing = 1 }", "'cell'", "did you mean 'cells'"),
    ("noise.uniform{ seed = 1e300 }", "whole number", "1e+300"), ("noise.normal{ seed = 1/0 }", "whole number", "inf"), ("m:picture{ c, scale = 1e12 }", "'scale'", "from 1 to 1e9"),
    ("place{ radius = 1, value = 1, count = 1/0 }", "'count'", "inf"), ("place{ radius = 1, value = 1, count = -3 }", "'count'", "-3"),
    ("set(c, place{ radius = 1, value = 1, at = {3} })", "list of 2 coordinates"), ("set(c, place{ radius = 1, value = 1, at = {{'a', 1}} })", "list of 2 coordinates"),
    ("mean(c):as('a\\nb')", "one line"), ("hold{ 1, name = 'a\\nb' }", "'name'", "one line"), ("g:field(('n'):rep(400), 0)", "1 to 100 bytes"), ("local e = (2*c):as('x')", "mean(c):as"),
    ("m:run{ duration = 1 } m:every(1e-17, print) m:run{ duration = 1 }", "too short"),
    ("pairs{ [{}] = 1, [{}] = 2 }", "no order", "a table"), ("pairs{ [c] = 1, [print] = 2, [tostring] = 3 }", "no order"),
    ("local function f() return 1 + f() end f()", "stack overflow"), ("local s = ('x'):rep(1e12)", "too large"),
):
    bad(text, full + text, 2, "script.lua:%d:" % (5 + text.count("\n")), *words)
bad("a start from another grid", full + "local h = grid{ cells = {16, 16}, spacing = 1 }\nh:field('d', 0.5*c)", 2, "script.lua:6:", "field 'd'", "'c'", "another grid")
bad("compiled Lua", "\x1bLua", 2, "script.lua", "compiled")
p = start("\ufeffprint(next({}), 'mark')")
out, err = p.communicate(timeout=60)
check("a byte order mark", p.returncode, out, 0, ["nil\tmark"])
p = start("#!/usr/bin/env -S mottle run\nfor k in pairs(unit) do print(k) end\nprint(T)")
check("the first line names a program, and a short name is like no other", p.wait(), p.stderr.read() + "end", 2, ["script.lua:3: 'T' is not defined\nend"])
bad("an error that is no text", full + "error{ code = 3 }", 2, "a table", "give it a text")
bad("an error that cannot be told", full + "error(setmetatable({}, { __tostring = function() error('x') end }))", 2, "a table")
# what only the end of a long run would have shown
bad("a formula to save", 'local g = grid{ cells = {16}, spacing = 1, walls = "mirror" }\nlocal c = g:field("c", 0.5)\nlocal m = model{}\nm:evolve(c, -c)\nm:save{ dx(c + dx(c)) }\n'
    "m:at(0.5, function() error('too late') end)\nm:run{ duration = 1 }", 2, "script.lua:7:", "mirror")
for text, given, *words in (("input('n', 1)", "n=", "a number"), ("input('n', 1)", "n=3 parsecs", "parsecs"), ("input('b', true)", "b=maybe", "true or false")):
    bad(given, text, 2, "script.lua:1:", given, *words, arguments=[given])
bad("a word after the script", "input('n', 1)", 2, "name=value", "'n'", arguments=["n"])

# A script that only grows: no memory is left for it, and nothing else suffers.
with open(mottle, "rb") as f:
    sanitized = b"__asan_init" in f.read()  # reserves more address space than any limit leaves
if not sanitized:
    with open(os.path.join(folder, "script.lua"), "w") as f:
        f.write(full + "m:run{ duration = 0.1 }\nlocal s = 'x'\nwhile true do s = s .. s end")
    p = subprocess.run([mottle, "run", os.path.join(folder, "script.lua"), "--into", os.path.join(folder, "grown"), "--replace", "--quiet"], capture_output=True, text=True,
                       timeout=60, preexec_fn=lambda: resource.setrlimit(resource.RLIMIT_AS, (700 << 20, 700 << 20)))
    check("a script that only grows", p.returncode, p.stderr, 5, ["no memory is left", "keep less"])
    if "no memory is left" not in open(os.path.join(folder, "grown", "report.html")).read():
        failures.append("the report of a script that ran out of memory does not say so")

# --- ways out -------------------------------------------------------------------------------------------------------------------
for attempt in ('io.open("/etc/passwd")', 'os.execute("true")', 'os.remove("x")', 'load("return 1")', 'loadstring("return 1")', 'dofile("/etc/passwd")',
                'loadfile("/etc/passwd")', 'string.dump(print)', '(""):dump(print)', 'setmetatable({}, { __gc = function() while true do end end })', 'debug.getregistry()', 'package.loadlib("x", "y")', 'require("/etc/passwd")',
                'require("../secret")', 'require("io")', 'require("core")', 'collectgarbage("stop")', 'getmetatable("").__index.dump(print)',
                '_G.io.open("x")', 'getmetatable(_G).__index.io.open("x")', 'grid{ cells = {4}, spacing = 1 }:field("c", from_array{ file = "/etc/passwd" })',
                'grid{ cells = {4}, spacing = 1 }:field("c", from_array{ file = "../x.npy" })'):
    p = start("local x = " + attempt)
    out, err = p.communicate(timeout=60)
    if p.returncode not in (2, 4) or "script.lua:1:" not in err and "secret" not in err:
        failures.append(f"way out: {attempt}: exit code {p.returncode}: {err.strip()}")

# --- the command line --------------------------------------------------------------------------------------------------------------


def program(name, code, fragments, *arguments):
    done = subprocess.run([mottle, *arguments], capture_output=True, text=True, cwd=folder)
    check(name, done.returncode, done.stderr if code else done.stdout, code, fragments)


good = os.path.join(folder, "good.lua")
with open(good, "w") as f:
    f.write(full + "m:run{ duration = 1 }")
taken = os.path.join(folder, "taken")
program("run", 0, [], "run", good, "--into", taken, "--quiet")
before = sorted(os.stat(os.path.join(taken, f)).st_mtime_ns for f in os.listdir(taken))
program("folder exists", 3, ["taken"], "run", good, "--into", taken, "--quiet")
if before != sorted(os.stat(os.path.join(taken, f)).st_mtime_ns for f in os.listdir(taken)):
    failures.append("a refused run touched the folder")
foreign = os.path.join(folder, "foreign")
os.mkdir(foreign)
open(os.path.join(foreign, "thesis.txt"), "w").close()
program("foreign folder", 3, ["foreign"], "run", good, "--into", foreign, "--replace", "--quiet")
if not os.path.exists(os.path.join(foreign, "thesis.txt")):
    failures.append("--replace removed a file that no run made")
program("below a file", 4, ["good.lua"], "run", good, "--into", good + "/x", "--quiet")
program("unwritable", 4, ["/proc"], "run", good, "--into", "/proc/mottle", "--quiet")
program("missing script", 2, ["no.lua"], "run", os.path.join(folder, "no.lua"))
program("unknown command", 2, ["did you mean 'run'"], "rum", good)
program("unknown option", 2, ["--threds", "--threads"], "run", good, "--threds", "2")
program("threads", 2, ["--threads", "many"], "run", good, "--threads", "many")
program("flag with a value", 2, ["--replace takes no value"], "run", good, "--into", taken, "--replace=no")
program("version of a command", 0, ["mottle 0."], "run", "--version")
program("help", 0, ["Exit codes", "mottle plan"], "--help")
program("version", 0, ["mottle 0."], "--version")
program("report", 0, ["report.html"], "report", taken)
program("no run folder", 2, ["summary.json"], "report", foreign)

# --- stopping ---------------------------------------------------------------------------------------------------------------------
for name, text in (("loop", "while true do end"), ("loop in pcall", "while true do pcall(function() while true do end end) end"),
                   ("loop in a coroutine", "local f = coroutine.wrap(function() while true do end end)\nwhile true do pcall(f) end"),
                   ("long run", full + "m:record{ every = 1, m:energy() }\nm:run{ duration = 1e9, step = 1e-3 }")):
    p = start(text, out="stopped")
    time.sleep(1.0)
    p.send_signal(signal.SIGINT)
    began = time.time()
    try:
        out, err = p.communicate(timeout=10)
    except subprocess.TimeoutExpired:
        p.kill()
        failures.append(f"{name}: does not stop")
        continue
    check(name, p.returncode, err, 130, ["stopped"])
    if time.time() - began > 3:
        failures.append(f"{name}: took {time.time() - began:.1f} s to stop")
# What no hook reaches, here a pattern of O(n^4), ends with the second signal.
p = start('("a"):rep(200000):match(".-.-.-.-b")')
for _ in range(2):
    time.sleep(0.5)
    p.send_signal(signal.SIGINT)
try:
    p.communicate(timeout=10)
except subprocess.TimeoutExpired:
    p.kill()
if p.returncode != 130:
    failures.append(f"a second signal: exit code {p.returncode}")
with open(os.path.join(folder, "stopped", "ledger.csv"), newline="") as f:
    rows = list(csv.reader(f))
if len({len(r) for r in rows}) != 1:
    failures.append("the ledger of a stopped run has a broken line")
if "did not reach its end" not in open(os.path.join(folder, "stopped", "report.html")).read():
    failures.append("the report of a stopped run does not say so")

print("\n".join(failures) or "errors are told as they should be")
sys.exit(bool(failures))
