-- How fields move: mobilities and rates, also as matrices, sources, imposed velocities, thermal noise.
local core = require "core"
local options = require "options"
local grids = require "grid"
local formula = require "formula"
local units = require "unit"

local M = {}

---A model without an energy learns its grid from the first field.
function M.own(m, f, what)
  if core.kind(f) ~= "field" then core.fail(what .. ": expected a field first, found " .. options.kind(f)) end
  if not m.core then
    rawset(m, "grid", grids.of[f])
    rawset(m, "core", core.model(m.grid.core))
  end
end

---Thermal energy over the volume of a cell of the grid and a unit of it, from T (kelvin) or kT and, below three dimensions,
---thickness or area. Second result: kT over the thickness or area alone.
function M.thermal_energy(o, what, grid)
  if (o.T and 1 or 0) + (o.kT and 1 or 0) ~= 1 then core.fail(what .. ": say either T, a temperature in kelvin, or kT, a thermal energy") end
  if o.T and not units.used then core.fail(what .. ": T is a temperature in kelvin and this model has no units; say kT, the thermal energy in the model's own unit of energy") end
  local kT = o.kT or units.constants.kB * o.T
  if core.is_expr(kT) and not core.number(kT) then core.fail(what .. ": the temperature varies over the cells; it has to be a number or param") end
  local depth = 1
  if grid.dim == 2 then
    depth = o.thickness or core.fail(what .. ": a two-dimensional grid needs thickness, since fluctuations depend on the volume of a cell")
  elseif grid.dim == 1 then
    depth = o.area or core.fail(what .. ": a one-dimensional grid needs area (of the bar's section), since fluctuations depend on the volume of a cell")
  end
  if (o.thickness and grid.dim ~= 2) or (o.area and grid.dim ~= 1) then
    core.fail(what .. ": thickness is for grids of two dimensions and area for those of one; this grid has " .. grid.dim)
  end
  local cell = 1
  for a = 1, grid.dim do cell = cell * grid.spacing[a] end
  return kT / (cell * depth), kT / depth
end

M.thermal_options = { { "T", "formula" }, { "kT", "formula" }, { "thickness", "positive" }, { "area", "positive" } }

local function root(e)
  if type(e) == "number" then return math.sqrt(math.max(e, 0)) end
  return formula.sqrt(e)
end

-- Cholesky factor of a matrix of numbers and formulas: noises with the matrix as their covariance.
local function cholesky(a)
  local l = {}
  for i = 1, #a do
    l[i] = {}
    for j = 1, i do
      local s = a[i][j]
      for k = 1, j - 1 do s = s - l[i][k] * l[j][k] end
      if i == j then l[i][i] = root(s)
      elseif l[j][j] == 0 then l[i][j] = 0
      else l[i][j] = s / l[j][j] end
    end
  end
  return l
end

local function add_noise(m, what, fields, matrix, t)
  local o = options.read(t, what .. ": thermal_noise", { { "seed", "whole", required = true }, table.unpack(M.thermal_options) })
  local energy = M.thermal_energy(o, what .. ": thermal_noise", m.grid)
  formula.seeds[#formula.seeds + 1] = o.seed
  local l = cholesky(matrix)
  for i, f in ipairs(fields) do
    for j = 1, i do
      if l[i][j] ~= 0 then
        core.thermal(m.core, f, math.tointeger(o.seed), #m.moving - #fields + j, formula.sqrt(2 * energy) * l[i][j])
      end
    end
  end
end

-- An option that may be one thing for all fields or a list with one for each.
local function each(v, fields, i, what, name)
  if #fields == 1 or type(v) ~= "table" or options.kind(v) == "vector" then return v end
  if #v ~= #fields then core.fail(string.format("%s: %s has %d entries for %d fields", what, name, #v, #fields)) end
  return v[i]
end

local function velocity_of(v, dim, what)
  if options.kind(v) ~= "vector" and type(v) ~= "table" then core.fail(what .. ": velocity has to be a list of components or a vector, found " .. options.kind(v)) end
  local list = {}
  for a = 1, dim do
    if type(v[a]) ~= "number" and not core.is_expr(v[a]) then core.fail(string.format("%s: velocity needs a component for each of the grid's %d axes, found %s", what, dim, options.kind(v[a]))) end
    list[a] = v[a]
  end
  if #v > dim then core.fail(what .. ": velocity has more components than the grid has axes") end
  return list
end

local more_options = { { "source", "any" }, { "velocity", "any" }, { "keep_mean", "boolean", default = false }, { "thermal_noise", "table" } }

---What all motions may have on top of their main term.
function M.more(m, what, fields, t, matrix)
  local o = options.read(t, what, more_options)
  for i, f in ipairs(fields) do
    if o.source ~= nil then
      local s = each(o.source, fields, i, what, "source")
      if type(s) ~= "number" and not core.is_expr(s) then core.fail(what .. ": source has to be a number or formula, found " .. options.kind(s)) end
      core.source(m.core, f, s)
      m.given[#m.given + 1] = s
    end
    if o.velocity then
      local v = velocity_of(o.velocity, m.grid.dim, what)
      core.carry(m.core, f, v)
      for _, e in ipairs(v) do m.given[#m.given + 1] = e end
    end
    if o.keep_mean then core.keep_mean(m.core, f) end
  end
  if o.thermal_noise then
    if not matrix[1] then core.fail(what .. ": thermal noise follows from a mobility or rate; a field with a right-hand side of its own has none") end
    add_noise(m, what, fields, matrix, o.thermal_noise)
    rawset(m, "noisy", true)
  end
end

local names = { conserve = "mobility", relax = "rate" }

local function check_element(what, name, e, i, j)
  if type(e) == "number" or core.is_expr(e) then return e end
  core.fail(string.format("%s: %s[%d][%d] has to be a number or formula, found %s", what, name, i, j, options.kind(e)))
end

-- One field and one coefficient, or lists and a matrix.
local function read_matrix(what, f, v)
  local name = names[what]
  if core.kind(f) == "field" then
    if type(v) ~= "number" and not core.is_expr(v) then
      core.fail(string.format("%s: option '%s' has to be a number or formula, found %s", what, name, options.kind(v)))
    end
    return { f }, { { v } }
  end
  if type(f) ~= "table" or #f == 0 then core.fail(what .. ": expected a field or a list of fields first, found " .. options.kind(f)) end
  if type(v) ~= "table" or #v ~= #f then core.fail(string.format("%s: option '%s' has to be a matrix with a row for each of the %d fields", what, name, #f)) end
  local matrix = {}
  for i, row in ipairs(v) do
    if type(row) ~= "table" or #row ~= #f then core.fail(string.format("%s: row %d of %s has to be a list of %d entries", what, i, name, #f)) end
    matrix[i] = {}
    for j = 1, #f do matrix[i][j] = check_element(what, name, row[j], i, j) end
  end
  return f, matrix
end

---m:conserve or m:relax, for one field or several.
function M.declare(m, what, f, t)
  t = t or {}
  if type(t) ~= "table" then core.fail(what .. ": expected options in braces, found " .. options.kind(t)) end
  local name, rest = names[what], {}
  local valid = { { name, "any", required = true }, table.unpack(more_options) }
  if what == "conserve" then table.remove(valid, 4) end
  options.read(t, what, valid)
  for k, v in next, t do if k ~= name then rest[k] = v end end
  local fields, matrix = read_matrix(what, f, t[name])
  for i, x in ipairs(fields) do
    M.own(m, x, what)
    core[what](m.core, x, matrix[i][i])
    m.moving[#m.moving + 1] = x
  end
  for i, row in ipairs(matrix) do
    for j, e in ipairs(row) do
      m.given[#m.given + 1] = e
      if i ~= j and e ~= 0 then core.couple(m.core, fields[i], fields[j], e) end
    end
  end
  M.more(m, what, fields, rest, matrix)
end

---noise.equilibrium{ model = m, field = c, T or kT, thickness or area, seed }: the fluctuations that the model's energy has at
---equilibrium about the present means of its fields, as a start: set(c, 0.5 + noise.equilibrium{...}).
function formula.noise.equilibrium(t)
  local o = options.read(t, "noise.equilibrium", { { "model", "table", required = true }, { "field", "field", required = true },
    { "seed", "whole", required = true }, table.unpack(M.thermal_options) })
  if options.kind(o.model) ~= "model" or not o.model.core then core.fail("noise.equilibrium: option 'model' has to be a model whose fields move") end
  local _, kT = M.thermal_energy(o, "noise.equilibrium", o.model.grid)
  kT = core.number(kT)
  formula.seeds[#formula.seeds + 1] = o.seed
  o.model:settle()
  local means = {}
  for i, f in ipairs(o.model:fields()) do means[i] = core.statistics(f).mean end
  return grids.loader(function(f)
    core.fluctuations(o.model.core, o.field, means, kT, o.model.time, math.tointeger(o.seed), f)
  end)
end

return M
