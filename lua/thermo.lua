-- Thermodynamics and kinetics of substitutional solutions.
local core = require "core"
local options = require "options"
local formula = require "formula"
local units = require "unit"

local M = {}
local R = units.constants.R
local log, sqrt, exp = formula.log, formula.sqrt, formula.exp

---Molar Gibbs energy (J/mol) of a binary solution relative to its pure components at temperature T:
---  R T (x ln x + (1-x) ln(1-x)) + x (1-x) sum_i L_i ((1-x) - x)^i
---(Redlich & Kister, Ind. Eng. Chem. 40 (1948) 345; odd terms times x_solvent - x_solute). Works on numbers and formulas.
local function molar(x, T, interaction)
  local mixing = R * T * (x * log(x) + (1 - x) * log(1 - x))
  local excess = 0
  for i, L in ipairs(interaction) do
    excess = excess + L * (1 - 2 * x) ^ (i - 1)
  end
  return mixing + x * (1 - x) * excess
end

local Solution = { kind = "solution" }
Solution.__index = Solution

---thermo.solution{ x, T, molar_volume, interaction = { L0, L1, ... } }
---Gives .molar (J/mol) and .density (J/m^3, per volume: molar / molar_volume), formulas of x and T.
function M.solution(t)
  local o = options.read(t, "thermo.solution", { { "x", "formula", required = true }, { "T", "formula", required = true },
    { "molar_volume", "positive", required = true }, { "interaction", "table", default = {} } })
  for i, L in ipairs(o.interaction) do
    if type(L) ~= "number" and not core.is_expr(L) then
      core.fail(string.format("thermo.solution: interaction term %d has to be a number or formula, found %s", i, options.kind(L)))
    end
  end
  local s = setmetatable({ x = o.x, T = o.T, molar_volume = o.molar_volume, interaction = o.interaction }, Solution)
  s.molar = molar(o.x, o.T, o.interaction)
  s.density = s.molar / o.molar_volume
  return s
end

-- Values of the interaction terms at a temperature.
local function terms_at(s, T)
  local list = {}
  for i, L in ipairs(s.interaction) do
    if type(L) == "number" then list[i] = L
    else
      local at = core.kind(s.T) == "param" and core.replace(L, s.T, T) or L
      list[i] = core.number(at) or core.fail("thermo: an interaction term varies over the cells")
    end
  end
  return list
end

local function g(x, T, L)
  local sum = 0
  for i, l in ipairs(L) do sum = sum + l * (1 - 2 * x) ^ (i - 1) end
  return R * T * (x * math.log(x) + (1 - x) * math.log(1 - x)) + x * (1 - x) * sum
end

local function slope(x, T, L)
  local y, sum, dsum = 1 - 2 * x, 0, 0
  for i, l in ipairs(L) do
    sum = sum + l * y ^ (i - 1)
    if i > 1 then dsum = dsum - 2 * (i - 1) * l * y ^ (i - 2) end
  end
  return R * T * math.log(x / (1 - x)) + y * sum + x * (1 - x) * dsum
end

local function bend(x, T, L)
  local y, sum, d1, d2 = 1 - 2 * x, 0, 0, 0
  for i, l in ipairs(L) do
    sum = sum + l * y ^ (i - 1)
    if i > 1 then d1 = d1 - 2 * (i - 1) * l * y ^ (i - 2) end
    if i > 2 then d2 = d2 + 4 * (i - 1) * (i - 2) * l * y ^ (i - 3) end
  end
  return R * T / (x * (1 - x)) - 2 * sum + 2 * y * d1 + x * (1 - x) * d2
end

local function bisect(f, a, b)
  local fa = f(a)
  for _ = 1, 200 do
    local c = 0.5 * (a + b)
    if c == a or c == b then break end
    local fc = f(c)
    if (fc > 0) == (fa > 0) then a = c else b = c end
  end
  return 0.5 * (a + b)
end

---Compositions of the spinodal (second derivative 0) at a temperature: two numbers, or nil where the solution is stable.
function Solution:spinodal(T)
  local L, n, found = terms_at(self, T), 4000, {}
  local last = bend(0.5 / n, T, L)
  for i = 1, n - 1 do
    local x = (i + 0.5) / n
    local b = bend(x, T, L)
    if (b > 0) ~= (last > 0) then
      found[#found + 1] = bisect(function(z) return bend(z, T, L) end, x - 1 / n, x)
    end
    last = b
  end
  if #found < 2 then return nil end
  return found[1], found[#found]
end

---Where the common tangent touches an energy f(x) with the slope(x), numbers between 0 and 1, that is concave from left to
---right and convex on either side: both compositions. Each slope has one match on either side; bisection until the intercepts
---are one.
function M.common_tangent(f, slope_at, left, right)
  local tiny, top = 1e-300, 1 - 1e-16
  local function match(s, a, b)
    if slope_at(a) >= s then return a elseif slope_at(b) <= s then return b end
    return bisect(function(x) return slope_at(x) - s end, a, b)
  end
  local function both(s) return match(s, tiny, left), match(s, right, top) end
  return both(bisect(function(s)
    local x, z = both(s)
    return (f(x) - s * x) - (f(z) - s * z)
  end, slope_at(right), slope_at(left)))
end

---Compositions of the two phases in equilibrium (common tangent) at a temperature: two numbers, or nil.
function Solution:binodal(T)
  local L = terms_at(self, T)
  local a, b = self:spinodal(T)
  if not a then return nil end
  return M.common_tangent(function(x) return g(x, T, L) end, function(x) return slope(x, T, L) end, a, b)
end

---Second derivative of the energy per volume (J/m^3) at a composition and temperature.
function Solution:bend(x, T) return bend(x, T, terms_at(self, T)) / self.molar_volume end

---Mobility for the energy per volume, from tracer diffusivities (Darken, Trans. AIME 175 (1948) 184):
---  M = (Vm / R T) x (1-x) [ x D_solvent + (1-x) D_solute ],  D = D0 exp(-Q / R T),
---so that dx/dt = div(M grad df/dx) with f = g/Vm becomes D_solute lap x in the dilute limit (g'' -> R T / x).
function M.mobility(t)
  local o = options.read(t, "thermo.mobility", { { "x", "formula", required = true }, { "T", "formula", required = true },
    { "molar_volume", "positive", required = true }, { "solvent", "table", required = true }, { "solute", "table", required = true },
    { "at", "number" } })
  local function arrhenius(side)
    local d = options.read(o[side], "thermo.mobility " .. side, { { "D0", "positive", required = true }, { "Q", "number", required = true } })
    return d.D0 * exp(-d.Q / (R * o.T))
  end
  local x = o.at or o.x -- `at`: the composition factor taken at one composition (a constant mobility)
  return o.molar_volume / (R * o.T) * x * (1 - x) * (x * arrhenius("solvent") + (1 - x) * arrhenius("solute"))
end

---Gradient energy coefficient kappa of (kappa/2)|grad x|^2 from a measured early wavelength: the fastest wave has
---  lambda = 2 pi sqrt(2 kappa / -f'')   (Cahn, Acta Metall. 9 (1961) 795, in this convention).
---A measured wavelength is somewhat larger than the fastest one, since the pattern coarsens while it grows.
function M.kappa_from(t)
  local o = options.read(t, "thermo.kappa_from", { { "wavelength", "positive", required = true }, { "at", "positive", required = true },
    { "alloy", "table", required = true }, { "x", "number", required = true } })
  if getmetatable(o.alloy) ~= Solution then core.fail("thermo.kappa_from: alloy has to be what thermo.solution gave") end
  local f2 = o.alloy:bend(o.x, o.at)
  if f2 >= 0 then
    core.fail(string.format("thermo.kappa_from: at %.4g K the composition %.4g lies outside the spinodal, so no wave grows there", o.at, o.x))
  end
  return -f2 * (o.wavelength / (2 * math.pi)) ^ 2 / 2
end

return M
