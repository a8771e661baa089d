-- Regular and subregular solutions, dimensionless: T (x ln x + (1-x) ln(1-x)) + x (1-x) (L0 + L1 (1-2x) + L2 (1-2x)^2 ...), with the terms
-- of Redlich & Kister (Ind. Eng. Chem. 40 (1948) 345). One term is the regular solution, two a lopsided gap. In real units: thermo.
--   local solution = require "solution"
--   local m = model{ energy = solution.energy{ x = x, interaction = {2.6, 0.7} } }
local M = {}

-- T: R times temperature in the unit of the interaction terms; a number, param or formula
local defaults = { x = false, T = 1, interaction = {}, kappa = 1 }

-- The options with their defaults. The same table may go to every function; `...` names what one cannot do without.
local function options(t, ...)
  local o = setmetatable({}, { __index = defaults })
  for k, v in pairs(t or {}) do
    if defaults[k] == nil then error("solution: there is no option '" .. tostring(k) .. "'", 3) end
    local wanted = type(defaults[k]) == "table" and "list" or "number or formula"
    local fits = wanted == "list" and type(v) == "table" or wanted ~= "list" and (type(v) == "number" or type(v) == "userdata")
    if not fits then error("solution: option '" .. k .. "' has to be a " .. wanted .. ", found a " .. type(v), 3) end
    o[k] = v
  end
  for _, k in ipairs{ ... } do
    if not o[k] then error("solution: option '" .. k .. "' is missing", 3) end
  end
  return o
end

---Energy density, with (kappa/2)|grad x|^2.
function M.energy(t)
  local o = options(t, "x")
  local x, excess = o.x, 0
  for i, L in ipairs(o.interaction) do excess = excess + L*(1 - 2*x)^(i - 1) end
  return o.T*(x*log(x) + (1 - x)*log(1 - x)) + x*(1 - x)*excess + o.kappa/2*gradsq(x)
end

-- The search for the gap is thermo's, whose temperatures come with R; terms that are formulas of a param get their present value.
local R = 8.31446261815324
local function gap(o)
  local terms = {}
  for i, L in ipairs(o.interaction) do terms[i] = type(L) == "number" and L or now(L) end
  return require("thermo").solution{ x = 0.5, T = 1, molar_volume = 1, interaction = terms }, (type(o.T) == "number" and o.T or now(o.T))/R
end

---The two compositions between which small waves grow, and those of the two phases in equilibrium; nil where x is stable.
function M.spinodal(t) local s, T = gap(options(t)); return s:spinodal(T) end
function M.binodal(t) local s, T = gap(options(t)); return s:binodal(T) end

---Critical T of the regular solution, the first term alone.
function M.critical(t) return (options(t).interaction[1] or 0)/2 end

---Wavelength that grows fastest about the composition x at a uniform mobility (Cahn 1961); nil outside the spinodal.
function M.fastest_wavelength(t)
  local o = options(t, "x")
  local s, T = gap(o)
  local bend = s:bend(o.x, T)
  if bend < 0 then return 2*math.pi*sqrt(-2*o.kappa/bend) end
end

return M
