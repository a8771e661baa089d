-- "Tervane 42" once more, with the fluctuations that heat makes: does it matter what the solution treatment leaves behind?
--
-- The start is drawn from the alloy's own thermodynamics at 1020 K (equipartition), not invented, and the noise of the jumping
-- atoms (Cook 1970) goes on through quench and ageing. Fluctuations depend on the volume of a cell: a 2-D box needs a thickness.
-- Cells of fewer than about a hundred atoms fluctuate so strongly that a composition is no longer a useful idea.
-- Compare with the run without noise:   mottle run hot_fluctuations.lua noise=false --into quiet.run
local K, hour, minute, nm, s, J, mol = unit.K, unit.hour, unit.minute, unit.nm, unit.s, unit.J, unit.mol
local thermo = require "thermo"
local noisy = input("noise", true, "whether the noise goes on after the start")
local thick = input("thickness", 12*nm, "thickness of the box")
local seed = input("seed", 5, "seed of start and noise")
local cells = input("cells", 96, "cells along each side of the box")

local g = grid{ cells = {cells, cells}, spacing = 0.6*nm }
local x = g:field("x", 0.42)
local T = param("T", 1020*K)

local Vm = 7.1*unit.cm^3/mol
local alloy = thermo.solution{ x = x, T = T, molar_volume = Vm, interaction = { 20500*J/mol - 4.1*J/mol/K*T, 1500*J/mol } }
local M = thermo.mobility{ x = x, T = T, molar_volume = Vm, at = 0.42,
  solvent = { D0 = 5.5e-5*unit.m^2/s, Q = 236*unit.kJ/mol }, solute = { D0 = 4.2e-5*unit.m^2/s, Q = 231*unit.kJ/mol } }
local kappa = thermo.kappa_from{ wavelength = 6*nm, at = 770*K, alloy = alloy, x = 0.42 }

local m = model{ energy = alloy.density + kappa/2*gradsq(x) }
m:conserve(x, { mobility = M, thermal_noise = noisy and { T = T, seed = seed, thickness = thick } or nil })
set(x, 0.42 + noise.equilibrium{ model = m, field = x, T = T, thickness = thick, seed = seed })
print(string.format("atoms in a cell: %.0f; fluctuation of a cell's composition at 1020 K: %.4f",
  6.02214076e23*(0.6*nm)^2*thick/Vm, math.sqrt(now(variance(x)))))

m:record{ every = 5*minute, T, m:energy(), mean(x), variance(x), amplitude(x), wavelength(x):as("lambda") }
m:picture{ x, every = 30*minute, low = 0, high = 1 }
m:run(schedule{ T, start = 1020*K,
  quench{ to = 770*K, rate = 400*K/s },
  hold{ input("ageing", 90*minute, "time of the ageing"), name = "ageing" } })
