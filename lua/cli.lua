-- The command line.
local core = require "core"
local text = require "text"
local inputs = require "input"
local options = require "options"
local run = require "run"
local models = require "model"

local usage = [[
mottle: heat treatments of materials that unmix, from a Lua script to a measured run

  mottle run SCRIPT [name=value ...]    run a script; name=value sets its inputs (T2=627degC, seed=3)
      --into FOLDER    the run folder (default: the script's name with .run, in the present folder)
      --replace        replace a run folder that exists
      --threads N      threads (default: the machine's cores); results do not depend on it
      --quiet          no progress, no summary
  mottle plan SCRIPT [name=value ...]   what would be solved, at which scales, at what cost; nothing is run
      --into FOLDER    keep it there too: plan.txt, growth.csv and growth.svg (growth rate against wavenumber)
      --replace        replace that folder if it exists
  mottle console                        a prompt for trying things; also lines from a pipe, up to the first error
      --into FOLDER    what its runs leave goes there (default: nothing is written); --replace, --threads, --quiet as above
  mottle check SCRIPT [name=value ...]  a short stretch again with finer steps and grids: error bars, and whether they suffice
      --for TIME       its length (default: a tenth of the first run); --into FOLDER, --replace: check.txt and check.csv
  mottle report FOLDER                  makes report.html of a run folder again
  mottle --help, mottle --version

Exit codes: 0 done; 2 the script or its input is wrong; 3 the run folder exists already; 4 a file could not be read or
written; 5 out of memory or refused by the system; 6 the numerics failed (message says why); 130 stopped on request.
]]

local function usage_error(message)
  core.write(2, "mottle: " .. message .. "\n\nTry mottle --help.\n")
  return 2
end

-- Options of a command: flags with or without a value.
local function parse(args, with_value, without)
  local o, rest, names = {}, {}, {}
  for k in next, with_value do names[#names + 1] = "--" .. k end
  for k in next, without do names[#names + 1] = "--" .. k end
  local i = 1
  while i <= #args do
    local name, sign, value = args[i]:match("^%-%-([%w%-]+)(=?)(.*)$")
    if name and without[name] then
      if sign == "=" then return nil, "option --" .. name .. " takes no value" end
      o[name] = true
    elseif name and with_value[name] then
      if value == "" then
        i = i + 1
        value = args[i]
      end
      if not value then return nil, "option --" .. name .. " needs a value" end
      o[name] = value
    elseif args[i]:sub(1, 1) == "-" and args[i] ~= "-" then
      return nil, "unknown option " .. args[i] .. text.hint(args[i], names)
    else rest[#rest + 1] = args[i] end
    i = i + 1
  end
  return o, rest
end

local function split_path(path)
  local folder, name = path:match("^(.*)/([^/]*)$")
  if not folder then return ".", path end
  return folder == "" and "/" or folder, name
end

local function use_threads(o)
  local n = core.machine().cores
  if o.threads then n = tonumber(o.threads) end
  if not n or n ~= math.floor(n) or n < 1 or n > 256 then return nil, "--threads takes a whole number from 1 to 256, not '" .. o.threads .. "'" end
  run.threads = math.tointeger(n)
  core.threads(run.threads)
  return true
end

local function take_inputs(rest)
  for i = 2, #rest do
    local name, value = rest[i]:match("^([%a_][%w_]*)=(.*)$")
    if not name then return nil, "expected name=value after the script, found '" .. rest[i] .. "'" end
    inputs.given[name] = value
  end
  return true
end

local function load_script(path)
  local folder, name = split_path(path)
  run.script, run.script_name = path, name
  if not core.has(nil, path) then core.fail("there is no script '" .. path .. "'") end
  run.script_text = core.read(nil, path)
  if run.script_text:sub(1, 1) == "\27" then core.fail("'" .. path .. "' is compiled Lua, a binary file; a script is its text") end
  local own = core.folder(folder, "open")
  require("grid").folder = own
  local env = require("sandbox").make(own, models.model, name)
  local chunk, message = core.load_text(text.source(run.script_text), "@" .. name, env)
  if not chunk then core.fail(message) end
  return chunk
end

local full = "not enough memory" -- what Lua says when the script's own tables and text have reached their limit

-- Lua's own messages (arithmetic on nil ...) carry the line already; ours do too.
local function tidy(message)
  if type(message) ~= "string" then return "the script ended with error(...) of a " .. options.kind(message) .. "; give it a text to say what is wrong" end
  if message == full then return "no memory is left for the script's own tables and text (they may take a quarter of this machine's); keep less of them" end
  return (message:gsub("^%[string \"(.-)\"%]", "%1"))
end

local function failure_code(message)
  local code = core.exit_code()
  return code ~= 0 and code or message == full and 5 or 2
end

local function run_command(args)
  local o, rest = parse(args, { into = true, threads = true }, { replace = true, quiet = true })
  if not o then return usage_error(rest) end
  if not rest[1] then return usage_error("run: which script?") end
  local ok, why = take_inputs(rest)
  if ok then ok, why = use_threads(o) end
  if not ok then return usage_error(why) end
  run.quiet = o.quiet
  run.path = o.into or (select(2, split_path(rest[1])):gsub("%.lua$", "") .. ".run")
  function run.open_folder()
    run.folder = core.folder(run.path, o.replace and "replace" or "make")
    core.put(run.folder, "script.lua", run.script_text)
    require("sources").keep(run.folder)
  end
  local chunk = load_script(rest[1])
  run.began = core.clock()
  local good, message = xpcall(chunk, function(e) return e end)
  core.stop_heeded() -- from here on nothing is interrupted: ledger and report are closed properly
  if not good then
    run.close(tidy(message))
    core.write(2, "mottle: " .. tidy(message) .. "\n")
    return failure_code(message)
  end
  inputs.check()
  run.close()
  if not run.folder then
    core.write(2, "mottle: the script ran to its end without a run (no m:run{...})\n")
    return 0
  end
  if not run.quiet then core.write(1, require("report").words(run)) end
  return 0
end

local function plan_command(args)
  local o, rest = parse(args, { threads = true, into = true }, { replace = true })
  if not o then return usage_error(rest) end
  if not rest[1] then return usage_error("plan: which script?") end
  local ok, why = take_inputs(rest)
  if ok then ok, why = use_threads(o) end
  if not ok then return usage_error(why) end
  local done = {}
  function run.plan(m, r)
    local plan = require("plan")
    local words, kept = plan.text(m, r)
    if o.into then plan.save(core.folder(o.into, o.replace and "replace plain" or "plain"), words, kept) end
    core.write(1, words)
    require("sandbox").leaving = done
    error(done, 0) -- unwinds the script
  end
  local chunk = load_script(rest[1])
  local good, message = xpcall(chunk, function(e) return e end)
  if good then core.fail("the script ran to its end without a run, so there is nothing to plan") end
  if message ~= done then
    core.write(2, "mottle: " .. tidy(message) .. "\n")
    return failure_code(message)
  end
  return 0
end

local function console_command(args)
  local o, rest = parse(args, { into = true, threads = true }, { replace = true, quiet = true })
  if not o then return usage_error(rest) end
  if rest[1] then return usage_error("console: takes no script, found '" .. rest[1] .. "'; lines come from the keyboard or a pipe") end
  local ok, why = use_threads(o)
  if not ok then return usage_error(why) end
  return require("console").run(o, { tidy = tidy, code = failure_code })
end

-- One execution of the script up to its first run, on a grid `factor` times finer; f takes the run and what f gives comes back.
local function up_to_the_run(path, factor, f)
  local done, result, sandbox = {}, nil, require("sandbox")
  require("grid").refine, inputs.list, sandbox.leaving = factor, {}, nil
  function run.check(m, r, o, columns)
    result = f(m, r, o, columns)
    sandbox.leaving = done
    error(done, 0) -- unwinds the script
  end
  local chunk = load_script(path)
  local good, message = xpcall(chunk, function(e) return e end)
  sandbox.leaving = nil
  if good then core.fail("the script ran to its end without a run, so there is nothing to check") end
  if message ~= done then error(message, 0) end
  return result
end

local function check_run(path, o)
  local check = require("check")
  local length = o["for"] and (require("unit").parse(o["for"]) or core.fail("--for takes a time, with a unit if the script has units, not '" .. o["for"] .. "'"))
  local first = up_to_the_run(path, 1, function(m, r, options, columns)
    r.stretch = math.min(length or (r.t1 - r.t0) / 10, r.t1 - r.t0)
    local b = { m = m, run = r, options = options, columns = columns }
    if not (r.stretch > 0) then core.fail("--for has to be a positive time") end
    if m.noisy then core.fail("check: with thermal noise two runs take different paths; compare statistics over seeds instead (or check the script without its noise)") end
    b.values, b.states = check.in_time(m, r, options, columns)
    local measure = require("measure")
    local lambda = measure.wavelength(m.moving[1])
    local ok, value = pcall(lambda.value)
    b.lambda = ok and value and value * (measure.unit(lambda) == "nm" and 1e-9 or 1) or nil
    return b
  end)
  local space = {}
  for i, factor in ipairs(check.grid_factors) do
    space[i] = up_to_the_run(path, factor, function(m, r, options, columns)
      r.stretch = first.run.stretch
      return check.in_space(m, r, options, columns)
    end)
  end
  local rows = check.rows(first.columns, first.values, space, first.options.step)
  local words, good = check.words(first.m, first.run, first.options, rows, first.states, first.lambda)
  if o.into then
    local folder = core.folder(o.into, o.replace and "replace plain" or "plain")
    core.put(folder, "check.txt", words)
    core.put(folder, "check.csv", check.table(rows))
  end
  core.write(1, words)
  return good and 0 or 6
end

local function check_command(args)
  local o, rest = parse(args, { threads = true, into = true, ["for"] = true }, { replace = true })
  if not o then return usage_error(rest) end
  if not rest[1] then return usage_error("check: which script?") end
  local ok, why = take_inputs(rest)
  if ok then ok, why = use_threads(o) end
  if not ok then return usage_error(why) end
  local good, code = xpcall(check_run, function(e) return e end, rest[1], o)
  if good then return code end
  core.write(2, "mottle: " .. tidy(code) .. "\n")
  return failure_code(code)
end

local function report_command(args)
  local o, rest = parse(args, {}, {})
  if not o then return usage_error(rest) end
  if not rest[1] then return usage_error("report: which run folder?") end
  for _, path in ipairs(rest) do core.write(1, require("report").rebuild(path) .. "\n") end
  return 0
end

local commands = { run = run_command, plan = plan_command, check = check_command, report = report_command, console = console_command }

return function(args)
  local command = table.remove(args, 1)
  for _, a in ipairs(args) do if a == "--help" or a == "-h" or a == "--version" then command = a end end
  if command == nil or command == "--help" or command == "-h" or command == "help" then
    core.write(command and 1 or 2, usage)
    return command and 0 or 2
  end
  if command == "--version" or command == "version" then
    local m = core.machine()
    core.write(1, string.format("mottle %s (%s, %s)\n", m.version, m.fftw, m.lua))
    return 0
  end
  local f = commands[command]
  if not f then return usage_error("unknown command '" .. command .. "'" .. text.hint(command, { "run", "plan", "check", "report", "console" })) end
  return f(args)
end
