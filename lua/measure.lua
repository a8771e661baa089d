-- Measurements: descriptions that `record` tabulates and `now` evaluates. Definitions stand in core/measure/*.h.
local core = require "core"
local options = require "options"
local grids = require "grid"
local units = require "unit"

local M = {}

local Measurement = { kind = "measurement" }
Measurement.__index = Measurement

---A measurement under another name in the ledger.
function Measurement:as(name)
  if not options.is_name(name) then core.fail("as: expected the column's name as text of 1 to 100 bytes on one line") end
  local copy = setmetatable({}, Measurement)
  for k, v in next, self do copy[k] = v end
  copy.name = name
  return copy
end

Measurement.__tostring = function(m) return "measurement " .. m.name end

---dimension: power of length the value has, for its unit; value: function() -> number or nil
local function make(name, value, unit)
  return setmetatable({ name = name, value = value, unit = unit or "" }, Measurement)
end
M.make = make

function M.is(v) return getmetatable(v) == Measurement end

local scratch = setmetatable({}, { __mode = "k" })

---The field whose values a measurement of e reads: the field itself, or a scratch field with the formula's values.
---@return userdata field, table grid
function M.values(e, what)
  if core.kind(e) == "field" then return e, grids.of[e] end
  if not core.is_expr(e) then core.fail(what .. ": expected a field or a formula, found " .. options.kind(e)) end
  local g = grids.find(e)
  local f = scratch[g]
  if not f then
    f = core.field(g.core, "values")
    scratch[g] = f
  end
  core.evaluate(f, g.core, e, g.fields, M.clock and M.clock() or 0)
  return f, g
end

local function label(e)
  local t = tostring(e)
  return #t <= 40 and t or t:sub(1, 37) .. "..."
end

-- Lengths are shown in nm, areas in nm^2 in runs in real units.
local function length_unit(power)
  if not units.used or power == 0 then return 1, "" end
  return 1e-9 ^ power, power == 1 and "nm" or "nm^" .. power
end

local function scaled(power, f)
  return function()
    local v = f()
    return v and v / length_unit(power)
  end
end

local function lengths(name, e, power, f)
  local m = make(name, nil, nil)
  m.raw = f                    -- SI, for now()
  m.value = scaled(power, f)   -- in the ledger's unit
  m.power = power
  return m
end

for _, name in ipairs { "mean", "minimum", "maximum", "variance" } do
  ---Statistic of a field or formula.
  M[name] = function(e)
    M.values(e, name)
    return make(name .. "(" .. label(e) .. ")", function() return core.statistics((M.values(e, name)))[name] end)
  end
end

---Integral over the box.
function M.integral(e)
  local _, g = M.values(e, "integral")
  return lengths("integral(" .. label(e) .. ")", e, g.dim, function() return core.statistics((M.values(e, "integral"))).integral end)
end

---Difference of the composition peaks of the histogram.
function M.amplitude(e)
  M.values(e, "amplitude")
  return make("amplitude(" .. label(e) .. ")", function() return core.peaks((M.values(e, "amplitude"))).amplitude end)
end

local level_options = { { "level", "number" }, { "above", "boolean", default = true }, { "full", "boolean", default = false } }

local function level_of(f, o) return o.level or core.peaks(f).level end

---Fraction of cells above (or not above) the level.
function M.phase_fraction(e, t)
  local o = options.read(t or {}, "phase_fraction", level_options)
  M.values(e, "phase_fraction")
  return make("phase_fraction(" .. label(e) .. ")", function()
    local f = M.values(e, "phase_fraction")
    return core.phase_fraction(f, level_of(f, o), o.above)
  end)
end

---Domains above (or not above) the level: a table { count, largest, mean, total, sizes } from now(); their number in a ledger.
function M.domains(e, t)
  local o = options.read(t or {}, "domains", level_options)
  M.values(e, "domains")
  local function all()
    local f = M.values(e, "domains")
    return core.domains(f, level_of(f, o), o.above, o.full)
  end
  local m = make("domains(" .. label(e) .. ")", function() return all().count end)
  m.raw = all
  return m
end

---Number of domains.
function M.domain_count(e, t)
  local m = M.domains(e, t)
  m.raw, m.name = nil, "domain_count(" .. label(e) .. ")"
  return m
end

---Length (2-D), area (3-D) or number (1-D) of the interface at the level.
function M.interface(e, t)
  local o = options.read(t or {}, "interface", { { "level", "number" } })
  local _, g = M.values(e, "interface")
  return lengths("interface(" .. label(e) .. ")", e, g.dim - 1, function()
    local f = M.values(e, "interface")
    return core.interface(f, level_of(f, o))
  end)
end

---Structure factor: a table { k, s, modes, wavelength, peak, variance } from now().
function M.structure_factor(e)
  M.values(e, "structure_factor")
  local function all()
    local f, g = M.values(e, "structure_factor")
    return core.structure(f, g.core)
  end
  local m = lengths("peak_wavelength(" .. label(e) .. ")", e, 1, function() return all().peak end)
  m.raw = all
  return m
end

-- In white noise the highest shell of the structure factor stands little above the others; a wave worth a wavelength stands out.
local function stands_out(s)
  local sum, top = 0, 0
  for _, v in ipairs(s.s) do
    sum, top = sum + v, math.max(top, v)
  end
  return sum > 0 and top * #s.s / sum > 6
end

---2 pi over the first moment of the structure factor; nil while no wave stands out of the noise.
function M.wavelength(e)
  M.values(e, "wavelength")
  return lengths("wavelength(" .. label(e) .. ")", e, 1, function()
    local f, g = M.values(e, "wavelength")
    local s = core.structure(f, g.core)
    return stands_out(s) and s.wavelength or nil
  end)
end

---The unit a column shows.
function M.unit(m)
  if m.power then
    local _, u = length_unit(m.power)
    return u
  end
  return m.unit
end

---Present value of a measurement, in SI: a number, a table for domains and structure_factor, or nil.
function M.now(m)
  if core.is_expr(m) then
    local v = core.number(m, M.clock and M.clock() or 0)
    if v then return v end
    core.fail("now: a formula has a value in each cell; measure it, as now(mean(...))")
  end
  if not M.is(m) then core.fail("now: expected a measurement, as now(wavelength(c)), found " .. options.kind(m)) end
  return (m.raw or m.value)()
end

return M
