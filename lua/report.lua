-- summary.json, report.html and the closing words of a run.
local core = require "core"
local text = require "text"
local json = require "json"
local units = require "unit"
local html = require "html"

local M = {}

local function stage_rows(m)
  local list = {}
  for i, s in ipairs(m.stages) do
    list[i] = { name = s.name, from = s.from, upto = s.upto, T0 = s.T0, T1 = s.T1, steps = s.steps, first = s.first, last = s.last }
  end
  return list
end

local function describe_grid(g)
  local walls = {}
  for a = 1, g.dim do walls[a] = g.mirror[a] and "mirror" or "periodic" end
  return { cells = g.cells, spacing = g.spacing, walls = walls }
end

local function field_names(m)
  local t = {}
  for i, f in ipairs(m.moving) do t[i] = core.field_name(f) end
  return t
end

---Everything the report says, as plain data: what summary.json holds.
function M.data(run, failure)
  local m = run.runs[1]
  local unit, scale = run.time_unit()
  local machine = core.machine()
  local d = {
    format = 1, program = "mottle " .. machine.version, script = run.script_name, date = core.date(),
    machine = machine, threads = run.threads, real_units = units.used, time_unit = unit, time_scale = scale,
    inputs = {}, seeds = {}, failure = failure, converged = "not checked", measured = "none",
  }
  for i, x in ipairs(run.inputs.list) do d.inputs[i] = { name = x.name, value = x.value, meaning = x.meaning, given = x.given } end
  for i, s in ipairs(run.seeds) do d.seeds[i] = s end
  d.warnings = run.warnings
  d.sources = {}
  for i, s in ipairs(require("sources").list) do d.sources[i] = { file = s.file, copy = s.copy } end
  if not m then return d end
  d.grid = describe_grid(m.grid)
  d.fields = field_names(m)
  d.energy = m.energy_density and tostring(m.energy_density) or nil
  d.stages = stage_rows(m)
  d.columns = {}
  for i, c in ipairs(m.ledger_head) do d.columns[i] = { name = c[1], unit = c[2], text = c[3] } end
  d.pictures = {}
  for i, p in ipairs(m.drawn) do d.pictures[i] = { file = p.file, title = p.title, name = p.name } end
  d.tables = {}
  for i, p in ipairs(run.tables) do d.tables[i] = { file = p.file, measurement = p.measurement.name } end
  d.state = core.state(m.core)
  d.wall_time = core.clock() - run.began
  d.dim = m.grid.dim
  return d
end

local function rows_of(run)
  local m = run.runs[1]
  return m and m.rows or {}
end

local last = -math.huge
---Rewrites the report now and then while the run goes on.
function M.refresh(run)
  local now = core.clock()
  if now - last < 15 then return end
  local d = M.data(run)
  d.running = true
  core.put(run.folder, "report.html", html.page(d, rows_of(run), function(file) return core.read(run.folder, file) end))
  last = core.clock() -- a large report must not eat the run
end

---Writes summary and report at the end.
function M.finish(run, failure)
  local d = M.data(run, failure)
  core.put(run.folder, "summary.json", json.write(d) .. "\n")
  core.put(run.folder, "report.html", html.page(d, rows_of(run), function(file) return core.read(run.folder, file) end))
end

---Makes the report of a folder again from its summary and ledger.
---@return string path of the report
function M.rebuild(path)
  local folder = core.folder(path, "open")
  if not core.has(folder, "summary.json") then core.fail("'" .. path .. "' has no summary.json: it is no finished run folder") end
  local ok, d = pcall(json.read, core.read(folder, "summary.json"))
  if not ok or type(d) ~= "table" then core.fail("summary.json of '" .. path .. "' is damaged: " .. tostring(d)) end
  local rows = {}
  if type(d.columns) == "table" then rows = html.parse_ledger(core.read(folder, "ledger.csv"), d.columns) end
  core.put(folder, "report.html", html.page(d, rows, function(file) return core.read(folder, file) end))
  return path .. "/report.html"
end

local function column(d, name)
  for i, c in ipairs(d.columns or {}) do if c.name == name then return i end end
end

---What happened, in words and numbers, for the terminal.
function M.words(run)
  local d = M.data(run)
  local rows = rows_of(run)
  local s = d.state
  if not s then return string.format("%s: no run was started\nrun folder: %s\n", d.script, run.path) end
  local out = {}
  local function say(...) out[#out + 1] = string.format(...) end
  say("%s: %d steps (%d rejected), %d right-hand sides, %s of wall time on %d thread%s", d.script, s.steps, s.rejected, s.evaluations,
    core.time_text(d.wall_time), d.threads, d.threads == 1 and "" or "s")
  say("time reached %s; steps from %s to %s", text.time(s.time, d.real_units), text.time(s.step_min, d.real_units), text.time(s.step_max, d.real_units))
  if s.energy == s.energy then say("energy %s; largest rise in a step %s (relative); mean moved by %s", text.number(s.energy), text.number(math.max(0, s.energy_rise)), text.number(s.mean_drift)) end
  if s.log_steps > 0 then say("the logarithm's extension was used in %d steps (lowest argument %s)", s.log_steps, text.number(s.log_lowest)) end
  for _, st in ipairs(d.stages) do
    local line = string.format("  %-20s to %s", st.name ~= "" and st.name or "run", text.time(st.upto, d.real_units))
    local row = rows[st.last]
    for i, c in ipairs(d.columns) do
      if row and i > 3 and row[i] and i <= 9 then line = line .. string.format("  %s %s%s", c.name, text.number(row[i]), c.unit ~= "" and " " .. c.unit or "") end
    end
    out[#out + 1] = line
  end
  say("run folder: %s", run.path)
  say("report:     %s/report.html", run.path)
  return table.concat(out, "\n") .. "\n"
end

M.column = column
return M
