-- A crystal as a wave of density on the scale of its atoms, moving over diffusive times (Elder & Grant, Phys. Rev. E 70 (2004) 051605):
-- f = psi/2 (r + (1 + laplacian)^2) psi + psi^4/4. -r is the undercooling, the mean of psi the density; lengths are such that the
-- spacing of the lattice planes is 2 pi over about 1. Grains, their boundaries and dislocations come by themselves. psi is conserved.
--   local crystal = require "crystal_density"
--   local m = model{ energy = crystal.energy{ psi = psi, r = -0.25 } }
local M = {}

-- mean: of psi; x, y: coordinates of a formula, as g.x and g.y; angle: turns the lattice, in radians
local defaults = { psi = false, r = -0.25, mean = -0.285, x = false, y = false, angle = 0 }
local q = math.sqrt(3)/2 -- wavenumber along x of the triangular lattice; its planes have wavenumber 1

-- The options with their defaults. The same table may go to every function; `...` names what one cannot do without.
local function options(t, ...)
  local o = setmetatable({}, { __index = defaults })
  for k, v in pairs(t or {}) do
    if defaults[k] == nil then error("crystal_density: there is no option '" .. tostring(k) .. "'", 3) end
    if type(v) ~= "number" and type(v) ~= "userdata" then error("crystal_density: option '" .. k .. "' has to be a number or formula, found a " .. type(v), 3) end
    o[k] = v
  end
  for _, k in ipairs{ ... } do
    if not o[k] then error("crystal_density: option '" .. k .. "' is missing", 3) end
  end
  return o
end

---Energy density: psi (1 + laplacian)^2 psi and ((1 + laplacian) psi)^2 have the same integral.
function M.energy(t)
  local o = options(t, "psi")
  return o.r/2*o.psi^2 + (o.psi + laplacian(o.psi))^2/2 + o.psi^4/4
end

---Distance of neighbours in the triangular lattice, 4 pi/sqrt(3).
M.spacing = 2*math.pi/q

---Amplitude of the triangular lattice and of stripes about the mean in one-mode approximation; nil where there is none.
function M.amplitudes(t)
  local o = options(t)
  local lattice, stripes = -15*o.r - 36*o.mean^2, -4/3*(o.r + 3*o.mean^2)
  return lattice >= 0 and 4/5*(o.mean + (o.mean < 0 and -1 or 1)*math.sqrt(lattice)/3) or nil, stripes > 0 and math.sqrt(stripes) or nil
end

---Energy density without waves, of the triangular lattice and of stripes, likewise: the least of them is what forms.
function M.energies(t)
  local o = options(t)
  local m, r, A, S = o.mean, o.r, M.amplitudes(t)
  local melt = (r + 1)/2*m^2 + m^4/4
  return melt, A and melt + 3/16*(r + 3*m^2)*A^2 - 3/16*m*A^3 + 45/512*A^4, S and melt + (r + 3*m^2)/4*S^2 + 3/32*S^4
end

---The triangular lattice as a formula to add to the mean, for starts: A (cos(q x) cos(q y/sqrt(3)) - cos(2 q y/sqrt(3))/2).
function M.wave(t)
  local o = options(t, "x", "y")
  local A, c, s = M.amplitudes(t), math.cos(o.angle), math.sin(o.angle)
  if not A then error("crystal_density: there is no lattice at this mean and r", 2) end
  local x, y = q*(c*o.x + s*o.y), q/math.sqrt(3)*(c*o.y - s*o.x)
  return A*(cos(x)*cos(y) - cos(2*y)/2)
end

return M
