"""What a run leaves can be read by others: the ledger as CSV with units, arrays as NumPy reads them, the summary as JSON, pictures as PNG,
the report as one well-formed page that fetches nothing. What a script reads from files beside it arrives where it should."""
import csv
import html.parser
import json
import os
import re
import resource
import struct
import subprocess
import sys
import tempfile
import zlib

import numpy

mottle = os.environ["MOTTLE"]
folder = tempfile.mkdtemp(prefix="mottle-folder-")


def need(condition, what):
    if not condition:
        sys.exit("FAILED: " + what)


def write_png(name, grey):
    """8-bit grey, top row first (PNG specification, W3C 2003)."""
    def chunk(kind, data):
        return struct.pack(">I", len(data)) + kind + data + struct.pack(">I", zlib.crc32(kind + data))
    height, width = grey.shape
    rows = b"".join(b"\0" + row.tobytes() for row in grey)
    with open(os.path.join(folder, name), "wb") as f:
        f.write(b"\x89PNG\r\n\x1a\n" + chunk(b"IHDR", struct.pack(">IIBBBBB", width, height, 8, 0, 0, 0, 0))
                + chunk(b"IDAT", zlib.compress(rows)) + chunk(b"IEND", b""))


def mottled(name, text, *arguments, command="run", code=0):
    path, out = os.path.join(folder, name + ".lua"), os.path.join(folder, name + ".run")
    with open(path, "w") as f:
        f.write(text)
    line = [mottle, command, path, *arguments] + (["--into", out, "--quiet"] if command == "run" else [])
    done = subprocess.run(line, capture_output=True, text=True)
    need(done.returncode == code, f"{name}: exit code {done.returncode}, expected {code}: {done.stderr}")
    return out, done.stdout, done.stderr


def fields(out, name):
    return numpy.load(os.path.join(out, "fields", name))


# --- files that a script reads ----------------------------------------------------------------------------------------------------
# Odd numbers of cells throughout: on even ones a run takes the shortest wave out of what it is given.
grey = (numpy.arange(13 * 21) * 7 % 256).astype(numpy.uint8).reshape(13, 21)
write_png("map.png", grey)
numpy.save(os.path.join(folder, "start.npy"), 0.1 + 0.001 * numpy.arange(5 * 7).reshape(1, 5, 7))
still = "local m = model{}\nm:evolve(c, 0*c)\nm:save{ c }\nm:run{ duration = 1, step = 1 }"
picture = 'local g = grid{ cells = {%d, %d}, spacing = %g }\nlocal c = g:field("c", from_image{ file = "map.png", black = -1, white = 1%s })\n' + still
up = grey[::-1] / 255 * 2 - 1  # origin lower left
out, _, _ = mottled("same", picture % (21, 13, 0.5, ""))
need(numpy.allclose(fields(out, "c-0000.npy").reshape(13, 21), up, atol=1e-14), "a picture cell by cell")
out, _, _ = mottled("stretched", picture % (63, 39, 0.5, ""))
need(numpy.allclose(fields(out, "c-0000.npy").reshape(39, 63), up.repeat(3, 0).repeat(3, 1), atol=1e-14), "a stretched picture")
out, _, _ = mottled("pixels", picture % (9, 5, 1, ", pixel = 2"))
need(numpy.allclose(fields(out, "c-0000.npy").reshape(5, 9), up.repeat(2, 0).repeat(2, 1)[:5, :9], atol=1e-14), "a picture by its pixels' size")
_, _, err = mottled("small", picture % (21, 13, 0.5, ", pixel = 0.4"), code=2)
need("small.lua:2:" in err and "8.4 x 5.2" in err and "10.5 x 6.5" in err, "a picture smaller than the box: " + err)

out, _, _ = mottled("array", 'local g = grid{ cells = {7, 5}, spacing = 1 }\nlocal c = g:field("c", from_array{ file = "start.npy" } * 2 + 1)\n' + still)
need(numpy.allclose(fields(out, "c-0000.npy").reshape(5, 7), 1.2 + 0.002 * numpy.arange(35).reshape(5, 7), atol=1e-15), "an array, scaled")

_, _, err = mottled("shape", 'local g = grid{ cells = {5, 3}, spacing = 1 }\nlocal c = g:field("c", from_array{ file = "start.npy" })', code=2)
need("shape.lua:2:" in err and "(3, 5)" in err and "(5, 7)" in err, "an array of another shape: " + err)

# --- what a run leaves --------------------------------------------------------------------------------------------------------------
cases = """
for _, mobility in ipairs{ 1, 2 } do
  local g = grid{ cells = {24, 16}, spacing = 1*unit.nm }
  local c = g:field("c", 0.5 + 0.01*noise.uniform{ seed = 5 + mobility })
  local m = model{ energy = 1e8*(c^2*(1 - c)^2 + 0.5e-18*gradsq(c)) }
  m:conserve(c, { mobility = mobility*1e-27 })
  m:record{ m:energy(), mean(c):as('mean, of "c" & <others>'), interface(c, { level = 0.5 }):as("interface") }
  m:picture{ c, every = 20 }
  m:save{ c, every = 20 }
  m:run{ duration = 40 }
end
"""
out, _, _ = mottled("cases", cases + 'local n = input("n", 1, "a number & more")\nassert(n == 1)')
for kind, end in (("pictures", "png"), ("fields", "npy")):
    need(sorted(os.listdir(os.path.join(out, kind))) == [f"c-{i:04d}.{end}" for i in range(6)], kind + " of two models are kept apart")
need(abs(fields(out, "c-0000.npy") - fields(out, "c-0003.npy")).max() > 1e-3, "the second model has its own start")
for i in range(6):
    with open(os.path.join(out, "pictures", f"c-{i:04d}.png"), "rb") as f:
        need(f.read(8) == b"\x89PNG\r\n\x1a\n", "pictures are PNG")
for ledger in ("ledger.csv", "tables/ledger-2.csv"):
    with open(os.path.join(out, ledger), newline="") as f:
        rows = list(csv.reader(f))
    need(rows[0] == ["time [s]", "stage", "step [s]", "energy [J/m]", 'mean, of "c" & <others>', "interface [nm]"], f"{ledger}: {rows[0]}")
    need(20 <= len(rows) <= 102 and all(len(r) == 6 for r in rows) and float(rows[-1][0]) == 40, ledger + " has its rows")
with open(os.path.join(out, "summary.json")) as f:
    summary = json.load(f)
need(summary["seeds"] == [6, 7] and summary["inputs"][0]["meaning"] == "a number & more" and summary["grid"]["cells"] == [24, 16], "summary.json")
with open(os.path.join(out, "script.lua")) as f:
    need(cases in f.read(), "the script is kept")


class Page(html.parser.HTMLParser):
    """Every element that is opened is closed in order; nothing is fetched."""
    empty = {"meta", "img", "br", "hr", "path", "rect"}

    def __init__(self):
        super().__init__()
        self.open = []

    def handle_starttag(self, tag, attributes):
        for name, value in attributes:
            need(name not in ("href", "src") or value.startswith("data:"), f"the report fetches {value}")
        need(tag not in ("script", "link", "iframe"), "the report has a " + tag)
        if tag not in self.empty:
            self.open.append(tag)

    def handle_endtag(self, tag):
        if tag not in self.empty:
            need(self.open and self.open.pop() == tag, f"the report closes <{tag}> out of order")


with open(os.path.join(out, "report.html")) as f:
    first = f.read()
page = Page()
page.feed(first)
need(not page.open and not re.search(r"https?://|url\(", first), "the report is closed and self-contained")
for words in ("Numerically converged:", "Checked against measurements:", "witness specimens", "mean, of &quot;c&quot; &amp; &lt;others&gt;", "2-D run"):
    need(words in first, f"the report says '{words}'")
subprocess.run([mottle, "report", out], check=True, capture_output=True)
with open(os.path.join(out, "report.html")) as f:
    need(f.read() == first, "the report made again is the same")

# --- plan leaves the script at its first run, whatever surrounds it --------------------------------------------------------------------
_, text, _ = mottled("guarded", cases.replace("  m:run{ duration = 40 }", "  for i = 1, 3 do pcall(function() m:run{ duration = 40 } end) end"), command="plan")
need(text.count("Waves about the homogeneous state") == 1, "plan unwinds through pcall")
need(not os.path.exists("guarded.run"), "plan leaves nothing")
# --- one model after another: their arrays, 9 MB each here, do not pile up ---------------------------------------------------------------
mottled("many", """
for i = 1, 25 do
  local g = grid{ cells = {384, 384}, spacing = 1 }
  local c = g:field("c", 0.5 + 0.01*noise.uniform{ seed = i })
  local m = model{ energy = c^2*(1 - c)^2 + 0.5*gradsq(c) }
  m:conserve(c, { mobility = 1 })
  m:record{ mean(c^2), every = 1 }
  m:picture{ c, every = 9 }
  m:run{ duration = 1, step = 1 }
end
""", "--threads", "1")
peak = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 1024  # MB, of the largest child
with open(mottle, "rb") as f:
    sanitized = b"__asan_init" in f.read()  # its allocator keeps freed blocks in quarantine
need(peak < 150 or sanitized, f"25 models one after another took {peak:.0f} MB")

print("folders can be read by others")
