-- Three components, two of them fields: a and b, the third is 1 - a - b. Regular solution, T sum(x ln x) + sum over pairs L x_i x_j, with
-- a gradient energy of each component, (kappa_i/2)|grad x_i|^2. Mobilities come from three tracer diffusivities by Onsager's relations
-- on one lattice (Andersson & Agren, J. Appl. Phys. 72 (1992) 1350): M_ij = sum_k (d_ik - x_i)(d_jk - x_j) x_k D_k, which is symmetric,
-- conserves the sum of the three and is positive semidefinite whatever the diffusivities.
--   local ternary = require "ternary"
--   local o = { a = a, b = b, L12 = 3, L13 = 3.4, L23 = 1, D1 = 1, D2 = 0.2, D3 = 0.5 }
--   local m = model{ energy = ternary.energy(o) }
--   m:conserve({a, b}, { mobility = ternary.mobility(o) })
local M = {}

-- T: R times temperature in the unit of the L; D: tracer diffusivities, in the limit of high dilution those of Fick's law
local defaults = { a = false, b = false, T = 1, L12 = 0, L13 = 0, L23 = 0, kappa1 = 1, kappa2 = 1, kappa3 = 1, D1 = 1, D2 = 1, D3 = 1 }

-- The options with their defaults. The same table may go to every function; `...` names what one cannot do without.
local function options(t, ...)
  local o = setmetatable({}, { __index = defaults })
  for k, v in pairs(t or {}) do
    if defaults[k] == nil then error("ternary: there is no option '" .. tostring(k) .. "'", 3) end
    if type(v) ~= "number" and type(v) ~= "userdata" then error("ternary: option '" .. k .. "' has to be a number or formula, found a " .. type(v), 3) end
    o[k] = v
  end
  for _, k in ipairs{ ... } do
    if not o[k] then error("ternary: option '" .. k .. "' is missing", 3) end
  end
  return o
end

---Energy density.
function M.energy(t)
  local o = options(t, "a", "b")
  local a, b, c = o.a, o.b, 1 - o.a - o.b
  return o.T*(a*log(a) + b*log(b) + c*log(c)) + o.L12*a*b + o.L13*a*c + o.L23*b*c +
    o.kappa1/2*gradsq(a) + o.kappa2/2*gradsq(b) + o.kappa3/2*gradsq(a + b)
end

---The symmetric matrix { {Maa, Mab}, {Mab, Mbb} } for m:conserve{a, b}; with numbers for a and b a constant one, which is cheaper.
---The third component's potential is subtracted from both, and its flux is minus the sum of theirs.
function M.mobility(t)
  local o = options(t, "a", "b")
  local a, b, c = o.a, o.b, 1 - o.a - o.b
  local mean = a*o.D1 + b*o.D2 + c*o.D3
  local Mab = a*b*(mean - o.D1 - o.D2)/o.T
  return { { a*(o.D1 + a*(mean - 2*o.D1))/o.T, Mab }, { Mab, b*(o.D2 + b*(mean - 2*o.D2))/o.T } }
end

---Smaller eigenvalue of the energy's second derivatives at a composition in numbers: negative where small waves grow.
function M.stability(t)
  local o = options(t, "a", "b")
  local c = 1 - o.a - o.b
  local aa, bb, ab = o.T*(1/o.a + 1/c) - 2*o.L13, o.T*(1/o.b + 1/c) - 2*o.L23, o.T/c + o.L12 - o.L13 - o.L23
  return (aa + bb)/2 - sqrt((aa - bb)^2/4 + ab^2)
end

return M
