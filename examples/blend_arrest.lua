-- "Velane/Morin", an invented blend of two polymers, is pressed as a melt, dropped to 390 K and cooled from there. It unmixes below
-- about 420 K, but the phase rich in Velane (glass temperature 378 K alone, Morin 270 K) turns to glass on the way. How coarse is the
-- structure that is left, and does faster cooling leave a finer one? Try   mottle run blend_arrest.lua rate=20K/min
-- Flow is not modelled: where a melt can flow, it coarsens faster than this.
local K, minute, nm = unit.K, unit.minute, unit.nm
local blend, kinetics = require "polymer_blend", require "kinetics"
local rate = input("rate", 10*K/minute, "rate of cooling")

local cells = input("cells", 200, "cells along each side of the box")
local g = grid{ cells = {cells, cells}, spacing = 4.8*nm }
local phi = g:field("phi", input("mean", 0.45, "volume fraction of Velane") + 0.003*noise.normal{ seed = input("seed", 4) })
local T = param("T", 390*K)

local chi = 0.0021 + 2.7*K/T                                  -- interaction per segment, as fitted to cloud points
local f = blend.energy{ phi = phi, N1 = 220, N2 = 260, chi = chi, a = 0.7*nm }   -- in k T per segment
local RT_v = 8.31446*unit.J/unit.mol/K*T/(85*unit.cm^3/unit.mol)   -- R T over the molar volume of a segment
local m = model{ energy = RT_v*f }

local Tg = kinetics.fox{ w = phi, Tg1 = 378*K, Tg2 = 270*K }   -- weight and volume fractions are taken as equal
local D = kinetics.wlf{ T = T, Tg = Tg, M0 = 8e-24*unit.m^2/unit.s }
m:conserve(phi, { mobility = phi*(1 - phi)*D/RT_v })

m:record{ every = 1*minute, T, m:energy(), mean(phi), amplitude(phi), wavelength(phi):as("lambda"), minimum(phi), maximum(phi),
  phase_fraction(Tg - T, { level = 0 }):as("share of glass") }
m:picture{ phi, every = 10*minute, low = 0, high = 1 }
m:run(schedule{ T, start = 390*K, ramp{ to = 290*K, rate = rate, name = "cooling" }, hold{ 10*minute, name = "on the shelf" } })

local lambda = now(wavelength(phi))
print(lambda and string.format("the structure rests at a wavelength of %.0f nm", lambda/nm) or "the blend came through without unmixing")
