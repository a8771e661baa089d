-- Motions as scripts write them: matrices, sources, imposed velocities, kept means, thermal noise, filters, and what is refused.
local function same(got, wanted, what)
  if got ~= wanted then error(string.format("%s: %s, expected %s", what or "value", tostring(got), tostring(wanted)), 2) end
end
local function near(got, wanted, tolerance, what)
  if not (math.abs(got - wanted) <= tolerance) then error(string.format("%s: %.15g, expected %.15g", what, got, wanted), 2) end
end
local function refused(words, f, ...)
  local ok, message = pcall(f, ...)
  if ok then error("not refused: " .. words, 2) end
  if not tostring(message):find(words, 1, true) then error(string.format("expected '%s' in: %s", words, message), 2) end
end

local g = grid{ cells = {32, 16}, spacing = {0.5, 1} }
local k = 2*math.pi*2/16
local function cosine(mean, a) return mean + a*cos(k*g.x) end
local function amplitude_of(f) return now(mean(2*f*cos(k*g.x))) end

-- filter: by its function and grid one table; a screened interaction solves (1 - laplacian) v = c
local c = g:field("c", cosine(0.3, 0.01))
local function screened(q) return 1/(1 + q^2) end
same(tostring(filter(c, screened) - filter(c, screened)), "0", "one filter")
near(amplitude_of(filter(c, screened)), 0.01/(1 + k^2), 1e-14, "screened")
near(amplitude_of(filter(c, function(kx, ky) return kx^2 end) + dx(dx(c))), 0, 1e-13, "a filter and a derivative")
near(now(mean(filter(c, screened))), 0.3, 1e-14, "at k = 0")
same(tostring(filter(2*c, screened)), "2*filter(c)", "a number comes out")
local lr = model{ energy = 0.5*c*filter(c, screened) }
same(tostring(lr:potential(c)), "filter(c)", "self-adjoint")

-- a matrix: dc/dt of two species whose sum of potentials moves both
local a, b = g:field("a", cosine(0.3, 0.01)), g:field("b", cosine(0.4, -0.02))
local m = model{ energy = 0.5*(a^2 + 2*b^2) }
m:conserve({ a, b }, { mobility = { { 1, 0.5 }, { 0.5, 1 } } })
m:record{ mean(a), mean(b), every = 0.1 }
m:run{ duration = 0.1, accuracy = 1e-5 }
-- d(a, b)/dt = -k^2 [[1, .5], [.5, 1]] [[1, 0], [0, 2]] (a, b): by the series of the exponential
local va, vb, ta, tb = 0.01, -0.02, 0.01, -0.02
for n = 1, 40 do
  local f = -k^2*0.1/n
  ta, tb = f*(ta + tb), f*(0.5*ta + 2*tb)
  va, vb = va + ta, vb + tb
end
near(amplitude_of(a), va, 1e-7, "first species"); near(amplitude_of(b), vb, 1e-7, "second species")
near(now(mean(a)), 0.3, 1e-15, "its mean"); near(now(mean(b)), 0.4, 1e-15, "its mean")

-- carried, with a source; a list for each field
local u, w = g:field("u", cosine(0.5, 0.1)), g:field("w", 0.2)
local mu = model{ energy = 0.5*u^2 + 0.5*w^2 }
mu:conserve({ u, w }, { mobility = { { 0.01, 0 }, { 0, 0.01 } }, velocity = { 2, 0 }, source = { 0, 0.3 } })
mu:record{ mean(u), every = 1 }
mu:run{ duration = 1, accuracy = 1e-5 }
near(now(mean(2*u*cos(k*(g.x - 2)))), 0.1*math.exp(-0.01*k^2), 1e-5, "carried along"); near(now(mean(u)), 0.5, 1e-13, "and conserved")
near(now(mean(w)), 0.5, 1e-12, "a source moves the mean")
local v = g:field("v", cosine(0, 0.1))
local mv = model{}
mv:evolve(v, 0.01*laplacian(v), { velocity = { 0, 3 }, source = 1 })
mv:run{ duration = 1 }
near(now(mean(v)), 1, 1e-12, "evolve with a source")

-- a kept mean
local e = g:field("e", 0.4 + 0.1*noise.uniform{ seed = 3 })
local me = model{ energy = e^2*(1 - e)^2 + 0.5*gradsq(e) }
local before = now(mean(e))
me:relax(e, { rate = 1, keep_mean = true })
me:run{ duration = 5 }
near(now(mean(e)), before, 1e-14, "kept")

-- noise: the same for a seed, another for another; the mean stays; amplitudes of the right size (equipartition in a parabola)
local function noisy(seed, threads)
  local f = g:field("f" .. seed .. threads, 0.1)
  local mf = model{ energy = 2*f^2 }
  mf:relax(f, { rate = 1, keep_mean = true, thermal_noise = { kT = 0.02, seed = seed, thickness = 0.5 } })
  mf:record{ variance(f), every = 5 }
  mf:run{ duration = 5 }
  near(now(mean(f)), 0.1, 1e-14, "mean under noise")
  return now(variance(f))
end
local one = noisy(1, "a")
same(noisy(1, "b"), one, "a seed repeats"); if noisy(2, "a") == one then error("another seed, another noise") end
-- kT / (f'' times the cell's volume), over all modes but those projected out; 3 standard deviations of 31 * 15 modes
near(one, 0.02/(4*0.5*0.5)*(31*15 - 1)/(32*16), 0.02*3*math.sqrt(2/(31*15)), "equipartition")
local q = g:field("q", 0)
local mq = model{ energy = 2*q^2 }
mq:relax(q, { rate = 1 })
set(q, 0.3 + noise.equilibrium{ model = mq, field = q, kT = 0.02, thickness = 0.5, seed = 1 })
near(now(mean(q)), 0.3, 1e-14, "a start's mean"); near(now(variance(q)), 0.02*(31*15 - 1)/(32*16), 0.02*3*math.sqrt(2/(31*15)), "drawn")

-- options of a later run are its own
local z = g:field("z", cosine(0, 1))
local mz = model{}
mz:evolve(z, -z)
mz:record{ mean(z), every = 1 }
mz:run{ duration = 1, step = 0.01, method = "Euler" }
local fine = amplitude_of(z)*math.exp(1) - 1
mz:run{ duration = 1, step = 0.1, method = "Euler" }
local coarse = amplitude_of(z)*math.exp(2) - 1
if math.abs(coarse) < 5*math.abs(fine) then error("the second run kept the first one's steps") end

-- what is refused, and how
refused("has to be even", filter, c, function(kx, ky) return kx end)
refused("(0, 0)", filter, c, function(q) return 1/q end)
refused("has to give a real number, found table", filter, c, function(q) return {} end)
refused("function of the wavenumber", filter, c, 2)
refused("0 arguments", filter, c, function() return 1 end)
local r1, r2 = g:field("r1", 0.1), g:field("r2", 0.1)
local mr = model{ energy = r1^2 + r2^2 }
refused("a row for each of the 2 fields", mr.conserve, mr, { r1, r2 }, { mobility = { { 1, 0 } } })
refused("row 2 of mobility", mr.conserve, mr, { r1, r2 }, { mobility = { { 1, 0 }, { 0 } } })
refused("mobility[1][2]", mr.conserve, mr, { r1, r2 }, { mobility = { { 1, "x" }, { 0, 1 } } })
refused("'rate' is missing", mr.relax, mr, r1, {})
refused("'mobilty'", mr.conserve, mr, r1, { mobilty = 1 })
refused("found nil", mr.conserve, mr, r1, { mobility = 1, velocity = { 1 } })
mr = model{ energy = r1^2 + r2^2 }
refused("no units", mr.relax, mr, r1, { rate = 1, thermal_noise = { T = 300, seed = 1, thickness = 1 } })
mr = model{ energy = r1^2 + r2^2 }
refused("needs thickness", mr.relax, mr, r1, { rate = 1, thermal_noise = { kT = 300, seed = 1 } })
mr = model{ energy = r1^2 + r2^2 }
refused("either T", mr.relax, mr, r1, { rate = 1, thermal_noise = { seed = 1, thickness = 1 } })
mr = model{ energy = r1^2 + r2^2 }
refused("same in every cell", mr.relax, mr, r1, { rate = 1 + r1^2, keep_mean = true })
refused("no equilibrium fluctuations", set, r1, noise.equilibrium{ model = (function()
  local x = model{ energy = -r2^2 + 0.5*gradsq(r2) }
  x:relax(r2, { rate = 1 })
  return x
end)(), field = r2, kT = 1, thickness = 1, seed = 1 })
refused("scalar formula", model, { energy = grad(c) })
refused("take its divergence", me.evolve, model{}, r1, grad(r1))
refused("none with respect to '3'", derivative, c^2, 3)
local bad = model{}
bad:evolve(r2, -laplacian(r2))
refused("no stable implicit part", bad.run, bad, { duration = 1 })
refused('"SBDF2", "ETDRK2" or "Euler"', me.run, me, { duration = 1, method = "magic" })
