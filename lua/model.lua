-- Models: the energy, how fields move, what is recorded while they do.
local core = require "core"
local options = require "options"
local grids = require "grid"
local measure = require "measure"
local motion = require "motion"
local schedule = require "schedule"

local M = { runner = nil }

local Model = { kind = "model" }

---@class model
Model.__index = function(m, key)
  if key == "time" then return m.started and core.state(m.core).time or 0 end
  local v = rawget(Model, key)
  if v == nil and type(key) == "string" then
    core.fail("model: there is no '" .. key .. "'" .. require("text").hint(key, require("text").keys(Model)))
  end
  return v
end
Model.__newindex = function(_, key) core.fail("model: '" .. tostring(key) .. "' cannot be set") end

local function check_self(m, name)
  if getmetatable(m) ~= Model then core.fail("write m:" .. name .. "(...) with a colon") end
end

---model{ energy = density } ; the energy may be left out where every field has its own right-hand side.
function M.model(t)
  local o = options.read(t or {}, "model", { { "energy", "any" } })
  if o.energy ~= nil and not core.is_expr(o.energy) then
    core.fail("model: the energy has to be a scalar formula with fields in it, found " .. options.kind(o.energy) ..
      (options.kind(o.energy) == "vector" and "; write gradsq(c) for |grad c|^2, or dot(a, b)" or ""))
  end
  if o.energy and not core.dim(o.energy) then core.fail("model: the energy contains no field") end
  local m = { energy_density = o.energy or false, moving = {}, still = {}, given = {}, every_hooks = {}, at_hooks = {}, when_hooks = {}, pictures = {},
    saves = {}, tabulations = {}, recorded = false, started = false, noisy = false, line = core.where(), last_record = false, last_stage = false, ledger = false,
    ledger_head = {}, rows = {}, drawn = {}, stages = {}, schedule = false, wall = 0 }
  if o.energy then
    m.grid = grids.find(o.energy)
    m.core = core.model(m.grid.core)
    core.energy(m.core, o.energy)
  else
    m.grid, m.core = false, false
  end
  return setmetatable(m, Model)
end

---dc/dt = div( mobility grad( dF/dc ) ) - div( velocity c ) + source. With lists of fields and a matrix of mobilities,
---dc_i/dt = sum over j of div( M_ij grad( dF/dc_j ) ).
function Model:conserve(f, t)
  check_self(self, "conserve")
  motion.declare(self, "conserve", f, t)
end

---dc/dt = -rate dF/dc, and so on; keep_mean = true adds what keeps the mean of the field where it is.
function Model:relax(f, t)
  check_self(self, "relax")
  motion.declare(self, "relax", f, t)
end

---dc/dt = rhs, also with velocity, source and keep_mean as options.
function Model:evolve(f, rhs, t)
  check_self(self, "evolve")
  motion.own(self, f, "evolve")
  if rhs == nil then core.fail("evolve: the right-hand side is missing, as m:evolve(u, laplacian(u) - u^3)") end
  if not core.is_expr(rhs) and type(rhs) ~= "number" then
    core.fail("evolve: the right-hand side has to be a formula, found " .. options.kind(rhs) .. (options.kind(rhs) == "vector" and "; take its divergence, as div(v)" or ""))
  end
  core.evolve(self.core, f, rhs)
  self.moving[#self.moving + 1], self.given[#self.given + 1] = f, rhs
  motion.more(self, "evolve", { f }, t or {}, {})
end

---The derived dF/dc as a formula.
function Model:potential(f)
  check_self(self, "potential")
  motion.own(self, f, "potential")
  return core.potential(self.core, f)
end

---Total energy, as a measurement.
function Model:energy()
  check_self(self, "energy")
  local m = measure.make("energy", function()
    if self.started then
      local e = core.state(self.core).energy
      if e == e then return e end
    end
    return core.statistics((measure.values(self.energy_density, "energy"))).integral
  end, require("unit").used and ({ "J/m^2", "J/m", "J" })[self.grid and self.grid.dim or 3] or "")
  if not self.energy_density then core.fail("energy: this model has none") end
  return m
end

---All fields of the formulas, in the order core knows them.
function Model:fields()
  local all = {}
  for _, f in ipairs(self.moving) do all[#all + 1] = f end
  for _, f in ipairs(self.still) do all[#all + 1] = f end
  return all
end

---Fields that occur in the formulas but do not move.
function Model:settle()
  local known = {}
  for _, f in ipairs(self.moving) do known[f] = true end
  for _, f in ipairs(self.still) do known[f] = true end
  for _, f in ipairs(self.grid.fields) do
    local occurs = self.energy_density and core.contains(self.energy_density, f)
    for _, e in ipairs(self.given) do occurs = occurs or (core.is_expr(e) and core.contains(e, f)) end
    if occurs and not known[f] then
      core.still(self.core, f)
      self.still[#self.still + 1] = f
    end
  end
  if #self.moving == 0 then
    core.fail("model: nothing moves; say how with m:conserve(c, { mobility = ... }), m:relax(c, { rate = ... }) or m:evolve(c, ...)")
  end
end

local function column_of(v)
  if measure.is(v) then return v end
  if core.kind(v) == "param" then
    local m = measure.make(core.param_name(v), function() return core.param_value(v, measure.clock()) end)
    m.param = v -- its unit is known when a schedule has taken it
    return m
  end
  if core.is_expr(v) and core.number(v) then
    return measure.make(tostring(v), function() return core.number(v, measure.clock()) end)
  end
  core.fail("record: expected a measurement, param or uniform formula, found " .. options.kind(v) ..
    (core.is_expr(v) and "; measure it, as mean(...)" or ""))
end

---m:record{ every = 10*minute, T, m:energy(), wavelength(c):as("lambda") }: the columns of the ledger.
function Model:record(t)
  check_self(self, "record")
  local o = options.read(t, "record", { { "every", "positive" } }, true)
  if self.recorded then core.fail("record: this model has a record already; put all columns into one") end
  if self.started then core.fail("record: has to stand before the first m:run") end
  local columns, names = {}, { time = true, stage = true, step = true }
  for i = 1, #t do
    local c = column_of(t[i])
    local name, n = c.name, 2
    while names[name] do name, n = c.name .. " (" .. n .. ")", n + 1 end
    names[name] = true
    columns[i] = c:as(name)
  end
  if #columns == 0 then core.fail("record: it has no columns") end
  rawset(self, "recorded", { every = o.every or false, columns = columns })
end

local function field_list(t, what)
  if #t == 0 then core.fail(what .. ": expected a field or formula first") end
  for i = 1, #t do
    if not core.is_expr(t[i]) then core.fail(what .. ": expected fields or formulas, found " .. options.kind(t[i])) end
  end
end

---m:picture{ c, every = 1*hour, low = 0, high = 1, map = "slate", name = }
function Model:picture(t)
  check_self(self, "picture")
  local o = options.read(t, "picture", { { "every", "positive" }, { "low", "number" }, { "high", "number" }, { "map", "string" },
    { "name", "name" }, { "scale", "count" } }, true)
  field_list(t, "picture")
  for i = 1, #t do
    local what = o.name or (core.kind(t[i]) == "field" and core.field_name(t[i])) or ("formula" .. (#self.pictures + 1))
    self.pictures[#self.pictures + 1] = { e = t[i], every = o.every, low = o.low, high = o.high, map = o.map, scale = o.scale, name = what }
  end
end

---m:save{ c, every = 1*hour }: fields as .npy
function Model:save(t)
  check_self(self, "save")
  local o = options.read(t, "save", { { "every", "positive" }, { "name", "name" } }, true)
  field_list(t, "save")
  for i = 1, #t do
    local what = o.name or (core.kind(t[i]) == "field" and core.field_name(t[i])) or ("formula" .. (#self.saves + 1))
    self.saves[#self.saves + 1] = { e = t[i], every = o.every, name = what }
  end
end

---m:tabulate{ domains(c), structure_factor(c), every = 1*hour }: distributions, each into a table of its own in tables/
function Model:tabulate(t)
  check_self(self, "tabulate")
  local o = options.read(t, "tabulate", { { "every", "positive" } }, true)
  if self.started then core.fail("tabulate: has to stand before the first m:run") end
  if #t == 0 then core.fail("tabulate: expected measurements with a table first, as domains(c) or structure_factor(c)") end
  for i = 1, #t do
    if not measure.is(t[i]) then core.fail("tabulate: expected measurements, found " .. options.kind(t[i])) end
    if not t[i].columns then core.fail("tabulate: " .. t[i].name .. " has no table; its numbers go into m:record") end
    self.tabulations[#self.tabulations + 1] = { measurement = t[i], every = o.every, last = false }
  end
end

local function hook(self, name, list, time, f)
  check_self(self, name)
  if type(f) ~= "function" then core.fail("m:" .. name .. ": expected a function as its second argument, found " .. options.kind(f)) end
  list[#list + 1] = { f = f, time = time, done = false, next = false }
end

---Calls f every dt of simulated time.
function Model:every(dt, f)
  if type(dt) ~= "number" or not (dt > 0) then core.fail("m:every: expected a positive time first") end
  hook(self, "every", self.every_hooks, dt, f)
end

---Calls f once at time t.
function Model:at(t, f)
  if type(t) ~= "number" then core.fail("m:at: expected a time first") end
  hook(self, "at", self.at_hooks, t, f)
end

---Calls f once when condition() is true, looked at after every step.
function Model:when(condition, f)
  if type(condition) ~= "function" then core.fail("m:when: expected a function that gives true or false first") end
  hook(self, "when", self.when_hooks, condition, f)
end

local methods = { SBDF3 = 0, SBDF2 = 1, Euler = 2, ETDRK2 = 3 }

---m:run{ duration = 2000 } or m:run(schedule{...}); also accuracy, step (fixed), longest, method ("SBDF3", "SBDF2", "ETDRK2", "Euler")
function Model:run(t)
  check_self(self, "run")
  if not self.core then core.fail("run: nothing moves yet; declare it with m:conserve, m:relax or m:evolve") end
  local o = { schedule = t }
  if not schedule.is(t) then
    o = options.read(t, "run", { { "duration", "positive" }, { "schedule", "table" }, { "accuracy", "positive" }, { "step", "positive" },
      { "longest", "positive" }, { "method", "string" } })
    if o.method and not methods[o.method] then
      core.fail("run: method has to be \"SBDF3\", \"SBDF2\", \"ETDRK2\" or \"Euler\", found \"" .. o.method .. '"')
    end
    if (o.duration and 1 or 0) + (o.schedule and 1 or 0) ~= 1 then core.fail("run: say either duration or schedule") end
    if o.schedule and not schedule.is(o.schedule) then core.fail("run: schedule has to be what schedule{...} gave") end
  end
  self:settle()
  o.method_number = methods[o.method or "SBDF3"]
  M.runner(self, o)
end

return M
