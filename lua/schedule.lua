-- Thermal histories: stages that become the history of a param.
local core = require "core"
local options = require "options"

local M = {}

local following = setmetatable({}, { __mode = "k" }) -- params that have a history

---Params that follow a schedule take their value at a time, also those that no model's equations contain.
function M.present(time)
  for p in next, following do core.param_present(p, time) end
end

local Stage = { kind = "stage" }
local Schedule = { kind = "schedule" }
Schedule.__index = Schedule

local function stage(t) return setmetatable(t, Stage) end

---A fast change to a temperature: at a rate, or at once.
function M.quench(t)
  local o = options.read(t, "quench", { { "to", "number", required = true }, { "rate", "positive" }, { "name", "name" } })
  return stage { type = "quench", to = o.to, rate = o.rate, name = o.name }
end

---A slow change to a temperature: at a rate or over a duration.
function M.ramp(t)
  local o = options.read(t, "ramp", { { "to", "number", required = true }, { "rate", "positive" }, { "duration", "positive" },
    { "name", "name" } })
  if (o.rate and 1 or 0) + (o.duration and 1 or 0) ~= 1 then core.fail("ramp: say either rate or duration") end
  return stage { type = "ramp", to = o.to, rate = o.rate, duration = o.duration, name = o.name }
end

---A hold: hold{ 4*hour, name = "first ageing" }
function M.hold(t)
  if type(t) == "number" then t = { t } end
  local o = options.read(t, "hold", { { "duration", "positive" }, { "name", "name" } }, true)
  local d = t[1] or o.duration
  if type(d) ~= "number" or not (d > 0) then core.fail("hold: expected its duration first, as hold{ 4*unit.hour }") end
  return stage { type = "hold", duration = d, name = o.name }
end

---schedule{ T, start = 1350*K, quench{...}, hold{...}, ... }
function M.schedule(t)
  options.read(t, "schedule", { { "start", "number" } }, true)
  local p = t[1]
  if core.kind(p) ~= "param" then core.fail("schedule: expected the param that changes first, as schedule{ T, start = ..., ... }") end
  local s = setmetatable({ param = p, given = t.start, start = t.start or core.param_value(p), stages = {} }, Schedule)
  local count = {}
  for i = 2, #t do
    local st = t[i]
    if getmetatable(st) ~= Stage then
      core.fail(string.format("schedule: entry %d has to be quench{...}, ramp{...} or hold{...}, found %s", i, options.kind(st)))
    end
    count[st.type] = (count[st.type] or 0) + 1
    local copy = { type = st.type, to = st.to, rate = st.rate, duration = st.duration,
      name = st.name or (st.type .. " " .. count[st.type]) }
    s.stages[#s.stages + 1] = copy
  end
  if #s.stages == 0 then core.fail("schedule: it has no stages") end
  return s
end

function M.is(v) return getmetatable(v) == Schedule end

---Lays the stages out from time t0: fills from, upto, at, to of each stage, sets the param's history.
---@return number end time
function M.lay_out(s, t0)
  s.start = s.given or core.param_value(s.param, t0, true) -- without a start it goes on from what the last schedule reached
  local times, values, t, v = { t0 }, { s.start }, t0, s.start
  local function knot(time, value)
    times[#times + 1], values[#values + 1] = time, value
  end
  for _, st in ipairs(s.stages) do
    st.from, st.at = t, v
    local target = st.to or v
    local d = st.duration or (st.rate and math.abs(target - v) / st.rate) or 0
    t = t + d
    if d > 0 or target ~= v then knot(t, target) end
    v = target
    st.upto, st.reaches = t, v
  end
  -- at most two knots at one time: a stage without length that follows a jump replaces its end
  local i = 1
  while i <= #times do
    if times[i + 2] and times[i] == times[i + 2] then
      table.remove(times, i + 1)
      table.remove(values, i + 1)
    else i = i + 1 end
  end
  core.param_history(s.param, times, values)
  following[s.param] = true
  return t
end

---The stage at a time: the one that ends there or later. nil outside.
function M.stage_at(s, time)
  for _, st in ipairs(s.stages) do
    if time <= st.upto and time >= st.from and st.upto > st.from then return st end
  end
  return s.stages[#s.stages]
end

return M
