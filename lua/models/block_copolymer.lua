-- Diblock copolymers after Ohta & Kawasaki (Macromolecules 19 (1986) 2621): two blocks that unmix, eps^2/2 |grad u|^2 + (u^2 - 1)^2/4, but are
-- tied together, so that a block cannot go far: sigma/2 (u - mean) v with -laplacian(v) = u - mean. Domains reach a size and stay at it:
-- lamellae about equal shares, cylinders (2-D: dots) about unequal ones. u is conserved, -1 in one block and 1 in the other.
--   local copolymer = require "block_copolymer"
--   local m = model{ energy = copolymer.energy{ u = u, sigma = 0.05 } }
local M = {}

-- eps: the interface's profile is tanh(x/(sqrt(2) eps)); sigma: strength of the tie, inverse length squared
local defaults = { u = false, eps = 1, sigma = 0.05, mean = 0 }

-- The options with their defaults. The same table may go to every function; `...` names what one cannot do without.
local function options(t, ...)
  local o = setmetatable({}, { __index = defaults })
  for k, v in pairs(t or {}) do
    if defaults[k] == nil then error("block_copolymer: there is no option '" .. tostring(k) .. "'", 3) end
    if type(v) ~= "number" and type(v) ~= "userdata" then error("block_copolymer: option '" .. k .. "' has to be a number or formula, found a " .. type(v), 3) end
    o[k] = v
  end
  for _, k in ipairs{ ... } do
    if not o[k] then error("block_copolymer: option '" .. k .. "' is missing", 3) end
  end
  return o
end

---Energy density. The filter leaves the mean out by itself.
function M.energy(t)
  local o = options(t, "u")
  local v = filter(o.u, function(k) return k > 0 and 1/k^2 or 0 end)
  return o.eps^2/2*gradsq(o.u) + (o.u^2 - 1)^2/4 + o.sigma/2*o.u*v
end

---Rate at which waves of wavenumber k grow about the mean, at mobility 1.
function M.growth(k, t)
  local o = options(t)
  return -k^2*(3*o.mean^2 - 1 + o.eps^2*k^2) - o.sigma
end

---Whether the mixed state is unstable: 1 - 3 mean^2 > 2 eps sqrt(sigma).
function M.unstable(t)
  local o = options(t)
  return 1 - 3*o.mean^2 > 2*o.eps*sqrt(o.sigma)
end

---Period of lamellae: that of the least energy of one wave, good near the onset, and that of thin interfaces far from it, the
---minimum of 2 s/L + sigma L^2/96 with the interface energy s = 2 sqrt(2) eps/3. What forms first is the fastest wave and adapts.
function M.period(t)
  local o = options(t)
  return 2*math.pi*(o.eps^2/o.sigma)^(1/4), (96*2*sqrt(2)/3*o.eps/o.sigma)^(1/3)
end

---Wavelength that grows fastest about the mean at a uniform mobility, or nil.
function M.fastest_wavelength(t)
  local o = options(t)
  if M.unstable(t) then return 2*math.pi*o.eps*sqrt(2/(1 - 3*o.mean^2)) end
end

return M
