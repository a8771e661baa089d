"""Single interfaces and drops against closed forms.

- Planar interface of the double well w c^2 (1-c)^2 with (kappa/2)|grad c|^2: energy per area sqrt(2 kappa w)/6 and 10-90 width
  2 artanh(0.8) sqrt(2 kappa / w), Cahn & Hilliard, J. Chem. Phys. 28 (1958) 258 (tanh profile: from memory, re-derived).
- A circle under dc/dt = -L dF/dc loses area at 2 pi L kappa: Allen & Cahn, Acta Metall. 27 (1979) 1085; Mullins 1956.
- Regular solution: a relaxed interface lies between the compositions of the common tangent, ln(x/(1-x)) = -(W/RT)(1-2x);
  binodal at T/Tc = 0.8: 0.1447941082561 (reference values of this project, closed form solved to 30 digits).
"""
import math

import numpy as np
from scipy.optimize import brentq

from scripts import Run, close

# 8 cells across the 10-90 width: h = 1, delta = 8 / (2 artanh 0.8) = sqrt(2 kappa / w)
delta = 8 / (2 * math.atanh(0.8))
kappa, w = delta ** 2 / 2, 1.0
line = f"""
local g = grid{{ cells = {{256}}, spacing = 1, walls = "WALL" }}
local c = g:field("c", START)
local m = model{{ energy = {w!r}*c^2*(1 - c)^2 + {kappa!r}/2*gradsq(c) }}
m:relax(c, {{ rate = 1 }})
m:record{{ every = 2000, m:energy() }}
m:save{{ c }}
m:run{{ duration = 4000 }}
"""


def series_width(v, mirror):
    """10-90 width by Fourier (cosine) interpolation of the line around its first passage of 1/2."""
    n = len(v)
    x = np.arange(n) + 0.5
    step = (math.pi if mirror else 2 * math.pi) / n
    modes = np.arange(n if mirror else (n + 1) // 2)
    scale = np.where(modes == 0, 1, 2) / n
    a = scale * (np.cos(step * np.outer(modes, x)) @ v)
    b = 0 * a if mirror else scale * (np.sin(step * np.outer(modes, x)) @ v)
    f = lambda t: a @ np.cos(step * modes * t) + b @ np.sin(step * modes * t)
    i = int(np.nonzero((v[:-1] - 0.5) * (v[1:] - 0.5) < 0)[0][0])
    root = lambda level: brentq(lambda t: f(t) - level, i - 20, i + 21)
    return abs(root(0.9) - root(0.1))


for wall, start, count in (("periodic", "0.5*(tanh((g.x - 64.2)/4) - tanh((g.x - 192.2)/4))", 2),
                           ("mirror", "0.5*(1 + tanh((g.x - 128.3)/4))", 1)):
    r = Run(line.replace("WALL", wall).replace("START", start))
    close(f"{wall}: energy per area", r.ledger()["energy"][-1] / count, math.sqrt(2 * kappa * w) / 6, 1e-4)
    close(f"{wall}: 10-90 width", series_width(r.array("c-0000.npy"), wall == "mirror"), 8, 1e-4)

circle = """
local g = grid{ cells = {128, 128}, spacing = 1 }
local c = g:field("c", place{ radius = 40, value = 1, at = {{64, 64}}, width = 2^0.5 })
local m = model{ energy = c^2*(1 - c)^2 + 0.5*gradsq(c) }
m:relax(c, { rate = 1.5 })
m:record{ every = 10, integral(c):as("area") }
m:run{ duration = 300, accuracy = 2e-3 }
"""
area, time = (Run(circle).ledger()[k] for k in ("area", "time"))
late = time >= 50  # the profile has settled
close("area of a circle falls at", -np.polyfit(time[late], area[late], 1)[0], 2 * math.pi * 1.5, 0.01)

# Regular solution W = 2 R Tc at T = 0.8 Tc, one interface between mirror walls, aged until it rests.
regular = """
local thermo = require "thermo"
local g = grid{ cells = {200}, spacing = 1, walls = "mirror" }
local x = g:field("x", 0.5 + 0.3*tanh((g.x - 100)/5))
local T = param("T", 800)
local alloy = thermo.solution{ x = x, T = T, molar_volume = 8.31446261815324*1000, interaction = { 2*8.31446261815324*1000 } }
local m = model{ energy = alloy.density + 4*gradsq(x) }
m:conserve(x, { mobility = 1 })
m:record{ every = 1e5, minimum(x):as("low"), maximum(x):as("high"), mean(x):as("mean") }
m:run{ duration = 1e6 }
local low, high = alloy:binodal(800)
if math.abs(low - 0.1447941082561) > 1e-11 or math.abs(high + low - 1) > 1e-11 then error("binodal " .. low .. " " .. high) end
local a, b = alloy:spinodal(800)
if math.abs(a - 0.27639320225) > 1e-11 or math.abs(a + b - 1) > 1e-11 then error("spinodal " .. a) end
"""
ledger = Run(regular).ledger()
close("regular solution, poor phase", ledger["low"][-1], 0.1447941082561, 0, 1e-4)
close("regular solution, rich phase", ledger["high"][-1], 0.8552058917439, 0, 1e-4)
close("mean stays", ledger["mean"][-1], ledger["mean"][0], 1e-12)
