-- "Halvite", an invented ordering alloy: the ordered phase is rich in solute, so ordering and composition move together.
-- c is the composition (conserved), eta the order parameter (0 disordered, 1 ordered; it relaxes). A weakly perturbed solid
-- solution first orders, then sheds solute between ordered domains. Dimensionless: energies in units of the ordering energy.
local g = grid{ cells = {192, 192}, spacing = 1 }
local seed = input("seed", 11, "seed of the starting noise")
local c = g:field("c", input("mean", 0.5, "mean composition") + 0.02*noise.normal{ seed = seed })
local eta = g:field("eta", 0.05 + 0.05*noise.uniform{ seed = seed + 1 })

local c0, c1 = 0.15, 0.75                                   -- preferred compositions without and with order
local h = eta^2*(3 - 2*eta)                                 -- 0 at eta = 0, 1 at eta = 1, flat at both
local bulk = (1 - h)*2*(c - c0)^2 + h*2*(c - c1)^2 + 0.25*eta^2*(1 - eta)^2
local m = model{ energy = bulk + 0.6/2*gradsq(c) + 0.8/2*gradsq(eta) }

m:conserve(c, { mobility = 1 - 0.8*h })                     -- ordered domains let solute through slowly
m:relax(eta, { rate = 0.5 })

print("dF/deta = " .. tostring(m:potential(eta)))
m:record{ every = 10, m:energy(), mean(c), mean(eta), amplitude(c), phase_fraction(eta, { level = 0.5 }):as("ordered fraction"),
  domains(eta, { level = 0.5 }):as("ordered domains"), wavelength(c):as("lambda") }
m:picture{ c, every = 100, low = 0, high = 1 }
m:picture{ eta, every = 100, low = 0, high = 1, map = "ember" }
m:run{ duration = input("duration", 400, "time to run") }
