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

do -- Flory & Huggins: critical points in closed form, gaps solved with 30 digits (formulas re-derived)
  local blend = require "polymer_blend"
  for _, case in ipairs{ {1, 1, 2, 0.5}, {100, 100, 0.02, 0.5}, {1, 100, 0.605, 0.9090909090909}, {200, 800, 0.005625, 0.6666666666667} } do
    local chi, phi = blend.critical{ N1 = case[1], N2 = case[2] }
    near(chi, case[3], 1e-12, "critical chi"); near(phi, case[4], 1e-12, "critical phi")
  end
  for _, case in ipairs{ {100, 100, 0.025, 0.27639320225, 0.72360679775, 0.1447941082561, 0.8552058917439},
    {1, 100, 0.7, 0.733995221123, 0.9731476360199, 0.628637324704, 0.9984985558232},
    {200, 800, 0.006, 0.5379394094625, 0.7745605905375, 0.4488006227072, 0.8473408986088} } do
    local o = { N1 = case[1], N2 = case[2], chi = case[3] }
    local a, b = blend.spinodal(o)
    local c, d = blend.binodal(o)
    near(a, case[4], 1e-11, "spinodal"); near(b, case[5], 1e-11, "spinodal"); near(c, case[6], 1e-9, "binodal"); near(d, case[7], 1e-9, "binodal")
  end
  assert(blend.spinodal{ N1 = 100, N2 = 100, chi = 0.0199 } == nil and blend.binodal{ N1 = 100, N2 = 100, chi = 0.0199 } == nil, "no gap")
  -- de Gennes: kappa = a^2/(18 phi (1-phi)), so 2/9 at phi = 1/2 and a = 1
  local o = { N1 = 50, N2 = 80, chi = 0.05, a = 1 }
  o.phi = 0.5
  near(blend.fastest_wavelength(o), 2*math.pi*math.sqrt(2*(2/9)/(2*0.05 - 1/25 - 1/40)), 1e-13, "fastest wavelength")
  -- a small ripple: the energy beside its mean is the density's curvature and kappa k^2 at once
  local ripple, k = 1e-4, 2*math.pi/16
  o.phi = probe
  set(probe, 0.5)
  local flat, e = now(mean(blend.energy(o))), blend.energy(o)
  set(probe, 0.5 + wave{ wavelength = 16, amplitude = ripple })
  near(4*(now(mean(e)) - flat)/ripple^2, 1/25 + 1/40 - 2*0.05 + 2/9*k^2, 1e-5, "energy of a ripple")
end

do -- Ohta & Kawasaki: periods in closed form (re-derived), and the rate at which a wave grows in the solver itself
  local copolymer = require "block_copolymer"
  for _, case in ipairs{ {1, 0.05, 13.28731917337, 12.18732303156}, {1, 0.1, 11.17325906122, 9.673084700488}, {0.5, 0.2, 6.643659586684, 6.09366151578} } do
    local weak, strong = copolymer.period{ eps = case[1], sigma = case[2] }
    near(weak, case[3], 1e-12, "weak period"); near(strong, case[4], 1e-12, "strong period")
  end
  assert(copolymer.unstable{ sigma = 0.2499 } and not copolymer.unstable{ sigma = 0.2501 }, "onset at 2 eps sqrt(sigma) = 1")
  local o = { sigma = 0.1, eps = 0.8, mean = 0.2 }
  o.u = g:field("u", 0.2 + wave{ wavelength = 8, amplitude = 1e-5 })
  local m = model{ energy = copolymer.energy(o) }
  m:conserve(o.u, { mobility = 1 })
  m:run{ duration = 5, accuracy = 1e-6 }
  near(math.log(sqrt(2*now(variance(o.u)))/1e-5)/5, copolymer.growth(2*math.pi/8, { sigma = 0.1, eps = 0.8, mean = 0.2 }), 1e-4, "growth")
  -- lamellae of one period, energy at rest: solved by 64-point Fourier minimisation
  local box = grid{ cells = {64}, spacing = 13.54938802934/64 }
  local v = box:field("v", wave{ wavelength = 13.54938802934, amplitude = 0.5 })
  local lamellae = model{ energy = copolymer.energy{ u = v } }
  lamellae:conserve(v, { mobility = 1 })
  lamellae:run{ duration = 300 }
  near(now(lamellae:energy())/13.54938802934, 0.1957196341974, 1e-7, "energy of lamellae")
end

do -- Elder & Grant: one-mode amplitudes and energies (confirmed by numerical minimisation), and the formula's own energy for that state
  local crystal = require "crystal_density"
  for _, case in ipairs{ {-0.25, -0.25, 0.5265986323711, 0.02107794433814, 0.2886751345948, 0.02376302083333, 0.0244140625},
    {-0.25, -0.285, 0.4703441079677, 0.03058751238842, 0.09183318209304, 0.03210208255208, 0.03210875015625},
    {-0.1, -0.18, 0.2980216435007, 0.01459579035135, 0.06110100926608, 0.01484113333333, 0.01484244} } do
    local o = { r = case[1], mean = case[2] }
    local A, S = crystal.amplitudes(o)
    local melt, lattice, stripes = crystal.energies(o)
    near(A, -case[3], 1e-11, "amplitude"); near(lattice, case[4], 1e-11, "lattice"); near(S, case[5], 1e-11, "stripes"); near(stripes, case[6], 1e-11, "stripes")
    near(melt, case[7], 1e-12, "without waves")
    local cell = grid{ cells = {16, 28}, spacing = {crystal.spacing/16, math.sqrt(3)*crystal.spacing/28} }
    o.x, o.y = cell.x, cell.y
    o.psi = cell:field("psi", o.mean + crystal.wave(o))
    near(now(mean(crystal.energy(o))), case[4], 1e-11, "energy of the lattice as a field")
    near(sqrt(now(variance(o.psi))), case[3]*math.sqrt(3/8), 1e-11, "turned by nothing")
  end
  near(crystal.spacing, 7.255197456937, 1e-12, "lattice constant")
  assert(crystal.amplitudes{ r = -0.25, mean = -0.5 } == nil, "no lattice in the melt")
end

do -- a boundary at rest and a round grain that shrinks at 2 pi kappa rate (Allen & Cahn 1979)
  local grains = require "grains"
  local o = { height = 1.3, kappa = 0.9, rate = 0.7 }
  local sigma, width, loss = grains.boundary(o)
  local walled = grid{ cells = {256}, spacing = 0.125, walls = "mirror" }
  local profile = 0.5*tanh((walled.x - 16.0625)/1.5)
  o.fields = { walled:field("e1", 0.5 + profile), walled:field("e2", 0.5 - profile) }
  local m = model{ energy = (grains.energy(o)) }
  for _, e in ipairs(o.fields) do m:relax(e, { rate = 0.7 }) end
  m:run{ duration = 60 }
  near(now(m:energy()), sigma, 1e-6, "energy of a boundary")
  near(now(maximum(dx(o.fields[1]))), 2*math.log(9)/(4*width), 1e-4, "width of a boundary")
  local box = grid{ cells = {96, 96}, spacing = 0.5 }
  local r = sqrt((box.x - 24)^2 + (box.y - 24)^2)
  o.fields = { box:field("inside", 0.5 - 0.5*tanh((r - 16)/1.7)), box:field("outside", 0.5 + 0.5*tanh((r - 16)/1.7)) }
  m = model{ energy = (grains.energy(o)) }
  for _, e in ipairs(o.fields) do m:relax(e, { rate = 0.7 }) end
  local area = integral(above(o.fields[1], o.fields[2]))
  m:run{ duration = 5 }
  local before = now(integral(o.fields[1]))
  m:run{ duration = 50 }
  near(before - now(integral(o.fields[1])), 50*loss, 0.02, "area that a round grain loses")
  o.fields = nil
  local list = grains.fields(box, { grains = 7, count = 3, radius = 3 })
  assert(#list == 3 and now(domain_count(list[1], { level = 0.5 })) == 3, "nuclei")
end

do -- ternary: Onsager's matrix conserves and is no less than zero; dilute components diffuse with their own tracer diffusivities
  local ternary = require "ternary"
  local D = { 1, 0.02, 7 }
  for _, x in ipairs{ {0.3, 0.3}, {0.9, 0.05}, {0.01, 0.98}, {0.2, 0.01} } do
    local M = ternary.mobility{ a = x[1], b = x[2], D1 = D[1], D2 = D[2], D3 = D[3], T = 1.7 }
    local X, full = { x[1], x[2], 1 - x[1] - x[2] }, {}
    for i = 1, 3 do
      full[i] = {}
      for j = 1, 3 do
        full[i][j] = 0
        for k = 1, 3 do full[i][j] = full[i][j] + ((i == k and 1 or 0) - X[i])*((j == k and 1 or 0) - X[j])*X[k]*D[k]/1.7 end
      end
      assert(math.abs(full[i][1] + full[i][2] + full[i][3]) < 1e-15, "the three fluxes sum to nothing")
    end
    for i = 1, 2 do for j = 1, 2 do near(M[i][j], full[i][j], 1e-12, "mobility " .. i .. j) end end
    assert(M[1][1] > 0 and M[1][1]*M[2][2] - M[1][2]^2 > 0, "positive definite")
  end
  near(ternary.mobility{ a = 1e-9, b = 0.4, D1 = 3 }[1][1], 3e-9, 1e-6, "a dilute component: x D")
  -- the symmetric solution is critical at T = L/3 (at equal shares the second derivatives are 6T - 2L and 3T - L)
  local o = { L12 = 3, L13 = 3, L23 = 3, a = 1/3, b = 1/3 }
  assert(math.abs(ternary.stability(o)) < 1e-12, "critical point")
  o.T = 0.9
  assert(ternary.stability(o) < 0, "unstable below")
  -- without the third component it is the binary solution
  near(ternary.stability{ a = 0.3, b = 0.7 - 1e-9, L12 = 2.5 }, (1/0.3 + 1/0.7 - 5)/2, 1e-6, "binary limit")
end

do -- a flat front in a melt whose temperature stays: its speed in closed form; the anisotropy seen in the energy of tilted interfaces
  local solidification = require "solidification"
  local bar = grid{ cells = {400}, spacing = 0.5, walls = "mirror" }
  local o = { epsilon = 1.2, delta = 0, rate = 0.8, latent = 0, T = bar:field("T", 0.7) }
  o.p = bar:field("p", 0.5 - 0.5*tanh((bar.x - 40)/(2*math.sqrt(2)*1.2)))
  local m = model{ energy = solidification.energy(o) }
  solidification.move(m, o)
  m:run{ duration = 40, accuracy = 1e-3 }
  local from = now(integral(o.p))
  m:run{ duration = 100, accuracy = 1e-3 }
  near((now(integral(o.p)) - from)/100, solidification.speed{ epsilon = 1.2, rate = 0.8, T = 0.7 }, 2e-3, "speed of the front")
  -- heat and solid together are kept, within the accuracy of the steps: latent p - T does not change
  o.latent, o.delta = 1.6, 0.05
  local box = grid{ cells = {48, 48}, spacing = 1.5 }
  o.p, o.T = box:field("p", place{ radius = 10, value = 1, at = {{36, 36}} }), box:field("T", 0)
  m = model{ energy = solidification.energy(o) }
  solidification.move(m, o)
  local kept = now(mean(o.latent*o.p - o.T))
  m:run{ duration = 10, accuracy = 1e-3 }
  near(now(mean(o.latent*o.p - o.T)), kept, 5e-4, "heat")
  assert(now(mean(o.p)) > 1.2*kept/1.6, "the crystal grows")
  -- a(0) = 1 + delta, a(45 degrees) = 1 - delta: the gradient part of a wave's energy along x and along the diagonal
  local function gradient_energy(direction, k2)
    set(o.T, 1)
    set(o.p, 0.5 + wave{ wavelength = 72/math.sqrt(k2), amplitude = 0.5, direction = direction })
    o.delta = 0
    local round = now(mean(solidification.energy(o)))
    o.delta = 0.05
    return (now(mean(solidification.energy(o))) - round)/(1.2^2/2*(0.5*2*math.pi*math.sqrt(k2)/72)^2/2)
  end
  near(gradient_energy({1}, 4), 1.05^2 - 1, 0.03, "along x"); near(gradient_energy({1, 1}, 8), 0.95^2 - 1, 0.03, "along the diagonal")
end

do -- laws of temperature: published forms, their joints, and what they are at a formula
  local kinetics = require "kinetics"
  near(kinetics.arrhenius{ M0 = 2, Q = 1e5, T = 800 }, 2*math.exp(-1e5/(R*800)), 1e-14, "Arrhenius")
  near(kinetics.vft{ M0 = 3, B = 1200, T0 = 310, T = 400 }, 3*math.exp(-1200/90), 1e-14, "Vogel, Fulcher & Tammann")
  assert(kinetics.vft{ B = 1200, T0 = 310, T = 300 } < 1e-300, "nothing moves below T0")
  -- Williams, Landel & Ferry is Vogel, Fulcher & Tammann with T0 = Tg - c2 and B = ln(10) c1 c2, above Tg
  for _, T in ipairs{ 373, 380, 450 } do
    near(kinetics.wlf{ T = T, Tg = 373, M0 = 5 }, 5*10^17.44*math.exp(-math.log(10)*17.44*51.6/(T - 373 + 51.6)), 1e-11, "WLF as VFT")
  end
  local function slope(T) return (math.log(kinetics.wlf{ T = T + 1e-4, Tg = 373 }) - math.log(kinetics.wlf{ T = T - 1e-4, Tg = 373 }))/2e-4 end
  near(slope(373 - 1e-3), slope(373 + 1e-3), 1e-3, "no kink at Tg")
  near(math.log(kinetics.wlf{ T = 363, Tg = 373 }), math.log(10)*17.44*373^2/51.6*(1/373 - 1/363), 1e-12, "an Arrhenius law below Tg")
  for _, M in ipairs{ 1e-6, 0.3, 1e4 } do
    near(kinetics.wlf{ T = kinetics.arrest{ Tg = 373, slowest = M }, Tg = 373 }, M, 1e-9, "arrest is where wlf has fallen to")
  end
  near(kinetics.fox{ w = 0.3, Tg1 = 373, Tg2 = 250 }, 1/(0.3/373 + 0.7/250), 1e-14, "Fox")
  near(kinetics.gordon_taylor{ w = 0.3, Tg1 = 373, Tg2 = 250, k = 0.4 }, (0.3*373 + 0.28*250)/(0.3 + 0.28), 1e-14, "Gordon & Taylor")
  set(probe, 0.3)
  local T = param("T of kinetics", 360)
  near(now(mean(kinetics.wlf{ T = T, Tg = kinetics.fox{ w = probe, Tg1 = 373, Tg2 = 250 } })),
    kinetics.wlf{ T = 360, Tg = 1/(0.3/373 + 0.7/250) }, 1e-12, "as a formula")
end
