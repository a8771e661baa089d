-- "Tessil", an invented diblock copolymer cast as a film: the blocks unmix but are tied together, so domains stop growing at a size that
-- the chemist sets by the length of the chains (sigma here falls with it). Equal blocks give lamellae, and with mean = -0.35 one block
-- stands as dots in the other. Dimensionless. Compare the period at rest with what the theory of thin and of smooth interfaces says.
local copolymer = require "block_copolymer"
local cells = input("cells", 192, "cells along each side of the box")
local g = grid{ cells = {cells, cells}, spacing = 1 }
local o = { sigma = input("sigma", 0.05, "strength of the tie"), mean = input("mean", 0, "mean of u, from -1 to 1") }
if not copolymer.unstable(o) then error("this copolymer stays mixed: take a smaller sigma or a mean nearer to 0") end

local u = g:field("u", o.mean + 0.05*noise.normal{ seed = input("seed", 8) })
local m = model{ energy = copolymer.energy{ u = u, sigma = o.sigma } }
m:conserve(u, { mobility = 1 })
m:record{ every = 20, m:energy(), mean(u), amplitude(u), wavelength(u):as("period"),
  domain_count(u, { level = 0 }):as("domains"), interface(u, { level = 0 }) }
m:picture{ u, every = 200, low = -1, high = 1, map = "tide" }
m:run{ duration = input("duration", 1000, "time to run") }

local smooth, thin = copolymer.period(o)
print(string.format("period %.2f; theory: %.2f for smooth interfaces, %.2f for thin ones", now(wavelength(u)) or 0/0, smooth, thin))
