-- Measurements with parts: domains, the structure factor. `now` gives all of it as a table, a ledger takes parts
-- (domains(c).mean_diameter), m:tabulate writes the distribution.
local core = require "core"
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
    parts = { { "peak", 1 }, { "wavelength", 1 }, { "first", -1 }, { "variance" } },
    columns = { { "k", -1 }, { "S", g.dim }, { "modes" } },
    rows = structure_rows }
end

return M
