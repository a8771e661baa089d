"""Bundled models are scripts: short, self-contained, usable unchanged as a copy under another name, embedded whole. A file beside
the script comes first and is kept with the run; errors name the line of the script that called."""
import glob
import os
import re
import shutil
import subprocess
import sys
import tempfile

mottle, source = os.environ["MOTTLE"], os.environ["SOURCE"]
folder = tempfile.mkdtemp(prefix="mottle-modules-")
failures = []


def need(condition, what):
    if not condition:
        failures.append(what)


def run(text, *arguments, name="script.lua"):
    with open(os.path.join(folder, name), "w") as f:
        f.write(text)
    return subprocess.run([mottle, "run", os.path.join(folder, name), *arguments, "--into", os.path.join(folder, "out"), "--replace", "--quiet"],
                          capture_output=True, text=True, timeout=60)


paths = sorted(glob.glob(f"{source}/lua/models/*.lua"))
names = [os.path.basename(p)[:-4] for p in paths]
need(len(names) >= 1, "there are models")
with open(f"{source}/README.md") as f:
    readme = f.read()
for name, path in zip(names, paths):
    with open(path) as f:
        text = f.read()
    need(text.count("\n") < 60, f"{name}: has {text.count(chr(10))} lines, more than fit one screen")
    need(set(re.findall(r'require\(?\s*"(\w+)"', text.split("local M = {}")[1])) <= {"thermo"}, f"{name}: needs something of the program's own")
    need(f"`{name}`" in readme, f"{name}: README does not list it")
    # the same functions from the bundled module and from its copy under another name
    shutil.copy(path, os.path.join(folder, f"my_{name}.lua"))
    done = run(f'for _, name in ipairs{{ "{name}", "my_{name}" }} do\n  for k, v in pairs(require(name)) do print(name:gsub("^my_", ""), k, type(v)) end\nend')
    lines = done.stdout.splitlines()
    need(done.returncode == 0 and lines and lines[:len(lines) // 2] == lines[len(lines) // 2:], f"{name}: a copy differs: {done.stdout} {done.stderr}")
    # what cannot be an option is refused at the script's line, by whatever takes options
    for function in re.findall(r"^function M\.(\w+)\(t\)", text, re.M):
        done = run(f'local x = require "{name}"\nx.{function}{{ colour = 3 }}')
        need(done.returncode == 2 and "script.lua:2:" in done.stderr and name in done.stderr and "'colour'" in done.stderr,
             f"{name}.{function}: {done.returncode} {done.stderr}")

done = run('require "doublewell"')
need(done.returncode == 2 and all(n in done.stderr for n in names) and "did you mean 'double_well'" in done.stderr, f"unknown module: {done.stderr}")

# precedence
with open(os.path.join(folder, "double_well.lua"), "w") as f:
    f.write('return { energy = function(t) return t.c^2 end }')
model = '''local well = require "double_well"
local g = grid{ cells = {16}, spacing = 1 }
local c = g:field("c", 0.5)
local m = model{ energy = well.energy{ c = c } }
print(well.energy{ c = c })
m:relax(c, { rate = 1 })
m:run{ duration = 1 }'''
done = run(model)
need(done.returncode == 0 and done.stdout == "c^2\n", f"a file beside the script comes first: {done.stdout} {done.stderr}")
need(os.path.exists(os.path.join(folder, "out", "inputs", "double_well.lua")), "the file is kept with the run")
done = run(model, name="double_well.lua")
need(done.returncode == 0 and "gradsq(c)" in done.stdout, f"a script is not its own module: {done.stdout} {done.stderr}")
need(not os.path.exists(os.path.join(folder, "out", "inputs", "double_well.lua")), "bundled models are not kept as inputs")

print("\n".join(failures) or f"{len(names)} models, as they should be")
sys.exit(bool(failures))
