-- Recrystallised "Ferrane", an invented sheet metal, on a long anneal: nuclei have grown until they met, then boundaries move by their
-- curvature, small grains vanish and the mean grain grows. How much does the anneal coarsen the sheet? Dimensionless: a boundary is
-- about four units wide.
local grains = require "grains"
local cells = input("cells", 160, "cells along each side of the box")
local g = grid{ cells = {cells, cells}, spacing = 1 }
local o = { grains = input("grains", 40, "nuclei"), count = input("fields", 8, "fields they share"), seed = input("seed", 3) }
o.fields = grains.fields(g, o)
local energy, inside = grains.energy(o)                     -- inside is 1 in grains, 1/2 on boundaries
local m = model{ energy = energy }
for _, e in ipairs(o.fields) do m:relax(e, { rate = 1 }) end

local sigma = grains.boundary(o)
local length = function() return now(m:energy())/sigma end   -- boundary length from the energy
m:record{ every = 20, m:energy(), mean(inside):as("inside"), domain_count(inside, { level = 0.75 }):as("grains") }
m:picture{ inside, every = 100, low = 0.3, high = 1, map = "slate", name = "grains" }
m:at(30, function() print(string.format("grains have met: boundaries of length %.0f", length())) end)
m:run{ duration = input("duration", 300, "time to run"), accuracy = 0.05 }
print(string.format("at the end: %d grains, boundaries of length %.0f", now(domain_count(inside, { level = 0.75 })), length()))
