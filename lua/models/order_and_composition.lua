-- Order and composition, after the pattern of B2: the disordered solution (eta = 0) prefers one composition, the ordered phase
-- (eta = 1 and -1, its two antiphase variants) another, so that ordering draws solute in. Where two variants meet, disordered
-- material may wet the boundary (Allen & Cahn, Acta Metall. 27 (1979) 1085, tell of antiphase boundaries). c is conserved, eta relaxes.
--   local order = require "order_and_composition"
--   local m = model{ energy = order.energy{ c = c, eta = eta, ordered = 0.5, disordered = 0.2 } }
local M = {}

-- stiffness: of stiffness (c - preferred)^2; barrier: height between order and disorder at their own compositions
local defaults = { c = false, eta = false, mean = false, disordered = 0.15, ordered = 0.75, stiffness = 2, barrier = 1/16, kappa_c = 0.6,
  kappa_eta = 0.8 }

-- The options with their defaults. The same table may go to every function; `...` names what one cannot do without.
local function options(t, ...)
  local o = setmetatable({}, { __index = defaults })
  for k, v in pairs(t or {}) do
    if defaults[k] == nil then error("order_and_composition: there is no option '" .. tostring(k) .. "'", 3) end
    if type(v) ~= "number" and type(v) ~= "userdata" then error("order_and_composition: option '" .. k .. "' has to be a number or formula, found a " .. type(v), 3) end
    o[k] = v
  end
  for _, k in ipairs{ ... } do
    if not o[k] then error("order_and_composition: option '" .. k .. "' is missing", 3) end
  end
  return o
end

---Degree of order as a switch from 0 (eta = 0) to 1 (eta = 1 or -1), flat at both and even in eta.
function M.order(eta) return eta^4*(3 - 2*eta^2) end

local function bulk(o, c, eta)
  local h = M.order(eta)
  return o.stiffness*((1 - h)*(c - o.disordered)^2 + h*(c - o.ordered)^2) + 27/4*o.barrier*eta^2*(1 - eta^2)^2
end

---Energy density.
function M.energy(t)
  local o = options(t, "c", "eta")
  return bulk(o, o.c, o.eta) + o.kappa_c/2*gradsq(o.c) + o.kappa_eta/2*gradsq(o.eta)
end

---Fraction that is ordered at rest for a mean composition: the lever rule, without interfaces.
function M.ordered_fraction(t)
  local o = options(t, "mean")
  return math.max(0, math.min(1, (o.mean - o.disordered)/(o.ordered - o.disordered)))
end

---Energy per area between order and disorder for kappa_c = 0, where c follows eta freely: the integral of sqrt(2 kappa_eta f)
---over eta. A kappa_c above 0 adds to it.
function M.interface_energy(t)
  local o, n, sum = options(t), 2000, 0
  for i = 1, n do -- midpoint rule
    local eta = (i - 0.5)/n
    local h = M.order(eta)
    sum = sum + math.sqrt(2*o.kappa_eta*bulk(o, (1 - h)*o.disordered + h*o.ordered, eta))/n
  end
  return sum
end

return M
