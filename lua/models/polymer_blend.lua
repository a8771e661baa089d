-- A blend of two polymers after Flory & Huggins, in k T per segment: phi/N1 ln phi + (1-phi)/N2 ln(1-phi) + chi phi (1-phi), with the gradient
-- energy of de Gennes (J. Chem. Phys. 72 (1980) 4756), kappa = a^2/(18 phi (1-phi)) of (kappa/2)|grad phi|^2. Times R T over the molar volume
-- of a segment it is J/m^3. chi may be a formula of a param: chi = A + B/T.
--   local blend = require "polymer_blend"
--   local m = model{ energy = blend.energy{ phi = phi, N1 = 200, N2 = 300, chi = 0.012 } }
local M = {}

-- phi: volume fraction of polymer 1; a: length of a segment; floor: kappa grows no further where phi (1-phi) is smaller than this
local defaults = { phi = false, N1 = false, N2 = false, chi = false, a = 1, floor = 0.01 }

-- The options with their defaults. The same table may go to every function; `...` names what one cannot do without.
local function options(t, ...)
  local o = setmetatable({}, { __index = defaults })
  for k, v in pairs(t or {}) do
    if defaults[k] == nil then error("polymer_blend: there is no option '" .. tostring(k) .. "'", 3) end
    if type(v) ~= "number" and type(v) ~= "userdata" then error("polymer_blend: option '" .. k .. "' has to be a number or formula, found a " .. type(v), 3) end
    o[k] = v
  end
  for _, k in ipairs{ ... } do
    if not o[k] then error("polymer_blend: option '" .. k .. "' is missing", 3) end
  end
  return o
end

---Energy density.
function M.energy(t)
  local o = options(t, "phi", "N1", "N2", "chi")
  local p, q = o.phi, 1 - o.phi
  return p*log(p)/o.N1 + q*log(q)/o.N2 + o.chi*p*q + o.a^2/36/max(p*q, o.floor)*gradsq(p)
end

---Critical chi and phi.
function M.critical(t) local o = options(t, "N1", "N2"); return (1/sqrt(o.N1) + 1/sqrt(o.N2))^2/2, 1/(1 + sqrt(o.N1/o.N2)) end

---Compositions between which small waves grow, 1/(N1 phi) + 1/(N2 (1-phi)) = 2 chi, or nil.
function M.spinodal(t)
  local o = options(t, "N1", "N2", "chi")
  local half = (1 - 1/(2*o.chi*o.N2) + 1/(2*o.chi*o.N1))/2
  local root = o.chi > M.critical(t) and sqrt(half^2 - 1/(2*o.chi*o.N1))
  if root then return half - root, half + root end
end

---Compositions of the two phases in equilibrium (common tangent), or nil.
function M.binodal(t)
  local o, left, right = options(t, "N1", "N2", "chi"), M.spinodal(t)
  if not left then return nil end
  local function f(p) return p*log(p)/o.N1 + (1 - p)*log(1 - p)/o.N2 + o.chi*p*(1 - p) end
  local function slope(p) return (log(p) + 1)/o.N1 - (log(1 - p) + 1)/o.N2 + o.chi*(1 - 2*p) end
  return require("thermo").common_tangent(f, slope, left, right)
end

---Wavelength that grows fastest at a uniform mobility (Cahn 1961), or nil.
function M.fastest_wavelength(t)
  local o = options(t, "phi", "N1", "N2", "chi")
  local growth = 2*o.chi - 1/(o.N1*o.phi) - 1/(o.N2*(1 - o.phi))
  if growth > 0 then return 2*math.pi*o.a/sqrt(9*o.phi*(1 - o.phi)*growth) end
end

return M
