-- Look before you run: what is solved, at which scales, at what cost.
local core = require "core"
local text = require "text"
local units = require "unit"
local schedule = require "schedule"

local M = {}

local golden = (math.sqrt(5) - 1) / 2

local function refine(f, a, b)
  local c, d = b - golden * (b - a), a + golden * (b - a)
  local fc, fd = f(c), f(d)
  for _ = 1, 80 do
    if fc > fd then b, d, fd = d, c, fc; c = b - golden * (b - a); fc = f(c)
    else a, c, fc = c, d, fd; d = a + golden * (b - a); fd = f(d) end
  end
  return 0.5 * (a + b)
end

local function bisect(f, a, b)
  for _ = 1, 80 do
    local c = 0.5 * (a + b)
    if (f(c) > 0) == (f(a) > 0) then a = c else b = c end
  end
  return 0.5 * (a + b)
end

---Fastest wave along an axis about the homogeneous state: { k, rate, critical } or { stable = true, rate, k }.
---Wavenumbers from half the box's first mode to the grid's Nyquist wavenumber are scanned, then refined.
function M.fastest(m, means, axis, time)
  local g = m.grid
  local function rate(k)
    local v = { 0, 0, 0 }
    v[axis] = k
    return core.growth(m.core, means, v, time)
  end
  local low, high, n = math.pi / g.length[axis] / 4, math.pi / g.spacing[axis], 400
  local ks, rs, best = {}, {}, 1
  for i = 0, n do
    ks[i + 1] = low * (high / low) ^ (i / n)
    rs[i + 1] = rate(ks[i + 1])
    if rs[i + 1] > rs[best] then best = i + 1 end
  end
  local k = refine(rate, ks[math.max(1, best - 1)], ks[math.min(n + 1, best + 1)])
  local r = rate(k)
  if not (r > 0) then return { stable = true, rate = r, k = k } end
  local critical
  for i = best, n do
    if rs[i] > 0 and rs[i + 1] <= 0 then
      critical = bisect(rate, ks[i], ks[i + 1])
      break
    end
  end
  return { k = k, rate = r, critical = critical, beyond = critical == nil }
end

local function homogeneous_means(m)
  local means = {}
  for i, f in ipairs(m:fields()) do means[i] = core.statistics(f).mean end
  return means
end

local axis_names = { "x", "y", "z" }

---The fastest wave along each axis that has cells to show one, and which of them is the fastest of all.
---@return table waves by axis
---@return integer axis of the fastest
local function along_axes(m, means, time)
  local waves, best = {}, 1
  for a = 1, m.grid.dim do
    if a == 1 or m.grid.cells[a] > 1 then
      waves[a] = M.fastest(m, means, a, time)
      if waves[a].rate > waves[best].rate * (1 + 1e-6) then best = a end
    end
  end
  return waves, best
end

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

local function growth_text(out, m, means, time, label, real)
  local g = m.grid
  local ok, waves, best = pcall(along_axes, m, means, time)
  if not ok then
    out[#out + 1] = "  " .. label .. ": " .. tostring(waves):gsub("^%S+:%d+: ", "")
    return
  end
  local wave = waves[best]
  if wave.stable then
    out[#out + 1] = string.format("  %s: stable against waves of every length (largest rate %s%s)", label, text.number(wave.rate), real and " 1/s" or "")
    out[#out + 1] = "    No decomposition in a run from small noise then means that the model cannot nucleate, not that the alloy is stable."
    return
  end
  out[#out + 1] = string.format("  %s: unstable. Fastest wavelength %s%s, growth time (amplitude times e) %s%s", label, text.length(2 * math.pi / wave.k, real),
    best > 1 and " (along " .. axis_names[best] .. ")" or "", text.time(1 / wave.rate, real), wave.critical and ", critical wavelength " .. text.length(2 * math.pi / wave.critical, real) or "")
  if wave.beyond then out[#out + 1] = "    WARNING: waves grow up to the grid's shortest one: the spacing is too coarse, or nothing damps short waves" end
  out.told = {}
  for a = 1, g.dim do
    local w = waves[a]
    if w and not w.stable then advise(out, g, a, w, real) end
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
local function cost_text(out, m, real)
  local bytes = core.bytes(m.core)
  local _, _, installed = core.memory()
  out[#out + 1] = string.format("  memory %.4g MB of %.4g GB installed%s", bytes / 1e6, installed / 1e9, bytes > 0.9 * installed and "   WARNING: this will not fit" or "")
  if bytes > 0.5 * installed then return end
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

---The plan of a run as text.
function M.text(m, run)
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
  local means = homogeneous_means(m)
  local names = {}
  for i, f in ipairs(m.moving) do names[i] = core.field_name(f) .. " = " .. text.number(means[i]) end
  out[#out + 1] = "  " .. table.concat(names, ", ")
  stages_text(out, m, run, means, real)
  out[#out + 1] = "Cost"
  cost_text(out, m, real)
  return table.concat(out, "\n") .. "\n"
end

M.schedule = schedule
return M
