-- The shortest useful script: a 50:50 mixture that unmixes, dimensionless.
local g = grid{ cells = {256, 256}, spacing = 1 }
local c = g:field("c", 0.5 + 0.01*noise.uniform{ seed = 7 })   -- uniform in [-1, 1]
local m = model{ energy = c^2*(1 - c)^2 + 0.5*gradsq(c) }     -- energy density; gradsq(c) is |grad c|^2
m:conserve(c, { mobility = 1 })                               -- dc/dt = div( M grad( dF/dc ) )
m:run{ duration = 2000 }
