-- A double well: the least a model of unmixing needs. Two phases of compositions low and high, a barrier between them, a gradient
-- energy. With the defaults it is c^2 (1 - c)^2 + |grad c|^2 / 2 (Cahn & Hilliard, J. Chem. Phys. 28 (1958) 258).
--   local well = require "double_well"
--   local m = model{ energy = well.energy{ c = c, barrier = 0.1 } }
local M = {}

-- barrier: height half-way between the wells; kappa: of (kappa/2)|grad c|^2; energy and width are for from_interface alone
local defaults = { c = false, low = 0, high = 1, barrier = 1/16, kappa = 1, energy = false, width = false }

-- The options with their defaults. The same table may go to every function; `...` names what one cannot do without.
local function options(t, ...)
  local o = setmetatable({}, { __index = defaults })
  for k, v in pairs(t or {}) do
    if defaults[k] == nil then error("double_well: there is no option '" .. tostring(k) .. "'", 3) end
    if type(v) ~= "number" and type(v) ~= "userdata" then error("double_well: option '" .. k .. "' has to be a number or formula, found a " .. type(v), 3) end
    o[k] = v
  end
  for _, k in ipairs{ ... } do
    if not o[k] then error("double_well: option '" .. k .. "' is missing", 3) end
  end
  return o
end

---Energy density.
function M.energy(t)
  local o = options(t, "c")
  local u = (o.c - o.low)/(o.high - o.low)
  return 16*o.barrier*u^2*(1 - u)^2 + o.kappa/2*gradsq(o.c)
end

---A flat interface: its energy per area, the integral of sqrt(2 kappa f) over c, and its width from 10 to 90 % of the step.
function M.interface(t)
  local o = options(t)
  return (o.high - o.low)*sqrt(32*o.kappa*o.barrier)/6, 2*math.log(9)*(o.high - o.low)*sqrt(o.kappa/(32*o.barrier))
end

---The other way round: the barrier and kappa that give an interface of this energy and width.
function M.from_interface(t)
  local o = options(t, "energy", "width")
  return 3/8*math.log(9)*o.energy/o.width, 3*o.energy*o.width/(math.log(9)*(o.high - o.low)^2)
end

---The two compositions between which small waves grow.
function M.spinodal(t)
  local o = options(t)
  local middle, reach = (o.low + o.high)/2, (o.high - o.low)/sqrt(12)
  return middle - reach, middle + reach
end

---Wavelength that grows fastest about the composition c at a uniform mobility (Cahn 1961); nil outside the spinodal.
function M.fastest_wavelength(t)
  local o = options(t, "c")
  local u = (o.c - o.low)/(o.high - o.low)
  local bend = 16*o.barrier*(2 - 12*u + 12*u^2)/(o.high - o.low)^2
  if bend < 0 then return 2*math.pi*sqrt(-2*o.kappa/bend) end
end

return M
