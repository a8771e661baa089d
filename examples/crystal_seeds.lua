-- Three seeds of "Aldine", an invented crystal, turned against each other, grow into the melt and meet: where their lattices do not
-- fit, rows of dislocations stay as grain boundaries. The field is a density on the scale of atoms; each peak is one. Dimensionless.
local crystal = require "crystal_density"
local cells = input("cells", 256, "cells along each side of the box")
local g = grid{ cells = {cells, cells}, spacing = crystal.spacing/10 }      -- ten cells between neighbours
local mean_density, r = input("mean", -0.285, "mean density"), input("r", -0.25, "minus the undercooling")
local L = g.length[1]

local seeds = 0
for i, seed in ipairs{ {0.25, 0.3, 0}, {0.7, 0.25, 14}, {0.5, 0.75, 25} } do    -- place in parts of the box, angle in degrees
  local x, y = g.x - seed[1]*L, g.y - seed[2]*L
  local lattice = crystal.wave{ x = x, y = y, angle = math.rad(seed[3]), mean = mean_density, r = r }
  seeds = seeds + where(below(x^2 + y^2, (L/12)^2), lattice, 0)
end
local psi = g:field("psi", mean_density + seeds)
local m = model{ energy = crystal.energy{ psi = psi, r = r } }
m:conserve(psi, { mobility = 1 })

local melt, lattice, stripes = crystal.energies{ mean = mean_density, r = r }
print(string.format("energy densities: melt %.5f, crystal %.5f, stripes %.5f", melt, lattice, stripes or 0/0))
local atoms = domain_count(psi, { level = 0 }):as("atoms")
m:record{ every = 20, m:energy(), mean(psi), maximum(psi), atoms }
m:picture{ psi, every = 100, low = -0.8, high = 0.6, map = "grey" }
m:run{ duration = input("duration", 600, "time to run") }
print(string.format("%d atoms; a perfect crystal that fills the box has %.0f", now(atoms), L^2/(math.sqrt(3)/2*crystal.spacing^2)))
