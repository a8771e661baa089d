-- Crystals growing into an undercooled melt, arms and all (after Kobayashi, Physica D 63 (1993) 410, cited from memory): p is 1 in the solid
-- and 0 in the melt, T is 0 in the cold melt and 1 at the melting point. Freezing sets heat free, heat slows freezing. The interface's
-- gradient energy depends on its normal n by a(n) = 1 - 3 delta + 4 delta (nx^4 + ny^4), in two dimensions 1 + delta cos(4 angle).
--   local solidification = require "solidification"
--   local o = { p = p, T = T, latent = 1.6 }
--   local m = model{ energy = solidification.energy(o) }
--   solidification.move(m, o)
local M = {}

-- epsilon: the profile is p = 1/2 - tanh(x/(2 sqrt(2) epsilon))/2; drive: largest driving force, below 1/2; steepness: how
-- fast it sets in below the melting point (too steep freezes mush); latent: heat set free, in the unit of T
local defaults = { p = false, T = false, epsilon = 1, delta = 0.05, drive = 0.45, steepness = 2, rate = 1, diffusivity = 4, latent = 1.6 }

-- The options with their defaults. The same table may go to every function; `...` names what one cannot do without.
local function options(t, ...)
  local o = setmetatable({}, { __index = defaults })
  for k, v in pairs(t or {}) do
    if defaults[k] == nil then error("solidification: there is no option '" .. tostring(k) .. "'", 3) end
    if type(v) ~= "number" and type(v) ~= "userdata" then error("solidification: option '" .. k .. "' has to be a number or formula, found a " .. type(v), 3) end
    o[k] = v
  end
  for _, k in ipairs{ ... } do
    if not o[k] then error("solidification: option '" .. k .. "' is missing", 3) end
  end
  return o
end

---Driving force at a temperature: 0 at the melting point, positive below.
function M.force(t)
  local o = options(t, "T")
  return o.drive*tanh(o.steepness*(1 - o.T))
end

---Energy density: wells at 0 and 1 that the driving force tilts, f = p^4/4 - (1/2 - m/3) p^3 + (1/4 - m/2) p^2.
function M.energy(t)
  local o = options(t, "p", "T")
  local p, m, fourth = o.p, M.force(t), 0
  for _, slope in ipairs(grad(p)) do fourth = fourth + slope^4 end
  local a = 1 - 3*o.delta + 4*o.delta*fourth/(gradsq(p) + 1e-6/o.epsilon^2)^2 -- in the bulk, where no normal is, it does not matter
  return p^4/4 - (1/2 - m/3)*p^3 + (1/4 - m/2)*p^2 + o.epsilon^2/2*a^2*gradsq(p)
end

---Says how p and T of a model with this energy move: dp/dt = -rate dF/dp, dT/dt = diffusivity laplacian(T) + latent dp/dt.
---The heat of the box, the mean of T - latent p, is kept within the accuracy of the steps.
function M.move(m, t)
  local o = options(t, "p", "T")
  local freezing = -o.rate*m:potential(o.p)
  m:evolve(o.p, freezing)
  m:evolve(o.T, o.diffusivity*laplacian(o.T) + o.latent*freezing)
end

---Speed of a flat front where its temperature is T and delta = 0: sqrt(2) rate epsilon m.
function M.speed(t)
  local o = options(t, "T")
  return sqrt(2)*o.rate*o.epsilon*M.force(t)
end

return M
