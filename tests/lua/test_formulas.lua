-- Formulas as scripts write them: their text, their derivatives against differences, what is a number and what stays a formula,
-- vectors, and what is refused. Values of derivatives are checked in the cells, not only by their text.
local g = grid{ cells = {24, 16}, spacing = {0.5, 1}, walls = {"periodic", "mirror"} }
local c = g:field("c", 0.5 + 0.2*cos(2*math.pi*g.x/12))
local n = g:field("n", 0.3 + 0.1*cos(math.pi*g.y/16))
local T = param("T", 2)

local function same(got, wanted, what)
  if got ~= wanted then error(string.format("%s: %s, expected %s", what or "value", tostring(got), tostring(wanted)), 2) end
end
local function near(got, wanted, tolerance, what)
  if not (math.abs(got - wanted) <= tolerance) then error(string.format("%s: %.15g, expected %.15g", what, got, wanted), 2) end
end

-- text: simplified, in an order that does not depend on how it was written
for _, case in ipairs{
  { exp(c), "exp(c)" }, { log(c*T), "log(T*c)" }, { min(c, 0.5, n), "min(min(c, 0.5), n)" }, { c*0, "0" }, { c + 0, "c" }, { -(-c), "c" },
  { c^0, "1" }, { c^1, "c" }, { c^0.5, "sqrt(c)" }, { 2^c, "2^c" }, { where(above(c, 0.5), c, n), "where(above(c, 0.5), c, n)" },
  { below(c, n), "above(n, c)" }, { dx(dy(c)), "dx(dy(c))" }, { grad(c), "(dx(c), dy(c))" }, { -grad(c)/2, "(-0.5*dx(c), -0.5*dy(c))" },
  { T*grad(c), "(T*dx(c), T*dy(c))" }, { grad(c)*T, "(T*dx(c), T*dy(c))" }, { c*grad(n), "(c*dx(n), c*dy(n))" },
  { grad(c) + grad(c), "(2*dx(c), 2*dy(c))" }, { grad(c) - grad(c), "(0, 0)" },
  { div(T*grad(c)), "T*dx(dx(c)) + T*dy(dy(c))" }, { div(c*grad(n)), "dx(c*dx(n)) + dy(c*dy(n))" },
  { derivative(c^3*T, T), "c^3" }, { derivative(c^3*n, c), "3*c^2*n" }, { derivative(exp(2*c), c), "2*exp(2*c)" }, { derivative(n, c), "0" },
  { derivative(log(c), c), "1/c" }, { derivative(abs(c), c), "sign(c)" }, { derivative(max(c, n), c), "1 - above(n, c)" },
} do same(tostring(case[1]), case[2], "text") end

-- potentials: dF/dc = f_c - div f_{grad c} + lap f_{lap c} (Euler & Lagrange; common practice)
for _, case in ipairs{
  { c^4/4 - c^2/2, c, "-c + c^3" }, { c^2*n + gradsq(c)/2, c, "2*c*n - laplacian(c)" }, { c^2*n + gradsq(c)/2, n, "c^2" },
  { n*gradsq(c)/2, c, "-dx(n*dx(c)) - dy(n*dy(c))" }, { laplacian(c)^2/2, c, "laplacian(laplacian(c))" },
  { dx(c)^2/2 + 0.1*dy(c)^2, c, "-dx(dx(c)) - 0.2*dy(dy(c))" },
} do same(tostring(model{ energy = case[1] }:potential(case[2])), case[3], "potential of " .. tostring(case[1])) end

-- derivatives against central differences in every cell: the largest error over the box
for _, f in ipairs{
  function(u) return exp(-u)*sin(3*u) end, function(u) return log(u)*cos(u) end, function(u) return tanh(u/0.3)^2 end, function(u) return sqrt(u + n)/u end,
  function(u) return u^2.5 + 2^u end, function(u) return abs(u - 2)*u end, function(u) return max(u, 2*n) + min(u, T) end,
  function(u) return where(above(u, 0.501), u^2, n*u) end, function(u) return u*log(u) + (1 - u)*log(1 - u) end,
} do
  local h = 1e-5
  local difference = (f(c + h) - f(c - h))/(2*h)
  near(now(maximum(abs(derivative(f(c), c) - difference))), 0, 1e-8, "derivative of " .. tostring(f(c)))
end

-- the derived potential is the gradient of the discrete energy, whatever the energy: (F(c + hw) - F(c - hw))/2h = sum of w dF/dc
local c0, w = 0.5 + 0.2*cos(2*math.pi*g.x/12), cos(2*math.pi*g.x/4)*cos(math.pi*g.y/8) + 0.3*cos(2*math.pi*g.x/12)
for _, energy in ipairs{
  c^2*(1 - c)^2 + gradsq(c)/2, n*c*log(c) + (0.5 + c^2)*gradsq(c), laplacian(c)^2/2 - 0.7*gradsq(c) + c^4, exp(c)*dot(grad(c), grad(n)), dx(c)^4 + c*dy(c)^2,
  sqrt(0.1 + gradsq(c))*(1 + n*c),
} do
  local m = model{ energy = energy }
  local slope = now(integral(w*m:potential(c)))
  local h, F = 1e-4, {}
  for i, sign in ipairs{ 1, -1 } do
    set(c, c0 + sign*h*w)
    F[i] = now(integral(energy))
  end
  set(c, c0)
  near((F[1] - F[2])/(2*h), slope, 1e-6*math.abs(slope) + 1e-7, "slope of the energy " .. tostring(energy))
end

-- numbers in, number out; a formula as soon as one of them is one
for _, case in ipairs{ { exp(1), math.exp(1) }, { log(10), math.log(10) }, { sqrt(2), 2^0.5 }, { sin(1), math.sin(1) }, { cos(1), math.cos(1) }, { abs(-3), 3 },
  { min(3, 1, 2), 1 }, { max(3, 1, 4), 4 }, { tanh(-0.7), -0.604367777117164 }, { tanh(800), 1 } } do
  same(math.type(case[1]) ~= nil, true, "a number"); near(case[1], case[2], 1e-15, "number")
end
for _, e in ipairs{ exp(T), min(1, T), max(c, 1), abs(c), tanh(n) } do same(type(e), "userdata", "a formula") end
near(now(exp(T) + min(1, T)), math.exp(2) + 1, 1e-14, "a formula without a field has one value")

-- a flux written out moves a field as conserve does
local M = 1 - 0.5*c
local finish = {}
for i, write in ipairs{ function(m) m:conserve(c, { mobility = M }) end, function(m) m:evolve(c, div(M*grad(m:potential(c)))) end } do
  set(c, c0 + 0.05*w)
  local m = model{ energy = c^2*(1 - c)^2 + gradsq(c)/2 }
  write(m)
  m:run{ duration = 1, accuracy = 1e-6 }
  finish[i] = g:field("finish " .. i, 1*c)
end
assert(now(maximum(abs(finish[1] - c0))) > 1e-2, "the field has moved")
near(now(maximum(abs(finish[1] - finish[2]))), 0, 1e-5, "div(M*grad(mu)) and conserve")

-- what is refused, and the words it is refused with
for _, case in ipairs{
  { function() local _ = c < 1 end, "above(a, b)" }, { function() local _ = c <= n end, "above(a, b)" }, { function() local _ = c() end, "not a function" },
  { function() local _ = dz(c) end, "no such axis" }, { function() local _ = grad(3) end, "with a field in it" }, { function() local _ = grad(c)*grad(n) end, "use dot(a, b)" },
  { function() local _ = c + grad(c) end, "two of the same length" }, { function() local _ = c/grad(c) end, "divided by a vector" },
  { function() local _ = 1/grad(c) end, "divided by a vector" }, { function() local _ = dot(grad(c), c) end, "two vectors" }, { function() local _ = div(c) end, "expected a vector" },
  { function() local _ = c + nil end, "found nil" }, { function() local _ = c*"2" end, "found string" }, { function() local _ = exp() end, "argument is missing" },
  { function() local _ = exp("x") end, "found string" }, { function() local _ = log(8, 2) end, "log(x)/log(2)" }, { function() local _ = where(c, 1) end, "argument 3" },
  { function() local _ = min(c) end, "expected two values" }, { function() now(c) end, "now(mean(...))" }, { function() now(3) end, "expected a measurement" },
  { function() mean(3) end, "a field or a formula" }, { function() mean(c):as(3) end, "name as text" },
} do
  local ok, message = pcall(case[1])
  same(ok, false, "refused (" .. case[2] .. ")")
  if not message:find("^test_formulas%.lua:%d+: ") or not message:find(case[2], 1, true) then error("unexpected message: " .. message) end
end
