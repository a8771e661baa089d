-- Measurements with parts: domains, the structure factor. `now` gives all of it as a table, a ledger takes parts
-- (domains(c).mean_diameter), m:tabulate writes the distribution.
local core = require "core"
local options = require "options"
local measure = require "measure"

local M = {}

local axis_names = { "x", "y", "z" }

-- one entry per axis of the box: per_axis(2, "percolates_") is { {"percolates_x"}, {"percolates_y"} }
local function per_axis(dim, prefix, power)
  local list = {}
  for a = 1, dim do list[a] = { prefix .. axis_names[a], power } end
  return list
end

local function join(...)
  local all = {}
  for _, list in ipairs { ... } do
    for _, x in ipairs(list) do all[#all + 1] = x end
  end
  return all
end

local function percolating(bits, dim)
  local names = {}
  for a = 1, dim do if bits >> (a - 1) & 1 == 1 then names[#names + 1] = axis_names[a] end end
  return table.concat(names, " ")
end

-- --- domains ------------------------------------------------------------------------------------------------------------------

local function domain_rows(dim)
  return function(d)
    local rows = {}
    for i = 1, d.count do
      local row = { i, d.sizes[i], d.diameters[i] }
      for a = 1, dim do row[#row + 1] = d.centroids[3 * (i - 1) + a] end
      for a = 1, dim do row[#row + 1] = d.axes[3 * (i - 1) + a] end
      row[#row + 1] = d.aspects[i]
      for a = 1, dim do row[#row + 1] = d.directions[3 * (i - 1) + a] end
      row[#row + 1] = percolating(d.around[i], dim)
      rows[i] = row
    end
    return rows
  end
end

local function axes_columns(dim)
  if dim == 1 then return { { "length", 1 } } end
  return dim == 2 and { { "long_axis", 1 }, { "short_axis", 1 } } or { { "long_axis", 1 }, { "middle_axis", 1 }, { "short_axis", 1 } }
end

---Domains on one side of the level. Table: a row for each domain.
function M.domains(e, t)
  local o = measure.phase_options(t, "domains", { { "full", "boolean", default = false } })
  local _, g = measure.values(e, "domains")
  local dim = g.dim
  return measure.make_whole { name = "domains(" .. measure.label(e) .. ")", main = "count",
    all = function()
      local f = measure.values(e, "domains")
      local d = core.domains(f, measure.level_of(f, o), o.above, o.full)
      for a = 1, dim do d["percolates_" .. axis_names[a]] = d.percolates >> (a - 1) & 1 end
      d.percolates = percolating(d.percolates, dim)
      return d
    end,
    parts = join({ { "count" }, { "density", -dim }, { "mean", dim }, { "largest", dim }, { "total", dim }, { "mean_diameter", 1 }, { "mean_aspect" } },
      per_axis(dim, "percolates_")),
    columns = join({ { "domain" }, { "size", dim }, { "diameter", 1 } }, per_axis(dim, "centre_", 1), axes_columns(dim), { { "aspect" } },
      per_axis(dim, "direction_"), { { "percolates", 0, true } }),
    rows = domain_rows(dim) }
end

---Number of domains.
function M.domain_count(e, t)
  return M.domains(e, t).count:as("domain_count(" .. measure.label(e) .. ")")
end

-- --- chords -------------------------------------------------------------------------------------------------------------------

local function chord_rows(g)
  return function(c)
    local rows = {}
    for a = 1, g.dim do
      for cells, n in ipairs(c.axes[a].number) do
        if n > 0 then rows[#rows + 1] = { axis_names[a], cells * g.spacing[a], n, n / c.axes[a].chords } end
      end
    end
    return rows
  end
end

---Chords of one phase along each axis. Table: a row for each length that occurs.
function M.chords(e, t)
  local o = measure.phase_options(t, "chords")
  local _, g = measure.values(e, "chords")
  return measure.make_whole { name = "chords(" .. measure.label(e) .. ")", main = "mean",
    all = function()
      local f = measure.values(e, "chords")
      local c = core.chords(f, measure.level_of(f, o), o.above)
      for a = 1, g.dim do
        for _, what in ipairs { "mean", "deviation", "endless" } do c[what .. "_" .. axis_names[a]] = c.axes[a][what] end
      end
      return c
    end,
    parts = join({ { "mean", 1 } }, per_axis(g.dim, "mean_", 1), per_axis(g.dim, "deviation_", 1), per_axis(g.dim, "endless_")),
    columns = { { "axis", 0, true }, { "length", 1 }, { "chords" }, { "share" } },
    rows = chord_rows(g) }
end

-- --- topology -----------------------------------------------------------------------------------------------------------------

local topology_names = { { "length", "ends" }, { "area", "perimeter" }, { "volume", "surface" } }

---Minkowski functionals of one phase: area, perimeter, euler (2-D); volume, surface, mean_breadth, euler (3-D).
function M.topology(e, t)
  local o = measure.phase_options(t, "topology", { { "full", "boolean", default = false } })
  local _, g = measure.values(e, "topology")
  local size, boundary = table.unpack(topology_names[g.dim])
  return measure.make_whole { name = "topology(" .. measure.label(e) .. ")", main = "euler",
    all = function()
      local f = measure.values(e, "topology")
      local k = core.topology(f, measure.level_of(f, o), o.above, o.full)
      return { [size] = k.size, [boundary] = k.boundary, mean_breadth = g.dim == 3 and k.breadth or nil, euler = k.euler, euler_density = k.density }
    end,
    parts = join({ { size, g.dim }, { boundary, g.dim - 1 }, { "euler" }, { "euler_density", -g.dim } },
      g.dim == 3 and { { "mean_breadth", 1 } } or {}) }
end

-- --- curvature and orientation of the interface ---------------------------------------------------------------------------------

local function curved(e, t, what, more)
  local o = measure.phase_options(t, what, more)
  local _, g = measure.values(e, what)
  if g.dim == 1 then core.fail(what .. ": on a grid of one axis interfaces are points; use interface(c), their number") end
  return g, function()
    local f = measure.values(e, what)
    return core.curvature(f, measure.level_of(f, o), o.above, (o.classes or 1) // 1 | 0)
  end
end

local function curvature_rows(dim)
  return function(c)
    local rows, b, k = {}, c.bend.mean, c.bend.gauss
    for i = 1, c.size > 0 and #b.share or 0 do
      rows[i] = { b.low + (i - 0.5) * b.width, b.share[i] }
      if dim == 3 then rows[i][3], rows[i][4] = k.low + (i - 0.5) * k.width, k.share[i] end
    end
    return rows
  end
end

---Curvature of the interface, positive where the phase is convex: of the line in 2-D, mean and Gaussian curvature in 3-D.
function M.curvature(e, t)
  local g, get = curved(e, t, "curvature", { { "classes", "count", default = 64 } })
  local gauss = g.dim == 3
  return measure.make_whole { name = "curvature(" .. measure.label(e) .. ")", main = "mean",
    all = function()
      local c = get()
      local k = { mean = c.mean.mean, deviation = c.mean.deviation, integral = c.mean.integral, lost = c.lost, size = c.size, bend = c }
      if gauss then k.gauss, k.gauss_deviation, k.gauss_integral = c.gauss.mean, c.gauss.deviation, c.gauss.integral end
      return k
    end,
    parts = join({ { "mean", -1 }, { "deviation", -1 }, { "integral", g.dim - 2 }, { "lost" } },
      gauss and { { "gauss", -2 }, { "gauss_deviation", -2 }, { "gauss_integral" } } or {}),
    columns = join({ { gauss and "mean_curvature" or "curvature", -1 }, { "share" } }, gauss and { { "gaussian_curvature", -2 }, { "gaussian_share" } } or {}),
    rows = curvature_rows(g.dim) }
end

local function facing_rows(dim)
  return function(c)
    local rows, n = {}, #c.facing
    for i = 1, c.size > 0 and n or 0 do
      local around, down = (i - 1) % c.azimuth * 360 / c.azimuth, (i - 1) // c.azimuth
      local polar = math.deg(math.acos(1 - (2 * down + 1) / c.polar))
      rows[i] = dim == 3 and { polar, around, c.facing[i], c.facing[i] * n } or { around, c.facing[i], c.facing[i] * n }
    end
    return rows
  end
end

---Directions of the normal of the interface, out of the phase.
function M.orientation(e, t)
  local g, get = curved(e, t, "orientation")
  return measure.make_whole { name = "orientation(" .. measure.label(e) .. ")", main = "anisotropy",
    all = function()
      local c = get()
      for a = 1, g.dim do c["preferred_" .. axis_names[a]], c["facing_" .. axis_names[a]] = c.preferred[a], c.tensor[a] end
      return c
    end,
    parts = join({ { "anisotropy" } }, per_axis(g.dim, "preferred_"), per_axis(g.dim, "facing_")),
    columns = join(g.dim == 3 and { { "polar_angle", "degree" } } or {}, { { "angle", "degree" }, { "share" }, { "times_random" } }),
    rows = facing_rows(g.dim) }
end

-- --- profiles -----------------------------------------------------------------------------------------------------------------

local line_options = { { "axis", "string" }, { "from", "table" }, { "to", "table" }, { "points", "count" } }

local function check_place(what, name, p, dim)
  for a = 1, dim do
    if type(p[a]) ~= "number" or p[a] ~= p[a] or math.abs(p[a]) == math.huge or #p ~= dim then
      core.fail(string.format("%s: '%s' has to be a list of %d coordinates", what, name, dim))
    end
  end
end

local function axis_number(what, name, dim)
  for a = 1, dim do if axis_names[a] == name then return a end end
  core.fail(string.format("%s: option 'axis' has to be %s, found \"%s\"", what, table.concat(axis_names, ", ", 1, dim), name))
end

-- How a line is read: a function to values, spacing of the points and place of the first, whether they are means along an axis.
local function line_of(e, t, what, more)
  local o = options.read(t or {}, what, join(line_options, more or {}))
  local _, g = measure.values(e, what)
  if o.axis and not (o.from or o.to or o.points) or not (o.axis or o.from or o.to or o.points) then
    local a = axis_number(what, o.axis or "x", g.dim)
    return { grid = g, step = g.spacing[a], first = g.spacing[a] / 2, along = true, mirror = g.mirror[a],
      get = function() return core.profile_along((measure.values(e, what)), a - 1) end }, o
  end
  if o.axis or not (o.from and o.to) then
    core.fail(what .. ": say either axis = \"x\" (the mean across it) or from = {...} and to = {...}")
  end
  check_place(what, "from", o.from, g.dim)
  check_place(what, "to", o.to, g.dim)
  local square, least = 0, math.huge
  for a = 1, g.dim do square, least = square + (o.to[a] - o.from[a]) ^ 2, math.min(least, g.spacing[a]) end
  local points = o.points or math.ceil(math.sqrt(square) / least) + 1
  if square == 0 or points < 2 or points > 1e6 then core.fail(what .. ": from and to have to be apart, with 2 to 1e6 points from one to the other") end
  return { grid = g, step = math.sqrt(square) / (points - 1), first = 0, along = false, mirror = true,
    get = function() return { mean = core.profile_between((measure.values(e, what)), o.from, o.to, points // 1 | 0).values } end }, o
end

---A field along a line: the mean across an axis (with its deviation), or between two points. In a ledger its largest value less its smallest.
function M.profile(e, t)
  local line = line_of(e, t, "profile")
  return measure.make_whole { name = "profile(" .. measure.label(e) .. ")", main = "range",
    all = function()
      local p = line.get()
      p.minimum, p.maximum, p.places = math.huge, -math.huge, {}
      for i, v in ipairs(p.mean) do
        p.minimum, p.maximum, p.places[i] = math.min(p.minimum, v), math.max(p.maximum, v), line.first + (i - 1) * line.step
      end
      p.range = p.maximum - p.minimum
      return p
    end,
    parts = { { "range" }, { "minimum" }, { "maximum" } },
    columns = join({ { line.along and "position" or "distance", 1 }, { line.along and "mean" or "value" } }, line.along and { { "deviation" } } or {}),
    rows = function(p)
      local rows = {}
      for i = 1, #p.mean do rows[i] = { p.places[i], p.mean[i], p.deviation and p.deviation[i] } end
      return rows
    end }
end

---10-90 width of the first interface along such a line, between low and high: the composition peaks of the whole field unless given
---(which lie inside the plateaus by a little, so a tanh reads 1 % short).
function M.interface_width(e, t)
  local line, o = line_of(e, t, "interface_width", { { "low", "number" }, { "high", "number" } })
  if (o.low == nil) ~= (o.high == nil) or (o.low and not (o.low < o.high)) then
    core.fail("interface_width: say both low and high, low below high, or neither")
  end
  return measure.lengths("interface_width(" .. measure.label(e) .. ")", e, 1, function()
    local p = o.low and o or core.peaks((measure.values(e, "interface_width")))
    if not (p.high > p.low) then return nil end
    return core.interface_width(line.get().mean, line.step, line.mirror, p.low, p.high)
  end)
end

-- --- structure factor ---------------------------------------------------------------------------------------------------------

local function structure_rows(s)
  local rows = {}
  for i = 1, #s.k do rows[i] = { s.k[i], s.s[i], s.modes[i] } end
  return rows
end

---Structure factor, shell by shell.
function M.structure_factor(e)
  local _, g = measure.values(e, "structure_factor")
  return measure.make_whole { name = "structure_factor(" .. measure.label(e) .. ")", main = "peak",
    all = function()
      local f, grid = measure.values(e, "structure_factor")
      return core.structure(f, grid.core)
    end,
    parts = { { "peak", 1 }, { "wavelength", 1 }, { "peak_k", -1 }, { "half_width", -1 }, { "first", -1 }, { "second", -2 }, { "deviation", -1 },
      { "variance" } },
    columns = { { "k", -1 }, { "S", g.dim }, { "modes" } },
    rows = structure_rows }
end

local function sector_rows(g)
  return function(s)
    local rows = {}
    for i = 1, #s.share do
      local name = g.dim == 2 and math.deg(s.angle[i]) or axis_names[i]
      for j = (i - 1) * s.shells + 1, i * s.shells do
        if s.modes[j] > 0 then rows[#rows + 1] = { name, s.k[j], s.s[j], s.modes[j] } end
      end
    end
    return rows
  end
end

---Structure factor by directions: sectors of angle in 2-D (an even number, so that x and y have one), nearest to an axis in 3-D.
function M.structure_sectors(e, t)
  local o = options.read(t or {}, "structure_sectors", { { "sectors", "count", default = 12 } })
  local _, g = measure.values(e, "structure_sectors")
  if g.dim == 1 then core.fail("structure_sectors: a grid of one axis has one direction only; use structure_factor") end
  if g.dim == 3 and t and t.sectors then core.fail("structure_sectors: in 3-D there are three sectors, nearest to x, y and z; leave 'sectors' out") end
  if g.dim == 2 and (o.sectors % 2 == 1 or o.sectors > 360) then
    core.fail("structure_sectors: option 'sectors' has to be an even number up to 360, found " .. o.sectors)
  end
  return measure.make_whole { name = "structure_sectors(" .. measure.label(e) .. ")", main = "anisotropy",
    all = function()
      local f, grid = measure.values(e, "structure_sectors")
      local s = core.sectors(f, grid.core, o.sectors // 1 | 0)
      for a = 1, g.dim do
        local at = g.dim == 3 and a or (a - 1) * (o.sectors // 2) + 1
        s["wavelength_" .. axis_names[a]], s["share_" .. axis_names[a]] = s.wavelength[at], s.share[at]
      end
      return s
    end,
    parts = join({ { "anisotropy" } }, per_axis(g.dim, "wavelength_", 1), per_axis(g.dim, "share_")),
    columns = { g.dim == 2 and { "angle", "degree" } or { "axis", 0, true }, { "k", -1 }, { "S", g.dim }, { "modes" } },
    rows = sector_rows(g) }
end

-- --- correlation --------------------------------------------------------------------------------------------------------------

---Two-point correlation, averaged over directions; in a ledger its first zero.
function M.correlation(e)
  measure.values(e, "correlation")
  return measure.make_whole { name = "correlation(" .. measure.label(e) .. ")", main = "zero",
    all = function()
      local f, grid = measure.values(e, "correlation")
      return core.correlation(f, grid.core)
    end,
    parts = { { "zero", 1 }, { "spacing", 1 } },
    columns = { { "r", 1 }, { "C" } },
    rows = function(c)
      local rows = {}
      for i = 1, #c.r do rows[i] = { c.r[i], c.c[i] } end
      return rows
    end }
end

-- --- characteristic lengths -----------------------------------------------------------------------------------------------------

local length_names = { "wavelength", "peak", "zero", "spacing", "interface", "chord_above", "chord_below", "diameter_above", "diameter_below" }

---The lengths by which a structure is known, side by side.
function M.lengths(e, t)
  local o = measure.phase_options(t, "lengths", nil, true)
  local _, g = measure.values(e, "lengths")
  local volume = 1
  for a = 1, g.dim do volume = volume * g.cells[a] * g.spacing[a] end
  local parts = {}
  for i, name in ipairs(length_names) do parts[i] = { name, 1 } end
  return measure.make_whole { name = "lengths(" .. measure.label(e) .. ")", main = "wavelength",
    all = function()
      local f, grid = measure.values(e, "lengths")
      local level = measure.level_of(f, o)
      local s, c, area = core.structure(f, grid.core), core.correlation(f, grid.core), core.interface(f, level)
      local waves = measure.stands_out(s)
      local l = { wavelength = waves and s.wavelength or nil, peak = waves and s.peak or nil, zero = c.zero, spacing = c.spacing,
        interface = area > 0 and volume / area or nil }
      for _, side in ipairs { "above", "below" } do
        local d = core.domains(f, level, side == "above", false)
        l["chord_" .. side] = core.chords(f, level, side == "above").mean
        l["diameter_" .. side] = d.count > 0 and d.mean_diameter or nil
      end
      for _, name in ipairs(length_names) do if l[name] ~= l[name] then l[name] = nil end end
      return l
    end,
    parts = parts, columns = { { "name", 0, true }, { "length", 1 } },
    rows = function(l)
      local rows = {}
      for i, name in ipairs(length_names) do rows[i] = { name, l[name] or 0 / 0 } end
      return rows
    end }
end

return M
