-- The console: lines from the keyboard or a pipe, each run by itself in the closed environment of scripts.
local core = require "core"
local text = require "text"
local options = require "options"
local measure = require "measure"
local models = require "model"
local units = require "unit"
local run = require "run"
local sandbox = require "sandbox"
local show = require "show"

local M = { failure = nil } -- why the last run did not reach its end

local greeting = [[
mottle %s console. help() shows what can be done; Ctrl-D ends.
Each line is run by itself: a name made without `local` stays, a local ends with its line.
]]

local help = [[
  g = grid{ cells = {128, 128}, spacing = 1 }
  c = g:field("c", 0.5 + 0.01*noise.uniform{ seed = 7 })
  m = model{ energy = c^2*(1 - c)^2 + 0.5*gradsq(c) }
  m:conserve(c, { mobility = 1 })
  plan(m)                    what will be solved, at which scales
  m:run{ duration = 200 }    runs; once more goes on from there; Ctrl-C stops a run
  show(c)                    the field as a picture (3-D: its middle plane)
  show{ c, low = 0, high = 1, map = "ember", width = 60 }
                             maps: slate, ember, fern, tide, grey; width in columns
  wavelength(c)              a value alone on its line is printed: a number, formula,
  = m:potential(c)           measurement, field, table; with = in front likewise
  ledger(m)                  what was recorded while it ran
  set(c, 0.4 + noise.uniform{ seed = 2 }*0.01)
                             gives a field new values; the time goes on

The vocabulary is that of scripts. A line that is not complete goes on in the next
one. Names stay when made without `local`. A run leaves no folder unless the console
was started with --into FOLDER. Tab completes names, Ctrl-C gives a line up, Ctrl-D
or quit() ends.
]]

-- --- values in words ------------------------------------------------------------------------------------------------------------

local ran = setmetatable({}, { __mode = "k" }) -- the model that moved the fields of a grid last
local function time_of(g) return ran[g] and ran[g].time or 0 end

-- Whole numbers without ".0": whether Lua keeps them as integers is no news here.
local function number(x) return type(x) == "number" and string.format("%.14g", x) or tostring(x) end

local describe

local function entries(t, depth)
  local out, keys = {}, text.keys(t)
  for i, k in ipairs(keys) do
    if i > 24 then
      out[#out + 1] = string.format("... (%d entries)", #keys)
      break
    end
    out[#out + 1] = (math.type(k) == "integer" and k == i and "" or tostring(k) .. " = ") .. describe(t[k], depth + 1)
  end
  return #out == 0 and "{}" or "{ " .. table.concat(out, ", ") .. " }"
end

local function names_of(fields)
  local list = {}
  for i, f in ipairs(fields) do list[i] = core.field_name(f) end
  return #list > 0 and table.concat(list, ", ") or "nothing yet"
end

local function measured(m)
  local v = m.value()
  if v == nil or v ~= v then return m.name .. " has no value now" end
  local unit = measure.unit(m)
  return m.name .. " = " .. number(v) .. (unit ~= "" and " " .. unit or "")
end

local in_words = {
  measurement = measured,
  field = function(f) return show.line(f, time_of(select(2, measure.values(f, "console")))) end,
  param = function(p) return core.param_name(p) .. " = " .. number(core.param_value(p, measure.clock())) end,
  expression = function(e)
    local v = core.number(e, measure.clock())
    local words = tostring(e)
    return v and words ~= number(v) and words .. " = " .. number(v) or words
  end,
  grid = function(g) return "grid of " .. table.concat(g.cells, " x ") .. " cells, spacing " .. table.concat(g.spacing, " x ") end,
  model = function(m) return "model that moves " .. names_of(m.moving) .. ", time " .. text.time(m.time, units.used) end,
  vector = tostring,
  number = number,
  string = function(s, depth) return depth > 0 and string.format("%q", s) or s end,
  table = function(t, depth)
    if depth >= 2 or getmetatable(t) then return "{...}" end
    return entries(t, depth)
  end,
  ["function"] = function() return "a function" end,
}

---A value in words; depth counts the tables it stands in.
function describe(v, depth)
  local kind = options.kind(v)
  local f = in_words[kind]
  if f then return f(v, depth) end
  return type(v) == "table" and "a " .. kind or tostring(v)
end

-- --- what only the console knows ---------------------------------------------------------------------------------------------------

local function check_model(m, name)
  if options.kind(m) ~= "model" then core.fail(name .. ": expected a model, as " .. name .. "(m), found " .. options.kind(m)) end
  if not m.core then core.fail(name .. ": nothing moves yet; declare it with m:conserve, m:relax or m:evolve") end
end

local function plan(m)
  check_model(m, "plan")
  m:settle()
  core.write(1, require("plan").text(m, {}, true))
  if #m.still > 0 then
    core.write(1, "Taken as fields that do not move: " .. names_of(m.still) .. ". Should one move, make the model anew and say how before plan(m).\n")
  end
end

-- Rows of a ledger that tell its course: at most `most`, the first and the last among them.
local function some_rows(rows, most)
  if #rows <= most then return rows end
  local out = {}
  for i = 0, most - 1 do out[i + 1] = rows[1 + (#rows - 1) * i // (most - 1)] end
  return out
end

local function columns_of(m, rows)
  local columns = {}
  for i, c in ipairs(m.ledger_head) do
    local cells, filled = {}, false
    for r, row in ipairs(rows) do
      local v = row[i]
      cells[r] = type(v) == "number" and text.number(v) or v or "-"
      filled = filled or cells[r] ~= ""
    end
    if filled then columns[#columns + 1] = { name = c[1] .. (c[2] ~= "" and " [" .. c[2] .. "]" or ""), cells = cells } end
  end
  return columns
end

local function ledger(m)
  check_model(m, "ledger")
  if #m.rows == 0 then core.fail("ledger: nothing was recorded yet; the model has to run first") end
  local rows = some_rows(m.rows, 16)
  local columns, lines = columns_of(m, rows), {}
  for r = 0, #rows do
    local line = {}
    for i, c in ipairs(columns) do
      local width = #c.name
      for _, cell in ipairs(c.cells) do width = math.max(width, #cell) end
      line[i] = string.format("%" .. math.min(width, 90) .. "s", r == 0 and c.name or c.cells[r])
    end
    lines[r + 1] = table.concat(line, "  ")
  end
  if #rows < #m.rows then lines[#lines + 1] = string.format("(%d of %d rows)", #rows, #m.rows) end
  core.write(1, table.concat(lines, "\n") .. "\n")
end

local told_files = false
-- A run as scripts have it, with one line of summary instead of a report.
local function running(m, o)
  local before = m.started and core.state(m.core).steps or 0
  local began = core.clock()
  ran[m.grid] = m
  local ok, message = pcall(run.run, m, o)
  if not run.quiet and core.is_terminal(2) then core.write(2, "\r\27[K") end
  M.failure = not ok and tostring(message) or nil
  if not ok then error(message, 0) end
  if run.quiet then return end
  local s = core.state(m.core)
  core.write(1, string.format("time %s after %d steps in %s%s\n", text.time(s.time, units.used), s.steps - before,
    core.time_text(core.clock() - began), s.energy == s.energy and "; energy " .. text.number(s.energy) or ""))
  if not run.folder and not told_files and #m.pictures + #m.saves + #m.tabulations > 0 then
    told_files = true
    core.write(1, "(pictures, fields and tables are written in a console started with --into FOLDER only)\n")
  end
end

local left = {} -- what quit() unwinds with
local function environment()
  local own = core.folder(".", "open")
  require("grid").folder = own
  local env = sandbox.make(own, models.model)
  models.runner = running
  env.help = function() core.write(1, help) end
  env.show = function(t) show.show(t, time_of) end
  env.plan, env.ledger = plan, ledger
  env.quit = function()
    sandbox.leaving = left
    error(left, 0)
  end
  return env
end

-- --- lines -----------------------------------------------------------------------------------------------------------------------------

-- An expression or a statement; nil, the message, and whether more lines may complete it. Empty lines in front give the line's
-- number to messages. The end of line keeps text without its closing quote from looking incomplete.
local function compile(chunk, number, env)
  local lines = ("\n"):rep(number - 1)
  local expression, marked = chunk:gsub("^%s*=", "", 1)
  local f, why = core.load_text(lines .. "return " .. expression .. "\n", "@console", env)
  if f then return f end
  local open = why:find("near <eof>$")
  if marked == 0 then
    f, why = core.load_text(lines .. chunk .. "\n", "@console", env)
    if f then return f end
  end
  return nil, why, open or why:find("near <eof>$")
end

local locals = {} -- names that lines made local, to explain why they are gone
local function note_locals(chunk)
  for list in chunk:gmatch("%f[%w_]local%s+([%a_][%w_,%s]*)") do
    for name in list:gsub("^function%s+", ""):gmatch("[%a_][%w_]*") do locals[name] = true end
  end
end

local function explained(message)
  local name = message:match("'([%a_][%w_]*)' is not defined")
  if not name or not locals[name] then return message end
  return message .. "\nThe name was local to its line; make it without `local` to keep it."
end

local Session = {}
Session.__index = Session

-- What belongs to typing goes where the prompt is: standard output may be a file.
local function on_screen(words) core.write(core.is_terminal(1) and 1 or 2, words) end

function Session:prompt()
  if not self.keyboard then return nil end
  return self.pending and "      > " or "mottle> "
end

-- The next line, or nil and why: "end" or "stopped". Time spent waiting for it is no time of the run.
function Session:line()
  local began = core.clock()
  local words = {}
  for _, k in ipairs(self.keyboard and text.keys(self.env) or {}) do words[#words + 1] = tostring(k) end
  local s, why = core.read_line(self:prompt(), table.concat(words, "\n") .. "\n")
  run.began = run.began + core.clock() - began
  if s then
    self.count = self.count + 1
    if self.count == 1 then s = text.source(s) end
  end
  return s, why
end

function Session:execute(f, chunk)
  note_locals(chunk)
  self.at = nil
  local r = table.pack(f())
  self.kept[#self.kept + 1] = chunk
  for i = 1, r.n do core.write(1, describe(r[i], 0) .. "\n") end
end

-- One line: runs it, or keeps it until it is complete. Gives "end" or "stopped" where there is none.
function Session:turn()
  local s, why = self:line()
  if not s and self.pending and why == "end" and not self.interactive then
    core.fail("console: the input ends in the middle of what began on line " .. self.first)
  end
  if not s then return why end
  local chunk = self.pending and self.pending .. "\n" .. s or s
  local first = self.pending and self.first or self.count
  self.pending = nil
  local f, message, open = compile(chunk, first, self.env)
  if f then self:execute(f, chunk)
  elseif open then self.pending, self.first = chunk, first
  else error(message, 0) end
end

-- --- the loop ----------------------------------------------------------------------------------------------------------------------------

-- A message, and the exit code where it ends the console: from a pipe always, from the keyboard never.
function Session:failed(message, words)
  local code = words.code(message)
  core.forget_status()
  core.write(2, (self.interactive and "" or "mottle: ") .. explained(words.tidy(message)) .. "\n")
  if not self.interactive then return code end
end

function Session:loop(words)
  while true do
    local ok, what = pcall(self.turn, self)
    local ending = core.forget_stop()
    if what == left then return 0 end
    if ok and what == "end" then
      if self.keyboard then on_screen("\n") end
      return 0
    end
    local code = not ok and self:failed(what, words) or nil
    if ending or (what == "stopped" and not self.interactive) then return 130 end
    if code then return code end
    if ok and what == "stopped" then
      self.pending = nil
      on_screen("\n")
    end
  end
end

local function keep_folder(session, o)
  if not o.into then return end
  run.path = o.into
  function run.open_folder()
    run.folder = core.folder(run.path, o.replace and "replace" or "make")
    require("sources").keep(run.folder)
  end
  function session.close()
    if not run.folder then return end
    core.stop_heeded()
    core.put(run.folder, "script.lua", table.concat(session.kept, "\n") .. "\n")
    run.close(M.failure)
    if not run.quiet then core.write(1, require("report").words(run)) end
  end
end

---Runs the console and gives the exit code. words: tidy(message) and code(message) of the command line.
function M.run(o, words)
  local keyboard = core.is_terminal(0) and (core.is_terminal(1) or core.is_terminal(2))
  local session = setmetatable({ env = environment(), interactive = core.is_terminal(0), keyboard = keyboard, count = 0, kept = {} }, Session)
  run.script_name, run.script_text, run.quiet, run.began = "console", "", o.quiet, core.clock()
  keep_folder(session, o)
  if keyboard and not o.quiet then on_screen(greeting:format(core.machine().version)) end
  local code = session:loop(words)
  if session.close then session.close() end
  return code
end

return M
