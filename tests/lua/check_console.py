"""The console through pipes and through a pseudo-terminal: expressions, statements, lines that go on, errors with their line, exit
codes, that it writes no folder unless asked; pictures in plain text, 256 colours and 24 bits, with our maps' colours and the box's
proportions; Ctrl-C in a run, in a loop and at the prompt, Ctrl-D, SIGTERM, editing, completion, the terminal's state afterwards."""
import codecs
import fcntl
import os
import pty
import re
import select
import signal
import struct
import subprocess
import sys
import tempfile
import termios
import time

import numpy as np
from skimage.io import imread

mottle = os.environ["MOTTLE"]
folder = tempfile.mkdtemp(prefix="mottle-console-")
# What readline writes around pasted text is of no interest here.
keys = tempfile.NamedTemporaryFile("w", prefix="mottle-keys-")
keys.write("set enable-bracketed-paste off\n")
keys.flush()
plain_environment = {k: v for k, v in os.environ.items() if k not in ("NO_COLOR", "COLORTERM", "TERM", "INPUTRC")} | {"HOME": folder, "INPUTRC": keys.name}


def need(condition, what):
    if not condition:
        sys.exit("FAILED: " + what)


def piped(text, *arguments, code=0):
    done = subprocess.run([mottle, "console", *arguments], input=text, capture_output=True, text=True, cwd=folder, timeout=60, env=plain_environment)
    need(done.returncode == code, f"{text!r}: exit code {done.returncode}, expected {code}: {done.stdout}{done.stderr}")
    return done.stdout, done.stderr


shortest = """g = grid{ cells = {32, 32}, spacing = 1 }
c = g:field("c", 0.5 + 0.01*noise.uniform{ seed = 7 })
m = model{ energy = c^2*(1 - c)^2 + 0.5*gradsq(c) }
m:conserve(c, { mobility = 1 })
"""

# --- a pipe: values, statements, lines that go on ---------------------------------------------------------------------------------
out, err = piped("""1 + 1
= 2^0.5
"text"
nil
x = 3
x, x*2

-- a comment
for i = 1, 2 do
  print("i", i)
end
function f(a)
  return a
     + 1
end
f(
41
)
f(1) f(2)
y = [[two
lines]]
y
{ 1, "a", b = { c = true } }
return 7
quit()
print("never")
""")
need(out.splitlines() == ["2", "1.4142135623731", "text", "nil", "3", "6", "i\t1", "i\t2", "42", "two", "lines",
                          '{ 1, "a", b = { c = true } }', "7"] and not err, f"values, statements, several lines: {out}{err}")
need(piped("") == ("", ""), "nothing in, nothing out")
need(piped("\ufeff1") == ("1\n", ""), "a byte order mark and a last line without its end")
need("mottle console" in piped("", "--help")[0], "console is in --help")

out, err = piped(shortest + """g
c
m
c*2 + 1
m:potential(c)
mean(c)
wavelength(c)
T = param("T", 900)
T
2*T
""")
for words in ("grid of 32 x 32 cells", "c   smallest 0.49", "model that moves c, time 0", "1 + 2*c", "2*c - 6*c^2 + 4*c^3 - laplacian(c)", "mean(c) = 0.49",
              "wavelength(c) has no value now", "T = 900\n", "2*T = 1800\n"):
    need(words in out, f"{words!r} is said: {out}")

# --- errors: the first one ends a pipe with its code and its line -----------------------------------------------------------------------
for text, code, words in (
    ("x = 1\nprint(y)\nprint('never')", 2, "mottle: console:2: 'y' is not defined"),
    ("\n\nx = 1 +* 2\nprint('never')", 2, "console:3: unexpected symbol near '*'"),
    ("x = 'abc\nprint('never')\n", 2, "console:1: unfinished string"),
    ("for i = 1, 3 do\nprint('never')\n", 2, "the input ends in the middle of what began on line 1"),
    ("= = 3\nprint('never')", 2, "console:1: unexpected symbol"),
    ("local k = 5\nlocal function h() end\nk\nprint('never')", 2, "make it without `local`"),
    ("function f()\n  return nothing_here\nend\nx = 1\nf()\nprint('never')", 2, "console:2: 'nothing_here' is not defined"),
    ("error('mine', 0)\nprint('never')", 2, "mottle: mine"),
    ("error({})\nprint('never')", 2, "error(...) of a table"),
    ("g = grid{ cells = 8, spacing = 1 }\nc = g:field('c', from_array{ file = 'none.npy' })\nprint('never')", 4, "none.npy"),
    ("io.open('x')\nprint('never')", 2, "'io' is not defined"),
    ("plan(3)", 2, "expected a model"), ("show(3, 4)", 2, "show: expected a field or a formula, found number"),
    ("show{ lo = 1 }", 2, "did you mean 'low'?"), ("ledger(model{})", 2, "nothing moves yet"),
    (shortest + "ledger(m)", 2, "nothing was recorded yet"), (shortest + "show{ c, map = 'tidy' }", 2, "tide"),
    (shortest + "show{ c, low = 1, high = 0 }", 2, "is above high"), (shortest + "show{ c, width = 1001 }", 2, "at most 1000"),
):
    out, err = piped(text, code=code)
    need(words in err and "never" not in out and "Traceback" not in err and "traceback" not in err, f"{text!r}: {err}")
need(piped("pcall(error, 'x')\nprint('on')\nquit()", code=0)[0] == "false\tx\non\n".replace("\t", "\n"), "a caught error ends nothing")
need("takes no script" in subprocess.run([mottle, "console", "x.lua"], capture_output=True, text=True).stderr, "a script is refused")

# --- runs: one line each, from the present time on, no folder -----------------------------------------------------------------------------
out, err = piped(shortest + "plan(m)\nm:run{ duration = 100 }\nm:run{ duration = 50 }\nm.time\nledger(m)\nset(c, 0.3)\nm:run{ duration = 1 }\nmean(c)\n")
need("Fastest wavelength 8.886" in out and "one step takes" not in out, f"plan(m): {out}")
need(re.search(r"^time 100 after \d+ steps in .*; energy ", out, re.M) and re.search(r"^time 150 after \d+ steps", out, re.M), f"summaries: {out}")
need("\n150\n" in out and "\nmean(c) = 0.3\n" in out, f"the time goes on, new values are taken: {out}")
rows = [line.split() for line in out[out.index("wavelength(c)\n"):].splitlines()[1:17]]
need(re.search(r"^\(16 of 1\d\d rows\)$", out, re.M) and rows[0][0] == "0" and rows[-1][0] == "150", f"the ledger: {out}")
quiet = piped(shortest + "m:run{ duration = 100 }\nm:run{ duration = 50 }\nm:energy()\n", "--quiet")
need(re.fullmatch(r"energy = \d+\.\d+\n", quiet[0]) and quiet[1] == "", f"--quiet: {quiet}")
for asked in ("m:picture{ c }", "m:save{ c, every = 1 }", "m:tabulate{ structure_factor(c), every = 1 }"):
    out, err = piped(shortest + asked + "\nm:run{ duration = 1 }\nm:run{ duration = 1 }")
    need(out.count("--into FOLDER") == 1, f"that {asked} writes nothing is told once: {out}")
# what plan does leaves the run as it is
again = piped(shortest + "plan(m)\nm:run{ duration = 100 }\nm:run{ duration = 50 }\nm:energy()\n", "--quiet")
need(again[0].endswith(quiet[0]), "plan(m) changes no bit of a run")
out, err = piped(shortest.replace("m:conserve", "e = g:field('e', 0)\nm = model{ energy = c^2*(1 - c)^2 + 0.5*gradsq(c) + e^2 }\nm:conserve") + "plan(m)")
need("do not move: e." in out, "plan(m) tells what it takes as still")
need(os.listdir(folder) == [], f"nothing was written: {os.listdir(folder)}")

ends = 'g = grid{ cells = {4, 8}, spacing = 1 }\nc = g:field("c", where(above(g.x, 2), 1, 0))\nm = model{ energy = c^2 }\nm:relax(c, { rate = 0 })\n'
out, err = piped(ends + "wrong = 1\nm:picture{ c, scale = 16 }\nm:run{ duration = 1 }\n", "--into", "kept.run")
run = os.path.join(folder, "kept.run")
need("run folder: kept.run" in out and sorted(os.listdir(run)) == [".mottle", "fields", "ledger.csv", "pictures", "report.html", "script.lua", "summary.json"],
     f"--into: {os.listdir(run)}: {out}")
with open(os.path.join(run, "script.lua")) as f:
    need(f.read() == ends + "wrong = 1\nm:picture{ c, scale = 16 }\nm:run{ duration = 1 }\n", "the lines are kept as the script")
need("exists" in piped(ends + "m:run{ duration = 1 }\n", "--into", "kept.run", code=3)[1], "a run folder that exists is kept")
piped(ends + "m:run{ duration = 1 }\n", "--into", "kept.run", "--replace")
picture = imread(os.path.join(run, "pictures", "c-0000.png"))[..., :3]

# --- pictures in plain text: known fields, proportions --------------------------------------------------------------------------------------
shades = " .:-=+*#%@"


def shown(text, start="", wide=()):
    return piped(start + text)[0].split("\n")[:-1]


lines = shown('g = grid{ cells = {10, 4}, spacing = 1 }\nc = g:field("c", g.x)\nshow{ c, width = 10 }\n')
need(lines[:2] == [shades, shades] and lines[2].startswith("c   smallest 0.5   largest 9.5   mean 5   time 0") and len(lines) == 3, f"shades: {lines}")
lines = shown('g = grid{ cells = {10, 4}, spacing = 1 }\nc = g:field("c", g.y)\nshow{ c, width = 10, low = 1, high = 3 }\n')
need(lines[:2] == ["@" * 10, ""] and lines[2].endswith("shown from 1 to 3"), f"y is upwards, limits hold: {lines}")
for cells, spacing, width, height in (((64, 64), "1", 64, 32), ((64, 16), "1", 64, 8), ((64, 16), "{1, 4}", 72, 36), ((16, 64), "1", 16, 32),
                                      ((200, 100), "1", 72, 18), ((3, 3), "1", 72, 36)):
    lines = shown(f'g = grid{{ cells = {{{cells[0]}, {cells[1]}}}, spacing = {spacing} }}\nc = g:field("c", 1)\nshow{{ c, low = 0 }}\n')[:-1]
    need(len(lines) == height and {len(x) for x in lines} == {width}, f"{cells} cells of {spacing}: {len(lines)} rows of {len(lines[0])}, expected {height} of {width}")
lines = shown('g = grid{ cells = {8, 8, 5}, spacing = 1 }\nc = g:field("c", g.z)\nshow{ c, low = 2, high = 2.5, width = 8 }\nshow{ c*c, low = 6.25, high = 9, width = 8 }\n')
need(lines[0] == "@" * 8 and "middle plane across z" in lines[4] and lines[5] == "" and lines[9].startswith("c^2   smallest 0.25   largest 20.25"), f"3-D: {lines}")
need(shown('g = grid{ cells = {4, 4}, spacing = 1 }\nc = g:field("c", 7)\nshow{ c, width = 4 }\n')[0] == "++++", "a field of one value")
lines = shown('g = grid{ cells = 8, spacing = 1 }\nc = g:field("c", g.x)\nshow{ c, width = 8 }\n')
need(len(lines) == 13 and [x.rstrip()[-1] for x in lines[:12]] == ["█"] * 12 and lines[11] == "▁" + "█" * 7 and lines[0] == " " * 7 + "█", f"a chart: {lines}")
lines = shown('g = grid{ cells = {4, 4}, spacing = 1 }\nc = g:field("c", g.x*1e300*1e300 - g.y*1e300*1e300)\nshow{ c, width = 4 }\n')
need(lines[0] == "????", f"a field of no numbers: {lines}")

# --- the terminal -------------------------------------------------------------------------------------------------------------------------------


class Terminal:
    def __init__(self, *arguments, rows=30, columns=60, **environment):
        self.seen, self.at = "", 0
        self.decoder = codecs.getincrementaldecoder("utf-8")()  # letters may come in parts
        self.pid, self.fd = pty.fork()
        if self.pid == 0:
            os.chdir(folder)
            os.execve(mottle, [mottle, "console", *arguments], plain_environment | {"TERM": "xterm-256color"} | environment)
        fcntl.ioctl(self.fd, termios.TIOCSWINSZ, struct.pack("HHHH", rows, columns, 0, 0))
        self.modes = termios.tcgetattr(self.fd)

    def send(self, text):
        os.write(self.fd, text.encode())

    def read(self, seconds):
        if not select.select([self.fd], [], [], seconds)[0]:
            return False
        try:
            more = os.read(self.fd, 65536)
        except OSError:  # the other side is closed
            more = b""
        self.seen += self.decoder.decode(more)
        return bool(more)

    def expect(self, text, seconds=30):
        """What came since the last expectation, up to this text."""
        until = time.time() + seconds
        while text not in self.seen[self.at:]:
            if time.time() > until or not (self.read(until - time.time())):
                sys.exit(f"FAILED: expected {text!r} after {self.seen[self.at:][-2000:]!r}, before {self.seen[:self.at][-300:]!r}")
        end = self.seen.index(text, self.at) + len(text)
        part, self.at = self.seen[self.at:end], end
        return part

    def line(self, text):
        self.send(text + "\r")
        return self.expect("mottle> ")

    def wait(self):
        until = time.time() + 30
        while True:
            self.read(0.02)
            pid, status = os.waitpid(self.pid, os.WNOHANG)
            if pid:
                return os.waitstatus_to_exitcode(status)
            need(time.time() < until, "the console ends: " + self.seen[-500:])

    def end(self, code):
        found = self.wait()
        os.close(self.fd)
        need(found == code, f"the console ended with exit code {found}, expected {code}: {self.seen[-500:]!r}")


t = Terminal()
need("help()" in t.expect("mottle> ") and "without `local`" in t.seen, "the greeting tells what has to be known")
t.send("x = 1 +\r")
t.expect("      > ")
t.send("2\r")
t.expect("mottle> ")
need("\r\n3\r\n" in t.line("x"), "a line that goes on")
need("console:4: 'nothing_here' is not defined" in t.line("nothing_here"), "an error is told with its line")
need("unexpected symbol" in t.line("x = = 3"), "another error")
need("\r\n4\r\n" in t.line("x + 1"), "and it goes on")
t.line("local k = 5")
need("make it without `local`" in t.line("k"), "why a local is gone")
need("\r\n{ 3, 5 }\r\n" in t.line("{ x, 4 }\x1b[D\x1b[D\x7f5"), "a line is edited")
need("\r\n{ 3, 5 }\r\n" in t.line("\x1b[A"), "the last line comes back")
need("a function" in t.line("wavele\t"), "names are completed")
need(max(len(x) for x in t.line("help()").splitlines()) <= 90 and "show(c)" in t.seen and t.seen.count("\n", t.seen.rindex("help()")) <= 25, "help fits one screen")
t.send("for i = 1, 3 do\r")
t.expect("      > ")
t.send("\x03")
t.expect("mottle> ")
need("to end at once" not in t.seen, "Ctrl-C at the prompt promises nothing")
t.send("unfinished words\x03")
t.expect("mottle> ")
need("\r\n3\r\n" in t.line("x"), "Ctrl-C gives a line up, no more")
for _ in range(50):  # at once after the prompt, when the line is not waited for yet
    t.send("\x03")
    t.expect("mottle> ")
t.send("while true do end\r")
t.expect("\n")
time.sleep(0.3)
t.send("\x03")
need("stopped on request" in t.expect("mottle> "), "Ctrl-C ends a loop")
t.send("pcall(function() while true do end end) print('swallowed')\r")
t.expect("\n")
time.sleep(0.3)
t.send("\x03")
need("stopped on request" in t.expect("mottle> ") and "\nswallowed" not in t.seen, "pcall swallows no Ctrl-C")
for line in shortest.splitlines():
    t.line(line)
t.send("m:run{ duration = 1e7, step = 0.01 }\r")
t.expect(" %  time ")
t.send("\x03")
need("stopped on request at time" in t.expect("mottle> "), "Ctrl-C stops a run")
need("\r\ntrue\r\n" in t.line("m.time > 0 and m.time < 1e7"), "the model stands where it was stopped")
t.line("before = m.time")
need(re.search(r"time \S+ after \d+ steps", t.line("m:run{ duration = 5 }")), "and runs on")
need("\r\ntrue\r\n" in t.line("abs(m.time - before - 5) < 1e-6"), "from there")
t.send("\x04")
t.end(0)
need(not os.path.exists(os.path.join(folder, ".mottle_history")) and sorted(os.listdir(folder)) == ["kept.run"], "the lines of a session are kept nowhere")

t = Terminal("--into", "stopped.run")
t.expect("mottle> ")
for line in shortest.splitlines():
    t.line(line)
t.send("m:run{ duration = 1e7, step = 0.01 }\r")
t.expect(" %  time ")
t.send("\x03")
t.expect("mottle> ")
t.send("\x04")
t.end(0)
with open(os.path.join(folder, "stopped.run", "report.html")) as f:
    need("did not reach its end" in f.read(), "the report of a stopped run says so")

t = Terminal("--quiet")
need(t.expect("mottle> ").count("\n") == 0, "--quiet leaves the greeting out")
os.kill(t.pid, signal.SIGTERM)
t.end(130)

for ending in ("quit()\r", "\x04"):
    t = Terminal()
    t.expect("mottle> ")
    t.line("wrong")
    need(termios.tcgetattr(t.fd)[3] & termios.ICANON == 0, "lines are edited")
    other = os.open(os.readlink(f"/proc/{t.pid}/fd/0"), os.O_RDWR | os.O_NOCTTY)  # keeps the terminal alive
    t.send(ending)
    need(t.wait() == 0 and termios.tcgetattr(other)[3] == t.modes[3], f"the terminal is left as it was found after {ending!r}")
    os.close(other)
    os.close(t.fd)

t = Terminal()
t.expect("mottle> ")
for line in shortest.splitlines():
    t.line(line)
t.send("m:run{ duration = 1e7, step = 0.01 }\r")
t.expect(" %  time ")
os.kill(t.pid, signal.SIGTERM)
t.end(130)

p = subprocess.Popen([mottle, "console"], stdin=subprocess.PIPE, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, cwd=folder)
p.stdin.write(shortest + "print('begun')\nm:run{ duration = 1e7, step = 0.01 }\nprint('never')\n")
p.stdin.flush()
need(p.stdout.readline() == "begun\n", "a pipe is read line by line")
time.sleep(0.3)
p.send_signal(signal.SIGINT)
out, err = p.communicate(timeout=20)
need(p.returncode == 130 and "stopped on request" in err and "never" not in out, f"SIGINT ends a pipe: {p.returncode} {err}")

# --- colours -------------------------------------------------------------------------------------------------------------------------------
field = 'g = grid{ cells = {20, 10}, spacing = 1 }\rc = g:field("c", where(above(g.x, 10), 1, 0))\rc2 = g:field("c2", g.x)\r'


def colours(text, **environment):
    t = Terminal(columns=42, rows=40, **environment)
    t.expect("mottle> ")
    for line in field.split("\r")[:-1]:
        t.line(line)
    t.send(text + "\r")
    t.expect("\r\n")
    out = t.expect("time 0\r\n")
    t.expect("mottle> ")
    t.send("\x04")
    t.end(0)
    return out.split("\r\n")[:-2], out


rows, out = colours("show(c)", COLORTERM="truecolor")
low, high = re.findall(r"38;(2;\d+;\d+;\d+)m", rows[0])
for colour in low, high:
    need((picture == np.array([int(v) for v in colour.split(";")[1:]])).all(axis=-1).sum() >= 16 * 8 * 32 - 200, f"{colour} is the colour of an end in a picture as well")
need(len(rows) == 10 and all(r.count("▀") == 40 for r in rows), f"20 x 10 cells in 41 columns are twice as large: {len(rows)} rows of {rows[0].count('▀')}")
expected = f"\x1b[38;{low}m\x1b[48;{low}m" + "▀" * 20 + f"\x1b[38;{high}m\x1b[48;{high}m" + "▀" * 20 + "\x1b[0m"
need(all(r == expected for r in rows), f"ink and ground are the colours of a picture's ends: {rows[0]!r}, expected {expected!r}")

steps = [0, 95, 135, 175, 215, 255]
palette = np.array([(r, g, b) for r in steps for g in steps for b in steps] + [(8 + 10 * i,) * 3 for i in range(24)])
for name in ("slate", "ember", "tide"):
    deep = [tuple(map(int, x)) for x in re.findall(r"38;2;(\d+);(\d+);(\d+)m", colours(f'show{{ c2, map = "{name}" }}', COLORTERM="24bit")[0][0])]
    few = [int(x) for x in re.findall(r"38;5;(\d+)m", colours(f'show{{ c2, map = "{name}" }}')[0][0])]
    # the nearest colours, by trying all; of two at the same distance either will do
    nearest = [{i + 16 for i, d in enumerate(((palette - np.array(c)) ** 2).sum(axis=1)) if d == ((palette - np.array(c)) ** 2).sum(axis=1).min()} for c in deep]
    at = 0  # a colour that stays is said once
    for i, choices in enumerate(nearest):
        if i > 0 and few[at] not in choices:
            at += 1
        need(at < len(few) and few[at] in choices, f"{name}: colour {deep[i]} became {few}, expected one of {choices} at place {at}")
    need(len(deep) == 20 and at == len(few) - 1, f"{name}: {deep} became {few}")
for environment in ({"NO_COLOR": "1", "COLORTERM": "truecolor"}, {"TERM": "dumb", "COLORTERM": "truecolor"}):
    rows, out = colours("show(c)", **environment)
    need("38;" not in out and "▀" not in out and len(rows) == 10 and rows[0] == " " * 20 + "@" * 20, f"{environment}: {rows[:2]}")
need("38;5;" in colours("show(c)", NO_COLOR="")[1], "an empty NO_COLOR says nothing")
print("the console holds")
