-- thermo against closed forms and numbers solved elsewhere: spinodal and common tangent of regular and sub-regular solutions, the
-- mobility's dilute limits seen in the solver itself, the wavelength that fixes kappa.
local thermo = require "thermo"
local R = 8.31446261815324 -- CODATA 2018
local function near(a, b, rtol, what)
  if not (math.abs(a - b) <= rtol*math.abs(b)) then error(string.format("%s: %.15g, expected %.15g", what, a, b), 2) end
end

local g = grid{ cells = {64}, spacing = 0.5*unit.nm }
local x = g:field("x", 0.3)
local T = param("T", 900)
local function solution(interaction) return thermo.solution{ x = x, T = T, molar_volume = 7e-6, interaction = interaction } end

-- Redlich & Kister, Ind. Eng. Chem. 40 (1948) 345 states the polynomial; the compositions were solved from the common-tangent
-- conditions with 30 digits (closed forms for the regular solution: Hillert, Phase Equilibria, CUP 2008, cited from memory).
for _, case in ipairs{
  { {20000}, 900, 0.111249378599, 1 - 0.111249378599, 0.24915225516, 1 - 0.24915225516 },
  { {25000}, 1000, 0.0700892784951, 1 - 0.0700892784951, 0.210671903133, 1 - 0.210671903133 },
  { {20000, 5000}, 900, 0.0450829559713, 0.817966098443, 0.141796875198, 0.631019163827 },
  { {15000, -3000}, 700, 0.19056460979, 0.936569638038, 0.364557442304, 0.833906715733 },
  { {25000, 8000, 2000}, 1100, 0.025407339987, 0.81138406105, 0.102631546667, 0.593071404652 },
  { {2*R*1000}, 250, 0.0003371634924459, 1 - 0.0003371634924459, 0.06698729810778, 1 - 0.06698729810778 },
} do
  local s = solution(case[1])
  local a, b = s:binodal(case[2])
  local c, d = s:spinodal(case[2])
  near(a, case[3], 1e-9, "poor phase"); near(b, case[4], 1e-9, "rich phase")
  near(c, case[5], 1e-9, "poor end of the spinodal"); near(d, case[6], 1e-9, "rich end of the spinodal")
end
assert(solution{ 20000 }:spinodal(1203) == nil and solution{ 20000 }:binodal(1203) == nil, "no gap above the critical temperature, 1202.7 K")

-- interaction terms may be formulas of T; the formula's own second derivative is the number's
local s = solution{ 26500 - 4.2*T, 1800 }
for _, x0 in ipairs{ 0.1, 0.42, 0.9 } do
  set(x, x0)
  near(now(mean(derivative(derivative(s.density, x), x))), s:bend(x0, 900), 1e-12, "second derivative")
  local L = (26500 - 4.2*900) + 1800*(1 - 2*x0)
  near(now(mean(s.molar)), R*900*(x0*log(x0) + (1 - x0)*log(1 - x0)) + x0*(1 - x0)*L, 1e-12, "molar energy")
end

-- the fastest wave of the model is the wavelength kappa was made from
local kappa = thermo.kappa_from{ wavelength = 6*unit.nm, at = 820, alloy = s, x = 0.42 }
near(2*math.pi*sqrt(2*kappa/-s:bend(0.42, 820)), 6e-9, 1e-14, "fastest wavelength")

-- Darken, Trans. AIME 175 (1948) 184: a dilute wave decays with its own tracer diffusivity, whichever side is dilute.
-- In an ideal solution the interdiffusivity is x D_solvent + (1-x) D_solute exactly, so the rate is known at any x.
local side = { D0 = 2e-5, Q = 150e3 }
local other = { D0 = 7e-6, Q = 140e3 }
local function D(d) return d.D0*exp(-d.Q/(R*900)) end
for _, x0 in ipairs{ 1e-3, 0.4, 1 - 1e-3 } do
  local ripple = 1e-3*min(x0, 1 - x0)
  local y = g:field("y" .. x0, x0 + wave{ wavelength = 16*unit.nm, amplitude = ripple })
  local ideal = thermo.solution{ x = y, T = T, molar_volume = 7e-6 }
  local m = model{ energy = ideal.density }
  m:conserve(y, { mobility = thermo.mobility{ x = y, T = T, molar_volume = 7e-6, solvent = side, solute = other } })
  local rate = (x0*D(side) + (1 - x0)*D(other))*(2*math.pi/16e-9)^2
  m:run{ duration = 1/rate, accuracy = 1e-7 }
  near(sqrt(2*now(variance(y))), ripple*exp(-1), 1e-3, "amplitude after the time 1/(D k^2) at x = " .. x0)
end
