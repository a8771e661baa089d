-- Measurements: descriptions that `record` tabulates and `now` evaluates. Definitions stand in core/measure/*.h.
local core = require "core"
local options = require "options"
local grids = require "grid"
local units = require "unit"
local text = require "text"

local M = {}

local Measurement = { kind = "measurement" }
M.Measurement = Measurement

-- What a measurement may hold without being one of its parts.
local own = { name = true, value = true, unit = true, raw = true, power = true, param = true, parts = true, whole = true, columns = true, rows = true }

---`domains(c).mean_diameter` is the measurement of that part.
Measurement.__index = function(m, key)
  local v = rawget(Measurement, key)
  if v ~= nil or own[key] or not rawget(m, "parts") or type(key) ~= "string" then return v end
  return M.part(m, key)
end

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

---A short name for what is measured.
function M.label(e)
  local t = tostring(e)
  return #t <= 40 and t or t:sub(1, 37) .. "..."
end
local label = M.label

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

---A measurement with the dimension of a power of length: f gives it in SI.
function M.lengths(name, e, power, f)
  local m = make(name, nil, nil)
  m.raw = f                    -- SI, for now()
  m.value = scaled(power, f)   -- in the ledger's unit
  m.power = power
  return m
end

local lengths = M.lengths

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

-- --- levels -----------------------------------------------------------------------------------------------------------------

local function check_level(what, level)
  if type(level) == "number" and level == level then return end
  if level == "midway" or level == "otsu" then return end
  core.fail(string.format("%s: option 'level' has to be a number, \"midway\" (between the composition peaks) or \"otsu\", found %s", what,
    type(level) == "string" and '"' .. level .. '"' or type(level) == "number" and tostring(level) or options.kind(level)))
end

local function check_side(what, side)
  if side == "above" or side == "below" then return end
  core.fail(string.format("%s: option 'side' has to be \"above\" or \"below\", found \"%s\"", what, side))
end

local level_option = { "level", "any", default = "midway" }
local side_option = { "side", "string", default = "above" }

---Options of a measurement of one phase: level, side, and those in `more`. `above` is side as a boolean.
---@param without_side boolean|nil for measurements of both phases alike
function M.phase_options(t, what, more, without_side)
  local specs = without_side and { level_option } or { level_option, side_option }
  for _, s in ipairs(more or {}) do specs[#specs + 1] = s end
  local o = options.read(t or {}, what, specs)
  check_level(what, o.level)
  if not without_side then check_side(what, o.side) end
  o.above = o.side == "above"
  return o
end

---The level asked for, in the values of f.
function M.level_of(f, o)
  if type(o.level) == "number" then return o.level end
  return o.level == "otsu" and core.otsu(f) or core.peaks(f).level
end

-- --- measurements with parts --------------------------------------------------------------------------------------------------

-- While a row is filled the fields stand still, and parts of one measurement share its work.
local shared

---Runs f; measurements with parts are evaluated at most once within.
function M.together(f)
  shared = {}
  local ok, message = pcall(f)
  shared = nil
  if not ok then error(message, 0) end
end

local function known(v)
  if type(v) == "number" and v ~= v then return nil end
  return v
end

---A measurement with parts. t: name; all: function() -> table in SI with an entry per part; parts: list of { name, power of length };
---main: the part it is in a ledger; columns: of its table, list of { name, power of length or unit, is text }; rows: function(all) -> rows.
function M.make_whole(t)
  local m = setmetatable({ name = t.name, unit = "", parts = {}, columns = t.columns, rows = t.rows }, Measurement)
  for _, p in ipairs(t.parts) do m.parts[p[1]] = p[2] or 0 end
  m.raw = t.all
  m.whole = function()
    if not shared then return t.all() end
    if not shared[m.whole] then shared[m.whole] = t.all() end
    return shared[m.whole]
  end
  m.power = m.parts[t.main]
  m.value = function()
    local v = known(m.whole()[t.main])
    return v and v / length_unit(m.power)
  end
  return m
end

---A part of a measurement as a measurement of its own.
function M.part(m, key)
  local power = m.parts[key]
  if not power then
    core.fail(string.format("%s has no part '%s'%s (parts: %s)", m.name, key, text.hint(key, text.keys(m.parts)), table.concat(text.keys(m.parts), ", ")))
  end
  return lengths(m.name .. "." .. key, nil, power, function() return known(m.whole()[key]) end)
end

---Columns of a measurement's table with their units, after time and stage.
function M.table_head(m)
  local head = {}
  for i, c in ipairs(m.columns) do
    local _, u = length_unit(tonumber(c[2]) or 0)
    head[i] = { c[1], type(c[2]) == "string" and c[2] or u, c[3] or false }
  end
  return head
end

---Rows of a measurement's table now, in the units of its head.
function M.table_rows(m)
  local list = m.rows(m.whole())
  for _, row in ipairs(list) do
    for i, c in ipairs(m.columns) do
      local v = row[i]
      if type(v) == "number" then row[i] = v == v and v / length_unit(tonumber(c[2]) or 0) end
    end
  end
  return list
end

---Fraction of cells above (or not above) the level.
function M.phase_fraction(e, t)
  local o = M.phase_options(t, "phase_fraction")
  M.values(e, "phase_fraction")
  return make("phase_fraction(" .. label(e) .. ")", function()
    local f = M.values(e, "phase_fraction")
    return core.phase_fraction(f, M.level_of(f, o), o.above)
  end)
end

---Length (2-D), area (3-D) or number (1-D) of the interface at the level.
function M.interface(e, t)
  local o = M.phase_options(t, "interface", nil, true)
  local _, g = M.values(e, "interface")
  return lengths("interface(" .. label(e) .. ")", e, g.dim - 1, function()
    local f = M.values(e, "interface")
    return core.interface(f, M.level_of(f, o))
  end)
end

-- In white noise the highest shell of the structure factor stands little above the others; a wave worth a wavelength stands out.
function M.stands_out(s)
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
    return M.stands_out(s) and s.wavelength or nil
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

---Present value of a measurement, in SI: a number, a table for those with parts, or nil.
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
