local g = grid{ cells = {16, 16}, spacing = 1 }
local c = g:field("c", 0.5 + 0.01*noise.uniform{ seed = 1 })
local m = model{ energy = c^2*(1 - c)^2 + 0.5*gradsq(c) }
m:conserve(c, { mobility = 1 })
m:run{ duration = 1 }