-- A crystal of "Sorel", an invented pure metal, in its undercooled melt: heat of freezing leaves fastest from the tips, so the crystal
-- grows arms along the directions in which its interface energy is greatest. How do arms change with the undercooling? The latent
-- heat is given in units of the undercooling: a larger value is a warmer melt. Dimensionless: interface thickness, relaxation time.
local solidification = require "solidification"
local cells = input("cells", 256, "cells along each side of the box")
local g = grid{ cells = {cells, cells}, spacing = 1.8 }
local middle = g.length[1]/2
local o = { latent = input("latent", 1.6, "latent heat over undercooling"), delta = input("delta", 0.05, "anisotropy") }
o.p = g:field("p", place{ radius = 8, value = 1, at = {{middle, middle}} })   -- 1 solid, 0 melt
o.T = g:field("T", 0)                                                         -- 0 far away, 1 at the melting point
local m = model{ energy = solidification.energy(o) }
solidification.move(m, o)

-- Lengths of solid through the middle, along an axis and along the diagonal: marks on the cells there, weighted by length over area.
local h = g.spacing[1]
local axis = g:field("axis", where(below(abs(g.y - middle), 0.6*h), 1/(2*h), 0))         -- the two rows beside the middle
local diagonal = g:field("diagonal", where(below(abs(g.x - g.y), 0.5*h), math.sqrt(2)/h, 0))
m:record{ every = 10, integral(o.p):as("solid"), mean(o.T), maximum(o.T):as("warmest"), integral(o.p*axis):as("along the axis"),
  integral(o.p*diagonal):as("along the diagonal") }
m:picture{ o.p, every = 75, low = 0, high = 1, map = "slate" }
m:picture{ o.T, every = 75, low = 0, high = 1, map = "ember" }
m:run{ duration = input("duration", 450, "time to run"), accuracy = 0.05 }
