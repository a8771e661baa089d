-- Look before you run: what is solved, at which scales, at what cost.
local core = require "core"
local text = require "text"
local units = require "unit"
local schedule = require "schedule"
local waves = require "waves"

local M = {}

local function homogeneous_means(m)
  local means = {}
  for i, f in ipairs(m:fields()) do means[i] = core.statistics(f).mean end
  return means
end

local axis_names = { "x", "y", "z" }

-- Each axis has to show the wave that grows along it; axes with the same numbers are told once.
local function advise(out, g, axis, wave, real)
  local lambda = 2 * math.pi / wave.k
  local cells, waves = lambda / g.spacing[axis], g.length[axis] / lambda
  local line = string.format("    %.3g cells per fastest wavelength, %.3g fastest wavelengths per box", cells, waves)
  if out.told[line] then return end
  out.told[line] = true
  out[#out + 1] = line .. (axis > 1 and " along " .. axis_names[axis] or "")
  if cells < 8 then
    out[#out + 1] = string.format("    WARNING: the grid is too coarse for it: at least 8 cells per wavelength are common practice; take a spacing of %s or less", text.length(lambda / 8, real))
  end
  if waves < 10 then
    out[#out + 1] = string.format("    WARNING: the box is small for statistics: 10 wavelengths and more are common practice; take a box of %s or more", text.length(10 * lambda, real))
  end
  if real and lambda < 1e-9 then
    out[#out + 1] = string.format("    WARNING: the fastest wavelength, %s, is near the distance of atoms, where a continuum model has no meaning", text.length(lambda, real))
  end
  -- a wave saturates into interfaces of about a quarter of its length; below a few atomic distances the gradient energy is not defined
  local width = lambda / 4
  if real and lambda >= 1e-9 and width < 1e-9 then
    out[#out + 1] = string.format("    WARNING: interfaces will be about %s wide, near the distance of atoms: take numbers at this scale with care", text.length(width, real))
  end
end

-- Eight wavenumbers of the fastest direction.
local function table_text(out, m, means, time, wave, real)
  out[#out + 1] = string.format("    %-16s %-14s %-16s %s", "wavelength", "wavenumber", "growth rate", "amplitude times e in")
  for _, p in ipairs(waves.curve(m, means, wave, time, 8)) do
    out[#out + 1] = string.format("    %-16s %-14s %-16s %s", text.length(2 * math.pi / p[1], real), text.number(p[1]) .. (real and " 1/m" or ""), text.number(p[2]) .. (real and " 1/s" or ""),
      p[2] > 0 and text.time(1 / p[2], real) or "decays")
  end
end

local function directions_text(out, survey, real)
  out[#out + 1] = "    The energy or mobility depends on direction:"
  for _, w in ipairs(survey.waves) do
    out[#out + 1] = string.format("    along %-12s %s", w.direction.name, w.stable and "stable (largest rate " .. text.number(w.rate) .. (real and " 1/s)" or ")") or
      string.format("fastest wavelength %-12s growth time %s", text.length(2 * math.pi / w.k, real), text.time(1 / w.rate, real)))
  end
end

-- What a state's waves look like is kept for the files.
local function keep_curves(kept, m, means, time, label, survey)
  local state = { label = label, curves = {} }
  local list = survey.anisotropic and { survey.best, survey.worst } or { survey.best }
  local reach = waves.reach(survey.best)
  for i, w in ipairs(list) do
    state.curves[i] = { name = survey.anisotropic and w.direction.name or "", mark = i == 1 and "*" or "o", points = waves.curve(m, means, w, time, 120, math.min(reach, w.high)) }
  end
  kept[#kept + 1] = state
  return state
end

local function growth_text(out, m, means, time, label, real)
  local g = m.grid
  local ok, survey = pcall(waves.survey, m, means, time)
  if not ok then
    out[#out + 1] = "  " .. label .. ": " .. tostring(survey):gsub("^%S+:%d+: ", "")
    return
  end
  local wave = survey.best
  local state = keep_curves(out.kept, m, means, time, label, survey)
  if wave.stable then
    out[#out + 1] = string.format("  %s: stable against waves of every length (largest rate %s%s)", label, text.number(wave.rate), real and " 1/s" or "")
    out[#out + 1] = "    No decomposition in a run from small noise then means that the model cannot nucleate, not that the alloy is stable."
    return
  end
  out[#out + 1] = string.format("  %s: unstable. Fastest wavelength %s%s, growth time (amplitude times e) %s%s", label, text.length(2 * math.pi / wave.k, real),
    survey.anisotropic and " (along " .. wave.direction.name .. ")" or "", text.time(1 / wave.rate, real), wave.critical and ", critical wavelength " .. text.length(2 * math.pi / wave.critical, real) or "")
  if (wave.frequency or 0) > 1e-9 * wave.rate then out[#out + 1] = "    The fastest wave travels or swings with a period of " .. text.time(2 * math.pi / wave.frequency, real) end
  if wave.beyond then out[#out + 1] = "    WARNING: waves grow up to the grid's shortest one: the spacing is too coarse, or nothing damps short waves" end
  table_text(out, m, means, time, wave, real)
  if survey.anisotropic then directions_text(out, survey, real) end
  out[#out + 1] = waves.drawn(state.curves, real and "1/s" or "rate", real and " 1/m" or " wavenumber")
  if survey.anisotropic then out[#out + 1] = string.format("    * along %s, o along %s", survey.best.direction.name, survey.worst.direction.name) end
  out.told = {}
  for a = 1, g.dim do
    for _, w in ipairs(survey.waves) do
      if w.direction.name == axis_names[a] and not w.stable then advise(out, g, a, w, real) end
    end
  end
end

local function stages_text(out, m, run, means, real)
  if not run.schedule then
    growth_text(out, m, means, m.time, "at the start", real)
    return
  end
  local first = run.schedule.stages[1]
  if run.schedule.start ~= nil then
    growth_text(out, m, means, first.from, string.format("start at %s%s", text.number(run.schedule.start), real and " K" or ""), real)
  end
  for _, s in ipairs(run.schedule.stages) do
    if s.type == "hold" then
      growth_text(out, m, means, 0.5 * (s.from + s.upto), string.format("%s at %s%s for %s", s.name, text.number(s.at), real and " K" or "", text.time(s.upto - s.from, real)), real)
    end
  end
end

-- A short run tells what a step costs on this machine, on this grid.
local function cost_text(out, m, real, still)
  local bytes = core.bytes(m.core)
  local _, _, installed = core.memory()
  out[#out + 1] = string.format("  memory %.4g MB of %.4g GB installed%s", bytes / 1e6, installed / 1e9, bytes > 0.9 * installed and "   WARNING: this will not fit" or "")
  if still or bytes > 0.5 * installed then return end
  local ok = pcall(function()
    core.start(m.core, { step = 1e-30 }, m.time)
  end)
  if not ok then return end
  local began, n = core.clock(), 0
  ok = pcall(function()
    while core.clock() - began < 0.5 do
      n = n + 1
      core.advance(m.core, m.time + n * 1e-30, nil, false)
    end
  end)
  if ok and n > 0 then out[#out + 1] = string.format("  one step takes about %s here (%d threads)", core.time_text((core.clock() - began) / n), require("run").threads) end
end

---The plan of a run as text. still: without a trial of steps, which leaves traces in a model that is to run later.
function M.text(m, run, still)
  local real = units.used
  local out = {}
  local g = m.grid
  local size = {}
  for a = 1, g.dim do size[a] = text.length(g.length[a], real) end
  out[#out + 1] = core.describe(m.core)
  local walls, spacing = {}, {}
  for a = 1, g.dim do
    walls[a], spacing[a] = g.mirror[a] and "mirror" or "periodic", text.length(g.spacing[a], real)
  end
  out[#out + 1] = string.format("Box\n  %s cells, %s, spacing %s, walls %s", table.concat(g.cells, " x "), table.concat(size, " x "),
    table.concat(spacing, " x "), table.concat(walls, " x "))
  if run.schedule then
    out[#out + 1] = "Schedule"
    for _, s in ipairs(run.schedule.stages) do
      out[#out + 1] = string.format("  %-20s %s%s -> %s%s in %s", s.name, text.number(s.at), real and " K" or "", text.number(s.reaches), real and " K" or "", text.time(s.upto - s.from, real))
    end
  end
  out[#out + 1] = "Waves about the homogeneous state"
  out.kept = {}
  local means = homogeneous_means(m)
  local names = {}
  for i, f in ipairs(m.moving) do names[i] = core.field_name(f) .. " = " .. text.number(means[i]) end
  out[#out + 1] = "  " .. table.concat(names, ", ")
  stages_text(out, m, run, means, real)
  out[#out + 1] = "Cost"
  cost_text(out, m, real, still)
  return table.concat(out, "\n") .. "\n", out.kept
end

---The plan in a folder of its own: plan.txt, and where waves could be told growth.csv (a line per state, direction and
---wavenumber) and growth.svg.
function M.save(folder, words, kept)
  local real = units.used
  core.put(folder, "plan.txt", words)
  if #kept == 0 then return end
  local lines = { real and "state,direction,wavenumber [1/m],growth rate [1/s]" or "state,direction,wavenumber,growth rate" }
  for _, s in ipairs(kept) do
    for _, c in ipairs(s.curves) do
      for _, p in ipairs(c.points) do
        lines[#lines + 1] = string.format('"%s",%s,%.17g,%.17g', s.label:gsub('"', '""'), c.name == "" and "any" or c.name, p[1], p[2])
      end
    end
  end
  core.put(folder, "growth.csv", table.concat(lines, "\n") .. "\n")
  core.put(folder, "growth.svg", waves.svg(kept, real and "1/s" or "1/time", real and "1/m" or "1/length"))
end

M.schedule = schedule
return M
