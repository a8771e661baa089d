-- The bundled models against closed forms, published theory and numbers solved elsewhere.
local R = 8.31446261815324 -- CODATA 2018
local function near(a, b, rtol, what)
  if not (math.abs(a - b) <= rtol*math.abs(b)) then error(string.format("%s: %.15g, expected %.15g", what, a, b), 2) end
end
local g = grid{ cells = {64}, spacing = 0.5 }

do -- a planar interface brought to rest by relaxation has the energy and the width that the helpers say
  local well = require "double_well"
  local o = { low = 0.2, high = 0.9, barrier = 0.05, kappa = 0.7 }
  local walled = grid{ cells = {256}, spacing = 0.125, walls = "mirror" }
  o.c = walled:field("c", 0.55 + 0.35*tanh((walled.x - 16.0625)/2))
  local m = model{ energy = well.energy(o) }
  m:relax(o.c, { rate = 1 })
  m:run{ duration = 400 }
  local sigma, width = well.interface(o)
  near(now(m:energy()), sigma, 1e-6, "double_well: interface energy")
  -- a tanh profile is steepest at its middle, here the centre of a cell: step times 2 ln 9 / (4 width)
  near(now(maximum(dx(o.c))), 0.7*2*math.log(9)/(4*width), 1e-4, "double_well: width by the steepest slope")
  local b, k = well.from_interface{ low = 0.2, high = 0.9, energy = sigma, width = width }
  near(b, 0.05, 1e-12, "barrier"); near(k, 0.7, 1e-12, "kappa")
end

-- Second derivative of a density at a composition, from the formula itself.
local probe = g:field("probe", 0)
local function bend(energy, at)
  set(probe, at)
  return now(mean(derivative(derivative(energy, probe), probe)))
end

do -- small waves grow where the formula's own second derivative is negative, fastest at 2 pi sqrt(2 kappa / -f'') (Cahn 1961)
  local well = require "double_well"
  local o = { low = -1, high = 3, barrier = 0.3, kappa = 0 }
  o.c = probe
  local e = well.energy(o)
  for _, edge in ipairs{ well.spinodal(o) } do assert(math.abs(bend(e, edge)) < 1e-14, "double_well: spinodal") end
  o.kappa, o.c = 0.4, 1.2
  near(well.fastest_wavelength(o), 2*math.pi*math.sqrt(0.8/-bend(e, 1.2)), 1e-13, "double_well: fastest wavelength")
  o.c = 2.9
  assert(well.fastest_wavelength(o) == nil, "no wave grows outside the spinodal")

  local solution = require "solution"
  local s = { interaction = {2.6, 0.7}, T = 0.9, kappa = 0 }
  s.x = probe
  e = solution.energy(s)
  for _, edge in ipairs{ solution.spinodal(s) } do assert(math.abs(bend(e, edge)) < 1e-10, "solution: spinodal") end
  s.kappa, s.x = 2, 0.4
  near(solution.fastest_wavelength(s), 2*math.pi*math.sqrt(4/-bend(e, 0.4)), 1e-12, "solution: fastest wavelength")
end

do -- numbers solved with 30 digits from the common-tangent conditions
  local solution = require "solution"
  for _, case in ipairs{
    { {2}, 0.25, 0.0003371634924459, 1 - 0.0003371634924459, 0.06698729810778 }, { {2}, 0.8, 0.1447941082561, 1 - 0.1447941082561, 0.27639320225 },
    { {20000, 5000}, R*900, 0.0450829559713, 0.817966098443, 0.141796875198 },
    { {25000, 8000, 2000}, R*1100, 0.025407339987, 0.81138406105, 0.102631546667 },
  } do
    local o = { interaction = case[1], T = param("T" .. case[2], case[2]) }
    local a, b = solution.binodal(o)
    near(a, case[3], 1e-9, "poor phase"); near(b, case[4], 1e-9, "rich phase"); near((solution.spinodal(o)), case[5], 1e-9, "spinodal")
  end
  near(solution.critical{ interaction = {3} }, 1.5, 0, "critical temperature")
  assert(solution.binodal{ interaction = {2}, T = 1.01 } == nil, "no gap above the critical temperature")
end

do -- order and disorder at rest, with kappa_c = 0: the interface's energy; far from it each phase at its own composition
  local order = require "order_and_composition"
  local walled = grid{ cells = {256}, spacing = 0.125, walls = "mirror" }
  local o = { kappa_c = 0, kappa_eta = 1.2, barrier = 0.1, stiffness = 1, ordered = 0.5, disordered = 0.2 }
  o.eta = walled:field("eta", 0.5 + 0.5*tanh(walled.x - 16))
  o.c = walled:field("c", 0.2 + 0.3*order.order(o.eta))
  local m = model{ energy = order.energy(o) }
  m:relax(o.eta, { rate = 1 })
  m:relax(o.c, { rate = 1 })
  m:run{ duration = 300 }
  near(now(m:energy()), order.interface_energy(o), 1e-5, "order_and_composition: interface energy")
  near(now(maximum(o.c)), 0.5, 1e-4, "ordered phase"); near(now(minimum(o.c)), 0.2, 1e-4, "disordered phase")
  near(order.order(-1), 1, 0, "the second variant is as ordered as the first")
  near(order.ordered_fraction{ mean = 0.3, ordered = 0.5, disordered = 0.2 }, 1/3, 1e-12, "lever rule")
end
