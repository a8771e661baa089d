-- mottle check: a short stretch of a script's run again with finer steps and on finer grids, and what that says of its numbers.
local core = require "core"
local text = require "text"
local measure = require "measure"

local M = {}

local grid_factors = { 1.5, 2 }

-- --- one run of the stretch ---------------------------------------------------------------------------------------------------

-- Values of the ledger's columns after the stretch, from the fields as the script left them. Nothing is written, no hook is called.
local function stretch(m, run, steps, columns)
  core.start(m.core, steps, run.t0)
  rawset(m, "started", true)
  require("run").watch(m)
  core.advance(m.core, run.t0 + run.stretch, nil, false)
  local values = {}
  measure.together(function()
    for i, c in ipairs(columns) do
      local v = c.value()
      values[i] = type(v) == "number" and v == v and v or false
    end
  end)
  return values, core.state(m.core)
end

local function copies(m)
  local list = {}
  for i, f in ipairs(m.moving) do
    list[i] = core.field(m.grid.core, "copy")
    core.evaluate(list[i], m.grid.core, f, { f }, 0)
  end
  return list
end

local function restore(m, list)
  for i, f in ipairs(m.moving) do core.field_set(f, m.grid.core, list[i] + 0, { list[i] }, 0) end
end

-- The run's own steps, and ones of a quarter and a sixteenth of the error (half and a quarter of a fixed length).
local function finer(o, n)
  local s = { accuracy = o.accuracy or 0.01, step = o.step, longest = o.longest, method = o.method_number or 0 }
  if s.step then s.step = s.step / 2 ^ n else s.accuracy = s.accuracy / 4 ^ n end
  return s
end

---In time: three accuracies on the script's grid.
function M.in_time(m, run, o, columns)
  local start, values, states = copies(m), {}, {}
  for n = 0, 2 do
    restore(m, start)
    values[n + 1], states[n + 1] = stretch(m, run, finer(o, n), columns)
  end
  return values, states
end

---In space: one finer grid, with the finest steps, so that theirs are not taken for the grid's errors.
function M.in_space(m, run, o, columns) return (stretch(m, run, finer(o, 2), columns)) end

-- --- what it says -------------------------------------------------------------------------------------------------------------

local function distance(a, b) return a and b and math.abs(a - b) or nil end

-- How fast an error falls from the first difference to the second when the cause is made `factor` times smaller.
local function order(first, second, factor, scale)
  if not first or not second or second <= 1e-13 * scale or first <= 1e-12 * scale then return nil end
  return math.log(first / second) / math.log(factor)
end

-- A minimum near 0 is judged by the size of the maximum beside it.
local function add_scales(rows)
  local largest = {}
  for _, r in ipairs(rows) do
    local of = r.name:match("^minimum(%b())$") or r.name:match("^maximum(%b())$")
    if of and r.value then largest[of] = math.max(largest[of] or 0, math.abs(r.value)) end
    r.of = of
  end
  for _, r in ipairs(rows) do r.scale = r.value and math.max(math.abs(r.value), r.of and largest[r.of] or 0) end
end

---Rows of { name, value, bar in time, order, bar in space, bar of both }. time: values at three accuracies; space: on grids finer by
---grid_factors.
function M.rows(columns, time, space, fixed)
  local rows = {}
  for i, c in ipairs(columns) do
    local v = time[1][i]
    local scale = math.abs(v or 0) + 1e-300
    local t1, t2 = distance(v, time[3][i]), distance(time[2][i], time[3][i])
    local s1, s2 = distance(time[3][i], space[#space][i]), distance(space[1][i], space[#space][i])
    rows[i] = { name = c.name, unit = measure.unit(c), value = v, time = t1, time_order = order(t1, t2, fixed and 2 or 4, scale), space = s1, space_falls = s2,
      both = t1 and s1 and math.sqrt(t1 ^ 2 + s1 ^ 2) }
  end
  add_scales(rows)
  return rows
end

local function relative(e, r) return e and r.scale and e / (r.scale + 1e-300) or nil end

-- The column that errs most, columns that are zero but for rounding left out.
local function worst(rows, part)
  local most, name = 0, nil
  for _, r in ipairs(rows) do
    local e = relative(r[part], r)
    if e and r.scale > 1e-12 and e > most then most, name = e, r.name end
  end
  return most, name
end

local function percent(x) return x < 1e-6 and "less than 0.0001 %" or string.format("%.2g %%", 100 * x) end

local enough = { time = 0.02, space = 0.02 }

local function verdict(out, what, rows, part, advice)
  local e, name = worst(rows, part)
  local good = e <= enough[part]
  out[#out + 1] = string.format("%s: %s. Largest change %s%s%s", what, good and "suffices" or "does NOT suffice", percent(e), name and " (" .. name .. ")" or "", good and "" or "; " .. advice)
  return good
end

local function box_words(out, m, lambda)
  if not lambda then
    out[#out + 1] = "Box: cannot be judged, no wave stands out of the noise at the end of the stretch"
    return
  end
  local waves = math.huge
  for a = 1, m.grid.dim do if m.grid.cells[a] > 1 then waves = math.min(waves, m.grid.length[a] / lambda) end end
  out[#out + 1] = string.format("Box: %s. %.3g wavelengths of the structure fit in at the end of the stretch%s", waves >= 8 and "suffices" or "is small for statistics", waves,
    waves >= 8 and "" or "; 8 to 10 and more are common practice, or several seeds")
end

---The whole as text, and as lines of a table.
function M.words(m, run, o, rows, states, lambda)
  local real = require("unit").used
  local out = {}
  out[#out + 1] = string.format("Stretch from %s to %s, %s; hooks and loops of the script are not part of it.", text.time(run.t0, real), text.time(run.t0 + run.stretch, real),
    o.step and string.format("steps of %s, a half and a quarter of it", text.time(o.step, real)) or string.format("accuracy %.3g, a quarter and a sixteenth of it", o.accuracy or 0.01))
  out[#out + 1] = string.format("Steps: %d, %d, %d. Grids finer by %g and %g, from the same start.", states[1].steps, states[2].steps, states[3].steps, grid_factors[1], grid_factors[2])
  out[#out + 1] = string.format("  %-24s %14s %12s %12s %10s %12s", "column", "value", "error bar", "by steps", "order", "by the grid")
  for _, r in ipairs(rows) do
    local function num(x) return x and string.format("%.3g", x) or "-" end
    out[#out + 1] = string.format("  %-24s %14s %12s %12s %10s %12s", r.name .. (r.unit ~= "" and " [" .. r.unit .. "]" or ""), r.value and text.number(r.value) or "-", num(r.both), num(r.time),
      r.time_order and string.format("%.2f", r.time_order) or "-", num(r.space))
  end
  out[#out + 1] = o.step and "Order: with which power of the step the error falls (3 and 2 are those of SBDF3 and SBDF2)." or "Order: with which power of the accuracy number the error falls (1 is what is meant)."
  local good = verdict(out, "Accuracy", rows, "time", "take a smaller accuracy" .. (o.step and " or step" or ""))
  good = verdict(out, "Grid", rows, "space", "take a smaller spacing") and good
  box_words(out, m, lambda)
  out[#out + 1] = "Differences are bounds of the numerical error over this stretch only; they say nothing about what the model leaves out."
  return table.concat(out, "\n") .. "\n", good
end

function M.table(rows)
  local lines = { "column,unit,value,error bar,by steps,order,by the grid" }
  for _, r in ipairs(rows) do
    local function num(x) return x and string.format("%.17g", x) or "" end
    lines[#lines + 1] = string.format('"%s",%s,%s,%s,%s,%s,%s', r.name:gsub('"', '""'), r.unit, num(r.value), num(r.both), num(r.time), num(r.time_order), num(r.space))
  end
  return table.concat(lines, "\n") .. "\n"
end

M.grid_factors = grid_factors
return M
