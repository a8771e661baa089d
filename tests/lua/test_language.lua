-- What the language promises, asked in the language itself: an assert that fails ends the run with exit code 2.
local function same(a, b, what)
  if a ~= b then error(string.format("%s: %s, expected %s", what or "value", tostring(a), tostring(b)), 2) end
end
local function near(a, b, tolerance, what)
  if not (math.abs(a - b) <= tolerance) then error(string.format("%s: %.15g, expected %.15g", what or "value", a, b), 2) end
end

-- order and chance are the same in every process
local keys = {}
for k in pairs{ pear = 1, apple = 2, [3] = 3, [1] = 1, quince = 3 } do keys[#keys + 1] = tostring(k) end
same(table.concat(keys, " "), "1 3 apple pear quince", "pairs")
same(next{ b = 1, a = 2 }, "a", "next")
-- what Lua 5.4 itself gives after math.randomseed(1, 0)
same(math.random(), 0.81558781554723059, "random"); same(math.random(1, 1000), 488, "random"); same(math.random(1, 1000), 418, "random")
same(math.randomseed, nil, "randomseed")

-- numbers stay numbers, formulas are algebra
same(exp(0), 1); same(max(2, 3, 1), 3); near(tanh(0.5), 0.46211715726001, 1e-13); same(type(log(2)), "number")
local g = grid{ cells = {48, 32}, spacing = {0.5, 1}, walls = {"periodic", "mirror"} }
local c = g:field("c", 0.5 + 0.1*cos(2*math.pi*g.x/12))
local eta = g:field("eta", 0.2)
for text, e in pairs{ ["c/eta"] = c/eta, ["0.5*gradsq(c)"] = gradsq(c)/2, ["5*c"] = 2*c + 3*c, ["0"] = tostring(c - c) == "0" and c - c,
  ["c^3"] = c*c*c, ["laplacian(c*eta)"] = laplacian(c*eta), ["max(c, eta)"] = max(c, eta), ["-c"] = -c } do
  same((tostring(e):gsub("^0%.5%*gradsq%(c%)$", "0.5*gradsq(c)"):gsub("^gradsq%(c%)/2$", "0.5*gradsq(c)")), text, "text")
end
same(tostring(dot(grad(c), grad(c))), "dx(c)^2 + dy(c)^2", "dot")
same(tostring(derivative(c^3*eta, c)), "3*c^2*eta", "derivative")
local m = model{ energy = c^2*(1 - c)^2 + 0.5*gradsq(c) + eta^2 }
same(tostring(m:potential(c)), "2*c - 6*c^2 + 4*c^3 - laplacian(c)", "potential")

-- measurements
near(now(mean(c)), 0.5, 1e-15, "mean"); near(now(variance(c)), 0.005, 1e-15, "variance")
near(now(maximum(c + eta)), 0.8, 2e-3, "maximum of a formula"); near(now(integral(eta)), 0.2*24*32, 1e-9, "integral")
near(now(mean(gradsq(c))), 0.01/2*(2*math.pi/12)^2, 1e-12, "spectral derivative")
same(now(domain_count(c, { level = 0.5 })), 2, "two stripes")
near(now(interface(c, { level = 0.5 })), 4*32, 1e-9, "interface")
near(now(wavelength(c)), 12, 1.2, "wavelength, to the width of a shell"); same(#now(domains(c)).sizes, 2, "sizes")
near(now(phase_fraction(c, { side = "below" })) + now(phase_fraction(c)), 1, 1e-15)
same(now(wavelength(g:field("noise", noise.normal{ seed = 4 }))), nil, "no wavelength in noise")

-- starts
near(now(mean(g:field("seeds", 0.1 + place{ radius = 3, count = 4, value = 1, seed = 2 }))), 0.1 + 4*math.pi*(9 + (math.pi*0.75)^2/12)/(24*32), 1e-3,
  "placed discs with edges of width 0.75")
near(now(variance(g:field("wave", wave{ wavelength = 6, amplitude = 0.2, direction = {1, 0} }))), 0.02, 1e-15, "wave")
set(eta, 0.2 + 0*c); near(now(mean(eta)), 0.2, 1e-15, "set")

-- hooks fire when they should, a schedule reaches its temperatures, time goes on through several runs
local T = param("T", 4)
m:conserve(c, { mobility = T/4 })
m:relax(eta, { rate = 1 })
local calls, at, crossed = {}, nil, nil
m:every(0.5, function(self) calls[#calls + 1] = self.time end)
m:at(0.75, function(self) at = self.time end)
m:when(function() return now(mean(eta)) < 0.1 end, function(self) crossed = self.time end)
m:record{ every = 0.25, T, m:energy(), mean(c):as("mean"), mean(eta) }
m:save{ c }
m:run(schedule{ T, start = 4, hold{ 1, name = "soak" }, ramp{ to = 2, rate = 2 }, quench{ to = 8 }, hold{ 1 } })
same(m.time, 3, "time"); same(#calls, 6, "calls"); same(calls[3], 1.5, "third call"); same(at, 0.75, "at"); near(now(T), 8, 0, "T")
near(crossed, math.log(2)/2, 0.1, "crossing of a half, d eta/dt = -2 eta"); near(now(mean(eta)), 0.2*math.exp(-6), 1e-5, "relaxation")
m:run{ duration = 1, accuracy = 1e-3 }
same(m.time, 4, "time after a second run"); same(#calls, 8, "calls in the second run")

-- hooks count from time 0, so a loop of short runs keeps their beat; an end that is a beat but for rounding counts once
local function beats(dt, length, count)
  local b = grid{ cells = 8, spacing = 1 }
  local u = b:field("u", 1)
  local mb, seen = model{}, {}
  mb:evolve(u, -u)
  mb:record{ mean(u), every = dt }
  mb:every(dt, function(self) seen[#seen + 1] = self.time end)
  for _ = 1, count do mb:run{ duration = length, step = length/4 } end
  same(#seen, math.floor(count*length/dt + 1e-6), "calls of every " .. dt .. " in runs of " .. length)
  for i, t in ipairs(seen) do near(t, i*dt, 1e-12, "call") end
  near(mb.time, count*length, 1e-12, "time")
end
for _, case in ipairs{ { 1.5, 1, 7 }, { 0.1, 0.1, 30 }, { 0.3, 0.1, 30 }, { 0.1, 0.3, 10 }, { 0.1, 0.7, 3 }, { 2.5, 10, 1 }, { 7, 1, 6 } } do
  beats(table.unpack(case))
end

-- at: once, at its time; where that is past already, at once; order of calls in one place of time is the order of declaration
local order = {}
local d = grid{ cells = 8, spacing = 1 }
local u = d:field("u", 1)
local md = model{}
md:evolve(u, -u)
for _, t in ipairs{ 0.3, 0, 0.3 } do md:at(t, function(self) order[#order + 1] = t .. "@" .. self.time end) end
md:every(0.3, function(self) order[#order + 1] = string.format("every@%g", self.time) end)
local half
md:when(function() return now(mean(u)) < 0.5 end, function(self) half = self.time; same(half > 0, true) end)
md:run{ duration = 0.4, step = 0.01 }
md:at(0.1, function(self) order[#order + 1] = "late@" .. self.time end)
md:run{ duration = 0.6, step = 0.01 }
same(table.concat(order, " "), "0@0.0 every@0.3 0.3@0.3 0.3@0.3 late@0.4 every@0.6 every@0.9", "order of hooks")
near(half, math.log(2), 0.011, "half-life, to a step"); near(now(mean(u)), exp(-1), 1e-4, "decay")

-- errors can be caught and tell their line
local ok, message = pcall(function() m:run{ duration = -1 } end)
same(ok, false); assert(message:find("test_language.lua:%d+: run: option 'duration'"), message)

-- a param follows its schedule also where no equation contains it; the next schedule goes on from what was reached
local ms = grid{ cells = 8, spacing = 1 }
local v = ms:field("v", 1)
local mv, T3, seen = model{}, param("T3", 5), {}
mv:evolve(v, -v)
mv:record{ T3, (2*T3)^1, mean(v), every = 1 }
mv:at(1, function() seen[#seen + 1] = now(T3) + now(mean(0*v + T3))/1000 end)
mv:run(schedule{ T3, start = 10, ramp{ to = 8, rate = 1 } })
near(seen[1], 9.009, 1e-12, "half way down"); near(now(2*T3), 16, 1e-12, "at the end of the ramp")
mv:run(schedule{ T3, hold{ 1 }, quench{ to = 6 } })
near(now(T3), 8, 1e-12, "held")
mv:run(schedule{ T3, hold{ 1 } })
near(now(T3), 6, 1e-12, "after a quench that ended a schedule")
mv:run(schedule{ T3, start = 3, ramp{ to = 4, duration = 1 } })
mv:run{ duration = 1 }
near(now(T3), 4, 1e-12, "kept after the last schedule"); near(mv.time, 6, 1e-12, "time")

-- two schedules, the second with a start of its own, step as one schedule with a jump: to the last bit
local grown = {}
for i, parts in ipairs{ { { start = 1, hold{ 1 } }, { start = 4, hold{ 1 } } }, { { start = 1, hold{ 1 }, quench{ to = 4 }, hold{ 1 } } } } do
  local w, S, mw = ms:field("w" .. i, 1), param("S", 1), model{}
  mw:evolve(w, S*w)
  mw:record{ mean(w), every = 1 } -- the same landings
  for _, p in ipairs(parts) do
    table.insert(p, 1, S)
    mw:run{ schedule = schedule(p), step = 0.01 }
  end
  grown[i] = now(mean(w))
end
same(grown[1], grown[2], "two schedules and one"); near(grown[1], math.exp(5), 0.01*math.exp(5), "growth by exp(1 + 4)")

-- times that rounding alone parts are one time
local mu, hits = model{}, {}
local z = ms:field("z", 1)
mu:evolve(z, -z)
for _, t in ipairs{ 0.1 + 0.2, 0.3, 0.6, 0.1*7 } do mu:at(t, function(self) hits[#hits + 1] = string.format("%.1f", self.time) end) end
mu:run{ duration = 0.3 }
for _ = 1, 4 do mu:run{ duration = 0.1 } end
same(table.concat(hits, " "), "0.3 0.3 0.6 0.7", "hooks at times that are not exact")

-- a start that fails and is caught leaves a program that goes on
local neg = ms:field("neg", -1)
local mn = model{ energy = neg*log(neg) + gradsq(neg) }
mn:conserve(neg, { mobility = 1 })
same(pcall(mn.run, mn, { duration = 1 }), false, "start outside the logarithm")
