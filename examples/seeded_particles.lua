-- "Corvane", an invented glass, held where it is metastable: noise dies out, so nothing happens without nuclei. Seeds of two sizes
-- are put in; those above the critical radius grow, those below dissolve (Gibbs & Thomson: a small drop is in equilibrium with a
-- more concentrated matrix). For the double well the interface energy is sqrt(2)/6, and a drop of radius R in two dimensions rests
-- in a matrix of composition x when f'(x) = (sqrt(2)/6)/R; here the matrix at 0.0372 gives a critical radius near 3.5.
local g = grid{ cells = {192, 192}, spacing = 1 }
local large, small = input("large", 9, "radius of the large seeds"), input("small", 2.6, "radius of the small seeds")
local matrix = input("matrix", 0.0372, "composition of the matrix")
local c = g:field("c", matrix + place{ radius = large, value = 1 - matrix, at = {{48, 48}, {144, 144}} }
  + place{ radius = small, value = 1 - matrix, at = {{144, 48}, {48, 144}, {96, 96}} })
local m = model{ energy = c^2*(1 - c)^2 + 0.5*gradsq(c) }
m:conserve(c, { mobility = 1 })

local sizes = domains(c, { level = 0.5 })
m:record{ every = 5, m:energy(), sizes:as("particles"), phase_fraction(c, { level = 0.5 }):as("fraction"), minimum(c):as("matrix") }
m:picture{ c, every = 50, low = 0, high = 1, map = "slate" }

local before = sizes
m:when(function() return (now(sizes).count or 0) <= 2 end, function()
  local d = now(sizes)
  print(string.format("time %.1f: the small seeds are gone; the %d large ones have an area of %.1f each, from %.1f", m.time, d.count,
    d.mean, math.pi*large^2))
end)
m:run{ duration = input("duration", 300, "time to run") }
