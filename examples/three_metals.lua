-- "Calder 3", an invented alloy of three metals: Ca and Ld do not like each other, and the third, slow Er, is at home with neither but
-- prefers Ld a little. In which order do they part, and where does Er go? a is the fraction of Ca, b that of Ld, the rest is Er.
-- Dimensionless: energies over R T, lengths over the gradient energy's, diffusivities over that of Ca.
local ternary = require "ternary"
local cells = input("cells", 128, "cells along each side of the box")
local g = grid{ cells = {cells, cells}, spacing = 1 }
local seed = input("seed", 6)
local a0, b0 = input("Ca", 0.45, "mean fraction of Ca"), input("Ld", 0.35, "mean fraction of Ld")
local o = { L12 = 3.2, L13 = 2.6, L23 = 1.8, D1 = 1, D2 = 0.6, D3 = 0.1 }
o.a = g:field("Ca", a0 + 0.005*noise.normal{ seed = seed })
o.b = g:field("Ld", b0 + 0.005*noise.normal{ seed = seed + 1 })
local m = model{ energy = ternary.energy(o) }
m:conserve({o.a, o.b}, { mobility = ternary.mobility(o) })

local stability = ternary.stability{ a = a0, b = b0, L12 = o.L12, L13 = o.L13, L23 = o.L23 }
print(string.format("smallest second derivative %.3f: the mixture %s", stability, stability < 0 and "unmixes" or "is stable against small waves"))
local er = 1 - o.a - o.b
m:record{ every = 5, m:energy(), mean(o.a), mean(o.b), mean(er):as("mean(Er)"), amplitude(o.a), amplitude(o.b), variance(er):as("variance(Er)"),
  mean((o.b - b0)*(er - (1 - a0 - b0))):as("Ld with Er"), wavelength(o.a):as("lambda"), minimum(er):as("least Er") }
m:picture{ o.a, every = 100, low = 0, high = 1, map = "ember" }
m:picture{ er, every = 100, low = 0, high = 0.5, map = "fern", name = "Er" }
m:run{ duration = input("duration", 300, "time to run") }
