-- Two-step ageing of "Tervane 42", an invented alloy of two metals that unmix below about 980 K.
--
-- The question of the heat treater: after a solution treatment at 1020 K and a quench, how coarse is the modulated structure
-- after four hours at 770 K, and how much does a second, hotter step coarsen it? Run with another second step by
--   mottle run two_step_ageing.lua T2=557degC
local K, hour, minute, nm, s, J, mol = unit.K, unit.hour, unit.minute, unit.nm, unit.s, unit.J, unit.mol
local thermo = require "thermo"
local T2 = input("T2", 815*K, "second ageing temperature")
local cells = input("cells", 256, "cells along each side of the box")

local g = grid{ cells = {cells, cells}, spacing = 0.6*nm }
local x = g:field("x", 0.42 + 0.004*noise.normal{ seed = input("seed", 20, "seed of the starting noise") })
local T = param("T", 1020*K)

local Vm = 7.1*unit.cm^3/mol
local alloy = thermo.solution{ x = x, T = T, molar_volume = Vm,
  interaction = { 20500*J/mol - 4.1*J/mol/K*T, 1500*J/mol } }   -- Redlich-Kister, odd terms times (x_solvent - x_solute)
local M = thermo.mobility{ x = x, T = T, molar_volume = Vm, at = 0.42,
  solvent = { D0 = 5.5e-5*unit.m^2/s, Q = 236*unit.kJ/mol }, solute = { D0 = 4.2e-5*unit.m^2/s, Q = 231*unit.kJ/mol } }
local kappa = thermo.kappa_from{ wavelength = 6*nm, at = 770*K, alloy = alloy, x = 0.42 }   -- (kappa/2)|grad x|^2

local m = model{ energy = alloy.density + kappa/2*gradsq(x) }
m:conserve(x, { mobility = M })

m:record{ every = 10*minute, T, m:energy(), mean(x), amplitude(x), phase_fraction(x), domain_count(x),
  wavelength(x):as("lambda"), interface(x):as("interface") }
m:picture{ x, every = 1*hour, low = 0, high = 1 }

m:run(schedule{ T, start = 1020*K,
  quench{ to = 770*K, rate = 400*K/s },
  hold{ input("first", 4*hour, "time of the first step"), name = "first ageing" },
  ramp{ to = T2, rate = 3*K/minute },
  hold{ input("second", 8*hour, "time of the second step"), name = "second ageing" } })
