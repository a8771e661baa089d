-- The closed environment scripts run in: no processes, no files but through the tool, no bytecode, nothing that differs from
-- one process to the next (order of pairs, seed of math.random).
local core = require "core"
local text = require "text"
local formula = require "formula"
local grids = require "grid"
local measure = require "measure"
local microstructure = require "microstructure"
local schedule = require "schedule"
local units = require "unit"
local inputs = require "input"
local sources = require "sources"

local M = {}

local bundled = { thermo = true } -- modules of the program itself; those in lua/models are scripts like the user's own

local function bundled_names()
  local names = text.keys(core.models)
  for name in next, bundled do names[#names + 1] = name end
  table.sort(names)
  return names
end

local ordered = { number = true, string = true, boolean = true }

-- Tables and functions as keys stand where memory happened to put them. One of a kind has its place all the same.
local function check_order(keys)
  for i = 2, #keys do
    local kind = type(keys[i])
    if not ordered[kind] and kind == type(keys[i - 1]) then
      core.fail("pairs: two keys are each a " .. (kind == "userdata" and "field, param or formula" or kind) .. ", which have no order that is the same in every run; keep them in a list and use ipairs")
    end
  end
end

local function sorted_next(t, k)
  if type(t) ~= "table" then core.fail("next: expected a table, found " .. type(t)) end
  local keys = text.keys(t)
  if k ~= nil then check_order(keys) end -- next(t) alone asks whether there is anything
  if k == nil then
    if keys[1] == nil then return nil end
    return keys[1], t[keys[1]]
  end
  for i, key in ipairs(keys) do
    if rawequal(key, k) then
      if keys[i + 1] == nil then return nil end
      return keys[i + 1], t[keys[i + 1]]
    end
  end
end

local function sorted_pairs(t)
  local meta = getmetatable(t)
  if type(meta) == "table" and meta.__pairs then return meta.__pairs(t) end
  if type(t) ~= "table" then core.fail("pairs: expected a table, found " .. type(t)) end
  local keys, i = text.keys(t), 0
  check_order(keys)
  return function()
    local k
    repeat
      i = i + 1
      k = keys[i]
    until k == nil or t[k] ~= nil
    if k ~= nil then return k, t[k] end
  end, t, nil
end

M.leaving = nil -- set to what unwinds the script (mottle plan)

-- A stop asked for from outside passes through every protected call, and so does what unwinds the script.
local function passing_stop(f)
  return function(...)
    local r = table.pack(f(...))
    if core.stopped() then core.raise_stopped() end
    if M.leaving then error(M.leaving, 0) end
    if not r[1] then core.forget_status() end
    return table.unpack(r, 1, r.n)
  end
end

local function copy(t, without)
  local c = {}
  for k, v in next, t do
    if not (without and without[k]) then c[k] = v end
  end
  return c
end

-- Finalisers run with the hook off, so one that never ends could not be stopped.
local function set_metatable(t, meta)
  if type(meta) == "table" and rawget(meta, "__gc") ~= nil then core.fail("setmetatable: scripts have no finalisers (__gc)") end
  return setmetatable(t, meta)
end

local function printer(...)
  local t = table.pack(...)
  for i = 1, t.n do t[i] = tostring(t[i]) end
  core.write(1, table.concat(t, "\t") .. "\n")
end

---Makes the environment; `folder` is the script's own folder (files beside the script), `model` makes models, `script` is the
---name of the script's file there.
function M.make(folder, model, script)
  local loaded = {}
  local env = {
    assert = assert, error = error, ipairs = ipairs, select = select, tonumber = tonumber, tostring = tostring, type = type,
    rawequal = rawequal, rawget = rawget, rawlen = rawlen, rawset = rawset, setmetatable = set_metatable,
    getmetatable = function(v) if type(v) == "table" then return getmetatable(v) end end,
    next = sorted_next, pairs = sorted_pairs, pcall = passing_stop(pcall), xpcall = passing_stop(xpcall), print = printer,
    math = copy(math, { randomseed = true }), string = copy(string, { dump = true }), table = copy(table), utf8 = copy(utf8),
    coroutine = copy(coroutine),
  }
  env._G = env
  env.coroutine.resume = passing_stop(coroutine.resume)
  math.randomseed(1, 0)
  for _, name in ipairs { "exp", "log", "sqrt", "sin", "cos", "tanh", "abs", "min", "max", "where", "above", "below", "dx", "dy", "dz",
    "grad", "gradsq", "laplacian", "div", "dot", "filter", "noise", "param", "derivative", "time" } do env[name] = formula[name] end
  for _, name in ipairs { "grid", "wave", "place", "from_array", "from_image", "set" } do env[name] = grids[name] end
  for _, name in ipairs { "mean", "integral", "minimum", "maximum", "variance", "amplitude", "phase_fraction", "interface",
    "wavelength", "now" } do env[name] = measure[name] end
  for _, name in ipairs { "domains", "domain_count", "chords", "topology", "structure_factor", "structure_sectors",
    "correlation", "lengths", "curvature", "orientation", "profile", "interface_width" } do env[name] = microstructure[name] end
  for _, name in ipairs { "schedule", "quench", "ramp", "hold" } do env[name] = schedule[name] end
  env.clock = core.clock -- wall time in seconds, for timing; not for decisions that a run should repeat
  env.unit, env.degC, env.input, env.model = units.unit, units.degC, inputs.input, model

  -- A file beside the script comes before the bundled model of its name: what lies there is what its author means, and a model
  -- that a later version brings changes no older script. The script itself is no module.
  local function find(name)
    local file = name .. ".lua"
    if file ~= script and core.has(folder, file) then
      sources.note(folder, file)
      return text.source(core.read(folder, file)), "@" .. file
    end
    -- a chunk name without @: errors name the line of the script that called
    if core.models[name] then return core.models[name], "=" .. name end
    core.fail("require: there is no module '" .. name .. "' (bundled: " .. table.concat(bundled_names(), ", ") .. "; or a file " ..
      file .. " beside the script)" .. text.hint(name, bundled_names()))
  end

  local function load_module(name)
    local source, chunk_name = find(name)
    local chunk, message = core.load_text(source, chunk_name, env)
    if not chunk then core.fail(message) end
    return chunk(name)
  end

  function env.require(name)
    if type(name) ~= "string" then core.fail("require: expected the name of a module") end
    if bundled[name] then return require(name) end
    if loaded[name] == nil then
      loaded[name] = true
      local v = load_module(name)
      if v ~= nil then loaded[name] = v end
    end
    return loaded[name]
  end

  return setmetatable(env, {
    __index = function(_, name)
      core.fail("'" .. tostring(name) .. "' is not defined" .. text.hint(tostring(name), text.keys(env)))
    end,
    __metatable = false,
  })
end

return M
