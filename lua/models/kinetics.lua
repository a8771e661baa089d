-- How mobilities and rates change with temperature, and where they come to rest. T, w and Tg may be numbers, params or formulas: a glass
-- temperature that follows the composition arrests one phase while the other still moves. These are temperature factors of
-- diffusion alone: a melt or solution also flows, which no model here describes, so late stages of a fluid are slower here than real.
--   local kinetics = require "kinetics"
--   local Tg = kinetics.fox{ w = phi, Tg1 = 373, Tg2 = 250 }
--   m:conserve(phi, { mobility = kinetics.wlf{ T = T, Tg = Tg, M0 = 1e-3 } })
local M = {}

-- M0: mobility, diffusivity or rate: of arrhenius and vft at infinite T, of wlf at Tg. Q in J/mol. B, T0 and c2 in K. c1 and c2 are
-- the values that Williams, Landel & Ferry found to fit many polymers (from memory). w: weight fraction of component 1.
local defaults = { T = false, M0 = 1, Q = false, B = false, T0 = false, Tg = false, c1 = 17.44, c2 = 51.6, w = false, Tg1 = false,
  Tg2 = false, k = 1, slowest = false }
local R = 8.31446261815324 -- J/mol/K, CODATA 2018

-- The options with their defaults. The same table may go to every function; `...` names what one cannot do without.
local function options(t, ...)
  local o = setmetatable({}, { __index = defaults })
  for k, v in pairs(t or {}) do
    if defaults[k] == nil then error("kinetics: there is no option '" .. tostring(k) .. "'", 3) end
    if type(v) ~= "number" and type(v) ~= "userdata" then error("kinetics: option '" .. k .. "' has to be a number or formula, found a " .. type(v), 3) end
    o[k] = v
  end
  for _, k in ipairs{ ... } do
    if not o[k] then error("kinetics: option '" .. k .. "' is missing", 3) end
  end
  return o
end

---M0 exp(-Q / R T): hopping over one barrier.
function M.arrhenius(t) local o = options(t, "T", "Q"); return o.M0*exp(-o.Q/(R*o.T)) end

---M0 exp(-B / (T - T0)), nothing below T0 (Vogel 1921, Fulcher 1925, Tammann & Hesse 1926).
function M.vft(t) local o = options(t, "T", "B", "T0"); return o.M0*exp(-o.B/max(o.T - o.T0, o.B/700)) end -- exp(-700) is a number

---M0 10^(c1 (T - Tg)/(c2 + T - Tg)) above Tg (Williams, Landel & Ferry, J. Am. Chem. Soc. 77 (1955) 3701). Below Tg, where the glass
---no longer follows its equilibrium, an Arrhenius law of the same slope at Tg: ten degrees cost some four decades.
function M.wlf(t)
  local o = options(t, "T", "Tg")
  local up, down = max(o.T - o.Tg, 0), min(o.T - o.Tg, 0)
  return o.M0*exp(math.log(10)*o.c1*(up/(o.c2 + up) + down*o.Tg/(o.c2*o.T)))
end

---Where wlf has fallen to the mobility `slowest` that still matters in the time at hand: the arrest.
function M.arrest(t)
  local o = options(t, "Tg", "slowest")
  local y = math.log(o.slowest/o.M0, 10)
  return o.Tg + (y > 0 and o.c2*y/(o.c1 - y) or y*o.c2*o.Tg/(o.c1*o.Tg - y*o.c2))
end

---Glass temperature of a mixture: Fox (Bull. Am. Phys. Soc. 1 (1956) 123), Gordon & Taylor (J. Appl. Chem. 2 (1952) 493).
function M.fox(t) local o = options(t, "w", "Tg1", "Tg2"); return 1/(o.w/o.Tg1 + (1 - o.w)/o.Tg2) end
function M.gordon_taylor(t)
  local o = options(t, "w", "Tg1", "Tg2")
  return (o.w*o.Tg1 + o.k*(1 - o.w)*o.Tg2)/(o.w + o.k*(1 - o.w))
end

return M
