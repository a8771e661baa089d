-- Waves about a homogeneous state: how fast they grow, by wavenumber and direction; as words, table and curves.
local core = require "core"
local text = require "text"

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

local axis_names = { "x", "y", "z" }

---Directions that are looked at: every 15 degrees in two dimensions; axes, face and body diagonals in three.
function M.directions(g)
  local list = {}
  if g.dim == 2 and g.cells[1] > 1 and g.cells[2] > 1 then
    for degrees = 0, 165, 15 do
      local a = math.rad(degrees)
      list[#list + 1] = { name = degrees == 0 and "x" or degrees == 90 and "y" or degrees .. " deg", degrees == 90 and 0 or math.cos(a), degrees == 0 and 0 or math.sin(a), 0 }
    end
  elseif g.dim == 3 and g.cells[1] > 1 and g.cells[2] > 1 and g.cells[3] > 1 then
    for _, d in ipairs { { 1, 0, 0 }, { 0, 1, 0 }, { 0, 0, 1 }, { 1, 1, 0 }, { 1, -1, 0 }, { 1, 0, 1 }, { 1, 0, -1 }, { 0, 1, 1 }, { 0, 1, -1 }, { 1, 1, 1 }, { 1, 1, -1 },
      { 1, -1, 1 }, { -1, 1, 1 } } do
      local n = math.sqrt(d[1] ^ 2 + d[2] ^ 2 + d[3] ^ 2)
      local one = d[1] ^ 2 + d[2] ^ 2 + d[3] ^ 2 == 1
      list[#list + 1] = { name = one and axis_names[d[1] == 1 and 1 or d[2] == 1 and 2 or 3] or string.format("(%d, %d, %d)", d[1], d[2], d[3]), d[1] / n, d[2] / n, d[3] / n }
    end
  else
    for a = 1, g.dim do
      if a == 1 or g.cells[a] > 1 then list[#list + 1] = { name = axis_names[a], a == 1 and 1 or 0, a == 2 and 1 or 0, a == 3 and 1 or 0 } end
    end
  end
  return list
end

---Growth rate (and frequency, where waves travel) at wavenumber k along a direction.
function M.rate(m, means, d, k, time) return core.growth(m.core, means, { k * d[1], k * d[2], k * d[3] }, time) end

---Fastest wave along a direction: { k, rate, critical, frequency } or { stable = true, rate, k }.
---Wavenumbers from half the box's first mode to the grid's Nyquist wavenumber are scanned, then refined.
function M.fastest(m, means, d, time)
  local g = m.grid
  local function rate(k) return (M.rate(m, means, d, k, time)) end
  local low, high = math.huge, math.huge
  for a = 1, g.dim do
    if math.abs(d[a]) > 1e-12 then
      low = math.min(low, math.pi / g.length[a] / 4)
      high = math.min(high, math.pi / g.spacing[a] / math.abs(d[a]))
    end
  end
  local n = 400
  local ks, rs, best = {}, {}, 1
  for i = 0, n do
    ks[i + 1] = low * (high / low) ^ (i / n)
    rs[i + 1] = rate(ks[i + 1])
    if rs[i + 1] > rs[best] then best = i + 1 end
  end
  local k = refine(rate, ks[math.max(1, best - 1)], ks[math.min(n + 1, best + 1)])
  local r, frequency = M.rate(m, means, d, k, time)
  if not (r > 0) then return { stable = true, rate = r, k = k, high = high, direction = d } end
  local critical
  for i = best, n do
    if rs[i] > 0 and rs[i + 1] <= 0 then
      critical = bisect(rate, ks[i], ks[i + 1])
      break
    end
  end
  return { k = k, rate = r, frequency = frequency, critical = critical, beyond = critical == nil, high = high, direction = d }
end

---The fastest wave of each direction, the fastest and the slowest of them, and whether the direction matters.
function M.survey(m, means, time)
  local s = { waves = {} }
  for i, d in ipairs(M.directions(m.grid)) do
    local w = M.fastest(m, means, d, time)
    s.waves[i] = w
    if not s.best or w.rate > s.best.rate + 1e-6 * math.abs(s.best.rate) then s.best = w end
    if not s.worst or w.rate < s.worst.rate - 1e-6 * math.abs(s.worst.rate) then s.worst = w end
  end
  s.anisotropic = math.abs(s.best.rate - s.worst.rate) > 1e-5 * math.abs(s.best.rate)
  return s
end

---Points (k, rate) of a direction up to beyond the critical wavenumber, or over the grid's wavenumbers.
function M.curve(m, means, wave, time, points, upto)
  local top = upto or M.reach(wave)
  local list = {}
  for i = 1, points do
    local k = top * i / points
    list[i] = { k, (M.rate(m, means, wave.direction, k, time)) }
  end
  return list
end

---How far a curve is shown.
function M.reach(wave) return math.min(wave.high, wave.critical and 1.25 * wave.critical or wave.stable and wave.high / 4 or wave.high) end

-- --- in the terminal --------------------------------------------------------------------------------------------------------

local width, height = 60, 12

---Curves as text: marks in a frame, rates below a third of the largest cut off. curves: { mark, points } one after the other.
function M.drawn(curves, rate_unit, k_unit)
  local top, bottom, reach = -math.huge, math.huge, 0
  for _, c in ipairs(curves) do
    for _, p in ipairs(c.points) do
      top, bottom, reach = math.max(top, p[2]), math.min(bottom, p[2]), math.max(reach, p[1])
    end
  end
  if top <= 0 then top = 0 end
  bottom = math.max(math.min(bottom, 0), top > 0 and -top / 3 or bottom)
  local rows, span = {}, top - bottom
  for r = 1, height do
    rows[r] = {}
    for x = 1, width do rows[r][x] = " " end
  end
  local function row_of(v) return height - math.floor((v - bottom) / span * (height - 1) + 0.5) end
  for x = 1, width do rows[row_of(0)][x] = "-" end
  for _, c in ipairs(curves) do
    for _, p in ipairs(c.points) do
      if p[2] >= bottom then rows[row_of(p[2])][math.max(1, math.floor(p[1] / reach * width + 0.5))] = c.mark end
    end
  end
  local out = {}
  for r = 1, height do
    local label = r == 1 and text.number(top) or r == row_of(0) and "0" or r == height and text.number(bottom) or ""
    out[r] = string.format("    %10s |%s", label, table.concat(rows[r]))
  end
  out[#out + 1] = string.format("    %10s +%s", rate_unit, ("-"):rep(width))
  out[#out + 1] = string.format("    %10s  0%s%s", "", (" "):rep(width - 1 - #(text.number(reach) .. k_unit)), text.number(reach) .. k_unit)
  return table.concat(out, "\n")
end

-- --- as a file --------------------------------------------------------------------------------------------------------------

local colours = { "#1f5f8b", "#9a3b26", "#4d7a3a", "#7a5c99", "#8a6d1f", "#3f7f7f" }

---All states' curves as one SVG (W3C SVG 1.1). states: { label, curves = { { name, points } } }
function M.svg(states, rate_unit, k_unit)
  local W, H, left, bottom, top = 640, 400, 80, 50, 16
  local high, low, reach = 0, 0, 0
  for _, s in ipairs(states) do
    for _, c in ipairs(s.curves) do
      for _, p in ipairs(c.points) do
        high, reach = math.max(high, p[2]), math.max(reach, p[1])
        low = math.min(low, p[2])
      end
    end
  end
  low = high > 0 and math.max(low, -high / 3) or low
  local function px(k) return left + k / reach * (W - left - 16) end
  local function py(v) return H - bottom - (v - low) / (high - low) * (H - top - bottom) end
  local out = { string.format('<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 %d %d" font-family="DejaVu Sans, sans-serif" font-size="12"><rect width="%d" height="%d" fill="#ffffff"/>', W, H, W, H) }
  out[#out + 1] = string.format('<path d="M%d %dV%dH%d" fill="none" stroke="#5a6476"/><path d="M%d %.1fH%d" stroke="#c9cfda"/>', left, top, H - bottom, W - 16, left, py(0), W - 16)
  for i = 0, 4 do
    local k, v = reach * i / 4, low + (high - low) * i / 4
    out[#out + 1] = string.format('<text x="%.1f" y="%d" text-anchor="middle">%.3g</text><text x="%d" y="%.1f" text-anchor="end">%.3g</text>', px(k), H - bottom + 18, k, left - 6, py(v) + 4, v)
  end
  out[#out + 1] = string.format('<text x="%d" y="%d" text-anchor="end">wavenumber [%s]</text><text x="%d" y="%d" transform="rotate(-90 14 %d)" text-anchor="end">growth rate [%s]</text>', W - 16, H - 12, k_unit, 14, top, top, rate_unit)
  local n = 0
  for _, s in ipairs(states) do
    for _, c in ipairs(s.curves) do
      n = n + 1
      local path, pen = {}, "M"
      for _, p in ipairs(c.points) do
        if p[2] >= low then
          path[#path + 1] = string.format("%s%.1f %.1f", pen, px(p[1]), py(p[2]))
          pen = "L"
        else pen = "M" end
      end
      local colour = colours[(n - 1) % #colours + 1]
      local name = (s.label .. (c.name ~= "" and ", along " .. c.name or "")):gsub("[&<>]", { ["&"] = "&amp;", ["<"] = "&lt;", [">"] = "&gt;" })
      out[#out + 1] = string.format('<path d="%s" fill="none" stroke="%s" stroke-width="1.8"/><text x="%d" y="%d" text-anchor="end" fill="%s">%s</text>', table.concat(path), colour, W - 20, top + 16 * n, colour, name)
    end
  end
  out[#out + 1] = "</svg>\n"
  return table.concat(out, "\n")
end

return M
