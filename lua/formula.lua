-- What scripts call in formulas: functions, derivatives, noise, vectors.
local core = require "core"
local options = require "options"

local M = {}

local plain = {
  exp = math.exp, sqrt = math.sqrt, sin = math.sin, cos = math.cos, abs = math.abs,
  log = math.log,
  tanh = function(x) local e = math.exp(-2 * math.abs(x)); local t = (1 - e) / (1 + e); return x < 0 and -t or t end,
}

for name, f in next, plain do
  ---Function of numbers or formulas.
  M[name] = function(a, ...)
    if ... ~= nil then core.fail(name .. ": expected one value, found more" .. (name == "log" and "; log(x)/log(2) is the logarithm to base 2" or "")) end
    if type(a) == "number" then return f(a) end
    if a == nil then core.fail(name .. ": its argument is missing") end
    return core.apply(name, a)
  end
end

local function several(name, f)
  return function(a, b, ...)
    if a == nil or b == nil then core.fail(name .. ": expected two values") end
    local r
    if type(a) == "number" and type(b) == "number" then r = f(a, b) else r = core.apply(name, a, b) end
    if ... then return M[name](r, ...) end
    return r
  end
end
M.min = several("min", math.min)
M.max = several("max", math.max)

---1 where a > b, else 0.
function M.above(a, b) return core.apply("above", a, b) end
---1 where a < b, else 0.
function M.below(a, b) return core.apply("above", b, a) end
---a where the condition is not 0, else b.
function M.where(condition, a, b) return core.apply("where", condition, a, b) end

-- Vectors: lists of components with arithmetic.
local vector = { kind = "vector" }
vector.__index = vector
local function is_vector(v) return getmetatable(v) == vector end

local function combine(name, f)
  return function(a, b)
    if not (is_vector(a) and is_vector(b)) or #a ~= #b then core.fail("vectors: " .. name .. " needs two of the same length") end
    local r = setmetatable({}, vector)
    for i = 1, #a do r[i] = f(a[i], b[i]) end
    return r
  end
end
vector.__add = combine("+", function(x, y) return x + y end)
vector.__sub = combine("-", function(x, y) return x - y end)
function vector.__mul(a, b)
  if is_vector(b) then a, b = b, a end
  if is_vector(b) then core.fail("vectors: use dot(a, b) for the product of two vectors") end
  local r = setmetatable({}, vector)
  for i = 1, #a do r[i] = a[i] * b end
  return r
end
function vector.__unm(a) return a * -1 end
function vector.__div(a, b)
  if is_vector(b) then core.fail("vectors: nothing can be divided by a vector") end
  return a * (1 / b)
end
function vector.__tostring(a)
  local t = {}
  for i = 1, #a do t[i] = tostring(a[i]) end
  return "(" .. table.concat(t, ", ") .. ")"
end

local function axes_of(e, what)
  local dim = core.dim(e)
  if not dim then core.fail(what .. ": expected a formula with a field in it") end
  return dim
end

local function derivative(axis, name)
  return function(e)
    if axis >= axes_of(e, name) then core.fail(name .. ": the grid has no such axis") end
    return core.deriv(axis, e)
  end
end
M.dx, M.dy, M.dz = derivative(0, "dx"), derivative(1, "dy"), derivative(2, "dz")

---Gradient: a vector.
function M.grad(e)
  local r = setmetatable({}, vector)
  for a = 0, axes_of(e, "grad") - 1 do r[a + 1] = core.deriv(a, e) end
  return r
end

---Divergence of a vector.
function M.div(v)
  if not is_vector(v) then core.fail("div: expected a vector, such as M*grad(mu), found " .. options.kind(v)) end
  local s = 0
  for a = 1, #v do s = s + core.deriv(a - 1, v[a]) end
  return s
end

---Scalar product of two vectors.
function M.dot(a, b)
  if not (is_vector(a) and is_vector(b)) or #a ~= #b then core.fail("dot: expected two vectors of the same length") end
  local s = 0
  for i = 1, #a do s = s + a[i] * b[i] end
  return s
end

---|grad e|^2
function M.gradsq(e)
  axes_of(e, "gradsq")
  return core.apply("gradsq", e)
end

function M.laplacian(e)
  axes_of(e, "laplacian")
  return core.apply("laplacian", e)
end

-- One table per function and grid, kept as long as the function is.
local tabulated, filters = setmetatable({}, { __mode = "k" }), 0

local function tabulate(grid, f)
  local of = tabulated[f]
  if not of then
    of = setmetatable({}, { __mode = "k" })
    tabulated[f] = of
  end
  if not of[grid] then
    local info = debug.getinfo(f, "u")
    local args = info.isvararg and 3 or info.nparams
    if args < 1 or args > 3 then core.fail("filter: its function has to take k, or kx, ky and kz, found " .. args .. " arguments") end
    filters = filters + 1
    of[grid] = core.filter(grid.core, filters == 1 and "filter" or "filter" .. filters, f, args)
  end
  return of[grid]
end

---Multiplies the spectrum of a formula by f(k), or f(kx, ky) or f(kx, ky, kz): wavenumbers in rad per length, f real and
---even, tabulated once. filter(c - mean, function(k) return k > 0 and 1/k^2 or 0 end) solves -laplacian(v) = c - mean.
function M.filter(e, f)
  axes_of(e, "filter")
  if type(f) ~= "function" then core.fail("filter: expected a function of the wavenumber as its second argument, found " .. options.kind(f)) end
  return core.filtered(tabulate(M.grid_of(e), f), e)
end

M.grid_of = nil -- set by grid.lua: the grid a formula lives on

M.time = core.time()

M.seeds = {} -- of all noise in the script, for the summary

local function noise(normal, name)
  return function(t)
    local o = options.read(t or {}, name, { { "seed", "whole", required = true } })
    M.seeds[#M.seeds + 1] = o.seed
    return core.noise(normal, math.tointeger(o.seed))
  end
end

---Random starting values, the same for the same seed whatever the number of threads.
M.noise = {
  uniform = noise(false, "noise.uniform"), -- uniform in [-1, 1]
  normal = noise(true, "noise.normal"),    -- mean 0, variance 1
}

---A param: one number for the whole box that formulas refer to and schedules change.
function M.param(name, value)
  if type(name) ~= "string" then core.fail("param: expected a name first, as param(\"T\", 900*unit.K)") end
  if type(value) ~= "number" then core.fail("param '" .. name .. "': expected a number as its value, found " .. options.kind(value)) end
  return core.param(name, value)
end

---Cell-wise derivative of a formula with respect to a field or param.
function M.derivative(e, wrt) return core.partial(e, wrt) end

return M
