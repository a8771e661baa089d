-- A film of "Orlin-Sate", an invented polymer blend, sealed between two glass plates that neither attract nor repel: mirror walls
-- above and below, periodic along the film. The blend is quenched into its gap; how do the domains feel the plates?
-- Dimensionless; one unit is the interface's thickness. The script loops itself: it stops when the domains span the film.
local thickness = input("thickness", 64, "thickness of the film, cells")
local g = grid{ cells = {256, thickness}, spacing = 1, walls = {"periodic", "mirror"} }
local c = g:field("c", 0.5 + 0.02*noise.uniform{ seed = input("seed", 5) })
local m = model{ energy = c^2*(1 - c)^2 + 0.5*gradsq(c) }
m:conserve(c, { mobility = 1 })
m:record{ every = 25, m:energy(), amplitude(c), domain_count(c), interface(c):as("interface"), wavelength(c):as("lambda") }
m:picture{ c, every = 250, low = 0, high = 1, map = "fern" }

local limit = input("limit", 3000, "longest time to run")
while m.time < limit do
  m:run{ duration = math.min(250, limit - m.time) }
  local lambda = now(wavelength(c))                             -- nil while no wave stands out of the noise
  if lambda and lambda > thickness/2 then
    print(string.format("at time %g the wavelength, %.1f, exceeds half the film: its walls rule from here on", m.time, lambda))
    break
  end
end
