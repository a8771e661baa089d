-- The run: events in order, ledger, pictures, progress, summary.
local core = require "core"
local text = require "text"
local units = require "unit"
local measure = require "measure"
local schedule = require "schedule"
local models = require "model"
local inputs = require "input"
local formula = require "formula"
local report = require "report"

-- What the program says about where things go; filled by cli. Without a folder (the console) runs leave their rows in memory
-- and nothing else.
local M = { folder = nil, path = nil, quiet = false, script = nil, script_text = nil, threads = 1, first = nil, runs = {}, tables = {}, warnings = {} }

local clock_model
measure.clock = function()
  local time = clock_model and clock_model.time or 0
  schedule.present(time)
  return time
end

---Measurements are of this model's time from now on.
function M.watch(m) clock_model = m end

local function real() return units.used end

local time_scale, time_unit = 1, ""

local function choose_time_unit(total)
  time_scale, time_unit = 1, ""
  if not real() then return end
  for _, u in ipairs { { 3 * 86400, 86400, "d" }, { 2 * 3600, 3600, "h" }, { 300, 60, "min" }, { 0, 1, "s" } } do
    if total >= u[1] then
      time_scale, time_unit = u[2], u[3]
      return
    end
  end
end

local scheduled = {} -- params that follow a schedule: temperatures
function models.param_unit(p) return real() and scheduled[p] and "K" or "" end

-- --- ledger -----------------------------------------------------------------------------------------------------------------

local function default_columns(m)
  local list = {}
  if m.energy_density then list[1] = m:energy() end
  for _, f in ipairs(m.moving) do
    for _, what in ipairs { "mean", "minimum", "maximum", "amplitude", "wavelength" } do list[#list + 1] = measure[what](f) end
  end
  return list
end

local function open_ledger(m, total)
  if m.ledger then return end
  if not m.recorded then rawset(m, "recorded", { every = false, columns = default_columns(m) }) end
  choose_time_unit(total)
  local head = { { "time", time_unit, false }, { "stage", "", true }, { "step", time_unit, false } }
  for _, c in ipairs(m.recorded.columns) do head[#head + 1] = { c.name, c.param and models.param_unit(c.param) or measure.unit(c), false } end
  rawset(m, "ledger_head", head)
  rawset(m, "rows", {})
  if not M.folder then
    rawset(m, "ledger", true)
    return
  end
  local name = "ledger.csv"
  if M.ledger_model and M.ledger_model ~= m then
    name = "tables/ledger-" .. (#M.runs + 1) .. ".csv"
    core.sub_folder(M.folder, "tables")
  end
  M.ledger_model = M.ledger_model or m
  rawset(m, "ledger", core.table(M.folder, name, head))
  M.runs[#M.runs + 1] = #M.runs == 0 and m or { ledger = m.ledger } -- the report tells the first model; the others may be collected
end

local function record(m, stage)
  if m.last_record == m.time and m.last_stage == stage then return end
  rawset(m, "last_record", m.time)
  rawset(m, "last_stage", stage)
  local row = { m.time / time_scale, stage, core.state(m.core).step / time_scale }
  measure.together(function()
    for i, c in ipairs(m.recorded.columns) do
      local v = c.value()
      row[i + 3] = (type(v) == "number" and v == v) and v or false
    end
  end)
  if M.folder then core.row(m.ledger, row) end
  m.rows[#m.rows + 1] = row
end

-- --- tables of distributions ---------------------------------------------------------------------------------------------------

local taken = {}
local function table_file(name)
  local base, n = name:gsub("[^%w%-]+", "_"):gsub("^_+", ""):gsub("_+$", ""), 1
  if base == "" then base = "table" end
  local file = base
  while taken[file] do file, n = base .. "-" .. (n + 1), n + 1 end
  taken[file] = true
  return "tables/" .. file .. ".csv"
end

local function open_tables(m)
  if #m.tabulations == 0 or not M.folder then return end
  core.sub_folder(M.folder, "tables")
  for _, p in ipairs(m.tabulations) do
    p.head = { { "time", time_unit, false }, { "stage", "", true } }
    for _, c in ipairs(measure.table_head(p.measurement)) do p.head[#p.head + 1] = c end
    p.file = table_file(p.measurement.name)
    p.table = core.table(M.folder, p.file, p.head)
    M.tables[#M.tables + 1] = p
  end
end

local function tabulate(m, p, stage)
  if p.last == m.time or not p.table then return end
  p.last = m.time
  for _, row in ipairs(measure.table_rows(p.measurement)) do
    local cells = { m.time / time_scale, stage }
    for i = 1, #p.head - 2 do cells[i + 2] = row[i] or false end
    core.row(p.table, cells)
  end
end

-- --- pictures and fields ------------------------------------------------------------------------------------------------------

local numbers = {}
-- Numbered within the run folder, not within a model: a script may make many models of one field's name.
local function next_file(pattern, name)
  local key = name:gsub("[^%w%-_]", "_")
  local full = pattern .. key
  numbers[full] = (numbers[full] or -1) + 1
  return string.format(pattern, key, numbers[full])
end

local function draw(m, p, stage)
  if p.last == m.time or not M.folder then return end
  p.last = m.time
  local f, g = measure.values(p.e, "picture")
  local name = next_file("pictures/%s-%04d.png", p.name)
  local title = (stage ~= "" and stage .. ", " or "") .. (real() and "" or "time ") .. text.time(m.time, real())
  core.picture(M.folder, name, f, { low = p.low, high = p.high, map = p.map, scale = p.scale, title = title, quantity = p.name,
    spacing = g.dim > 1 and g.spacing[1] == g.spacing[2] and g.spacing[1] or 0, metres = real() })
  m.drawn[#m.drawn + 1] = { file = name, title = title, name = p.name, time = m.time }
end

local function save(m, p)
  if p.last == m.time or not M.folder then return end
  p.last = m.time
  local f = measure.values(p.e, "save")
  core.write_array(M.folder, next_file("fields/%s-%04d.npy", p.name), f)
end

-- --- progress ------------------------------------------------------------------------------------------------------------------

local shown = 0
local function progress(m, state, run)
  if M.quiet then return end
  local now = core.clock()
  local terminal = core.is_terminal(2)
  if now - shown < (terminal and 0.2 or 10) then return end
  shown = now
  local done = (state.time - run.t0) / (run.t1 - run.t0)
  local left = done > 0.005 and (now - run.began) * (1 - done) / done or nil
  local stage = run.schedule and schedule.stage_at(run.schedule, state.time).name or ""
  local line = string.format("%5.1f %%  time %s%s  step %s  energy %s%s", 100 * done, text.time(state.time, real()),
    stage ~= "" and "  " .. stage or "", text.time(state.step, real()), text.number(state.energy),
    left and string.format("  about %s left", core.time_text(left)) or "")
  core.write(2, terminal and "\r\27[K" .. line or line .. "\n")
end

-- --- events ----------------------------------------------------------------------------------------------------------------------

-- A thing that happens every dt: due(time) gives its next time after `time`.
local function next_multiple(dt, t0, time)
  local n = math.floor((time - t0) / dt * (1 + 1e-12) + 1e-9) + 1
  return t0 + n * dt
end

local function is_multiple(dt, t0, time)
  local n = math.floor((time - t0) / dt + 0.5)
  return math.abs(t0 + n * dt - time) <= 1e-9 * dt
end

-- What a script asks for counts from time 0, so that a loop of short runs keeps its beat, and is landed on. A default divides the
-- run at hand and takes the first step's end at or after each of its times: it does not shorten steps.
local function check_beat(every, run)
  if (run.t1 - run.t0) / every > 1e9 then
    core.fail(string.format("every %.6g is too short: that would be %.6g times in a run of %.6g", every, (run.t1 - run.t0) / every, run.t1 - run.t0))
  end
  return every
end

-- Whether x comes after time by more than rounding: 0.3 and 0.1 + 0.2 are one time.
local function after(x, time) return x - time > 1e-12 * math.max(math.abs(x), math.abs(time)) end

local function next_event(m, run, time)
  local t = run.t1
  if run.schedule then
    for _, s in ipairs(run.schedule.stages) do if s.upto > time and s.upto < t then t = s.upto end end
  end
  for _, h in ipairs(m.at_hooks) do if not h.done and after(h.time, time) and after(t, h.time) then t = h.time end end
  -- a beat that rounding alone parts from an end is that end: no second call, no step of no length
  local function sooner_beat(every)
    local dt = every and check_beat(every, run)
    if dt and next_multiple(dt, 0, time) < t - 1e-9 * dt then t = next_multiple(dt, 0, time) end
  end
  sooner_beat(m.recorded.every)
  for _, p in ipairs(m.pictures) do sooner_beat(p.every) end
  for _, p in ipairs(m.saves) do sooner_beat(p.every) end
  for _, p in ipairs(m.tabulations) do sooner_beat(p.every) end
  for _, h in ipairs(m.every_hooks) do sooner_beat(h.time) end
  return t
end

-- The next time of a default, at whose first step's end something happens.
local function next_default(m, run, time)
  local t = math.huge
  if not m.recorded.every then t = next_multiple(run.record_every, run.t0, time) end
  for _, p in ipairs(m.pictures) do
    if not p.every then t = math.min(t, next_multiple(run.picture_every, run.t0, time)) end
  end
  return t
end

local function call_at_hooks(m)
  for _, h in ipairs(m.at_hooks) do
    if not h.done and not after(h.time, m.time) then
      h.done = true
      h.f(m)
    end
  end
end

local function happen(m, run, stage, stage_ends)
  local time, last = m.time, m.time >= run.t1
  local function due(every, default)
    if every then return is_multiple(every, 0, time) end
    return default and next_multiple(default, run.t0, run.before) <= time * (1 + 1e-12)
  end
  if stage_ends or last or due(m.recorded.every, run.record_every) then record(m, stage) end
  for _, p in ipairs(m.pictures) do
    if last or stage_ends or due(p.every, run.picture_every) then draw(m, p, stage) end
  end
  for _, p in ipairs(m.saves) do
    if last or due(p.every) then save(m, p) end
  end
  for _, p in ipairs(m.tabulations) do
    if last or stage_ends or due(p.every) then tabulate(m, p, stage) end
  end
  for _, h in ipairs(m.every_hooks) do if due(h.time) then h.f(m) end end
  call_at_hooks(m)
  run.before = time
end

local function look(m)
  for _, h in ipairs(m.when_hooks) do
    if not h.done and h.time(m) then
      h.done = true
      h.f(m)
    end
  end
end

local function open_condition(m)
  for _, h in ipairs(m.when_hooks) do if not h.done then return true end end
  return false
end

local function stage_ending(run, time)
  if not run.schedule then return "", false end
  for _, s in ipairs(run.schedule.stages) do
    if s.upto == time and s.upto > s.from then return s.name, true end
  end
  return schedule.stage_at(run.schedule, time).name, false
end

local function note_stage(m, run, stage)
  local entry = run.stage_began
  local state = core.state(m.core)
  m.stages[#m.stages + 1] = { name = stage, from = entry.time, upto = m.time, T0 = entry.T, steps = state.steps - entry.steps,
    T1 = run.schedule and core.param_value(run.schedule.param, m.time), first = #m.rows > 0 and entry.row or 1, last = #m.rows }
  run.stage_began = { time = m.time, T = m.stages[#m.stages].T1, steps = state.steps, row = #m.rows }
end

local function advance(m, run)
  while m.time < run.t1 do
    local target = next_event(m, run, m.time)
    local single = open_condition(m)
    local tick = function(state) progress(m, state, run) end
    local default = next_default(m, run, run.before)
    repeat
      local arrived = core.advance(m.core, target, tick, single, default)
      look(m)
      single = open_condition(m)
    until arrived or m.time >= math.min(target, default)
    local stage, ends = stage_ending(run, m.time)
    happen(m, run, stage, ends)
    if ends or m.time >= run.t1 then note_stage(m, run, stage) end
    if M.folder then report.refresh(M) end
  end
end

-- --- running ----------------------------------------------------------------------------------------------------------------------

local function prepare(m, o)
  local t0 = m.time
  local run = { t0 = t0, schedule = o.schedule, began = core.clock() }
  if o.schedule then
    run.t1 = schedule.lay_out(o.schedule, t0)
    scheduled[o.schedule.param] = true
    if run.t1 <= t0 then core.fail("schedule: all stages together take no time; add a hold{...}") end
  else
    run.t1 = t0 + o.duration
  end
  local total = run.t1 - t0
  run.record_every = total / 100
  run.picture_every = total / 4
  run.before = t0
  return run
end

local going = false
local function stops_cleanly(m, f)
  going = true
  local ok, message = xpcall(f, function(e) return e end)
  going = false
  if ok then return end
  local state = core.state(m.core)
  M.stopped_at = state.time
  if M.folder and not core.stopped() then report.finish(M, tostring(message)) end -- on a stop, the command line does it
  error(message, 0)
end

-- The energy may rise where a mobility matrix is no matrix of Onsager's kind.
local function warn_of_matrix(m)
  local s = core.state(m.core)
  local function warn(what)
    M.warnings[#M.warnings + 1] = what
    core.write(2, "mottle: warning: " .. what .. "\n")
  end
  if s.matrix_skew > 1e-9 then
    warn(string.format("the mobility or rate matrix is not symmetric: elements (i, j) and (j, i) differ by up to %.3g of the largest; the energy need not fall", s.matrix_skew))
  end
  if s.matrix_lowest < -1e-9 then
    warn(string.format("the mobility or rate matrix is not positive: its lowest eigenvalue is %.3g of its largest element in cell %s; the energy may rise there", s.matrix_lowest,
      m.grid:cell_text(s.matrix_cell)))
  end
end

function M.run(m, o)
  if going then core.fail("run: a hook cannot start a run; let it set what the script looks at after the run") end
  inputs.check()
  local run = prepare(m, o)
  if M.plan then M.plan(m, run, o) end -- does not come back
  if M.check then M.check(m, run, o, m.recorded and m.recorded.columns or default_columns(m)) end
  if not M.folder and M.open_folder then M.open_folder() end
  local fresh = not m.started
  local steps = { accuracy = o.accuracy, step = o.step, longest = o.longest, method = o.method_number or 0 }
  if not fresh then core.step_options(m.core, steps) end
  if fresh then
    rawset(m, "drawn", {})
    rawset(m, "stages", {})
    core.start(m.core, steps, run.t0)
    warn_of_matrix(m)
    rawset(m, "started", true)
    clock_model = m
    if M.folder and #m.pictures == 0 and m.grid.dim > 1 then for _, f in ipairs(m.moving) do m:picture { f } end end
    open_ledger(m, run.t1 - run.t0)
    open_tables(m)
  end
  clock_model = m
  M.current = m
  run.stage_began = { time = run.t0, T = o.schedule and o.schedule.start, steps = core.state(m.core).steps, row = #m.rows + (fresh and 1 or 0) }
  rawset(m, "schedule", o.schedule)
  stops_cleanly(m, function()
    local stage = o.schedule and schedule.stage_at(o.schedule, run.t0).name or ""
    if fresh then
      record(m, stage)
      for _, p in ipairs(m.pictures) do draw(m, p, stage) end
      for _, p in ipairs(m.tabulations) do tabulate(m, p, stage) end
      for _, p in ipairs(m.saves) do
        if p.every then save(m, p) else measure.values(p.e, "save") end -- what cannot be evaluated should fail now, not at the end
      end
    end
    call_at_hooks(m) -- those whose time is here or past already
    advance(m, run)
  end)
  rawset(m, "wall", (m.wall or 0) + core.clock() - run.began)
end
models.runner = M.run

---All scripts' runs are over: the ledger is closed, the summary written.
function M.close(failure)
  if not M.folder then return end
  if not M.quiet and core.is_terminal(2) then core.write(2, "\r\27[K") end
  for _, m in ipairs(M.runs) do
    if m.ledger then core.close_table(m.ledger) end
  end
  for _, p in ipairs(M.tables) do core.close_table(p.table) end
  report.finish(M, failure)
end

M.time_unit = function() return time_unit, time_scale end
M.seeds = formula.seeds
M.inputs = inputs

return M
