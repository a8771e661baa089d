-- "Kessite", an invented glass whose gap leans to one side, so that the phases are not each other's mirror images: a subregular solution.
-- Held well inside the gap it unmixes; what are the phases, and how much is there of each? The common tangent tells before the run.
-- Dimensionless: energies over R T at 1000 K, say; then T = 0.8 is 800 K.
local solution = require "solution"
local cells = input("cells", 128, "cells along each side of the box")
local g = grid{ cells = {cells, cells}, spacing = 1 }
local x0 = input("mean", 0.3, "mean composition")
local o = { T = input("T", 0.8, "temperature of the hold"), interaction = {1.9, 0.5}, kappa = 1 }
local left, right = solution.spinodal(o)
if not left or x0 <= left or x0 >= right then error("at this temperature and composition small waves do not grow") end
local poor, rich = solution.binodal(o)
print(string.format("phases %.4f and %.4f, of the second %.1f %%", poor, rich, 100*(x0 - poor)/(rich - poor)))

o.x = g:field("x", x0 + 0.01*noise.normal{ seed = input("seed", 2) })
local m = model{ energy = solution.energy(o) }
m:conserve(o.x, { mobility = 1 })
m:record{ every = 20, m:energy(), mean(o.x), minimum(o.x):as("poor"), maximum(o.x):as("rich"),
  phase_fraction(o.x, { level = (poor + rich)/2 }):as("share of rich"),
  domain_count(o.x), wavelength(o.x):as("lambda") }
m:picture{ o.x, every = 200, low = 0, high = 1 }
m:run{ duration = input("duration", 500, "time to run") }
