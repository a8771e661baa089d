-- Grids, fields and starting states.
local core = require "core"
local options = require "options"
local formula = require "formula"
local sources = require "sources"

-- Grids are held weakly: a script that makes one model after another must not keep all their arrays.
local M = { all = setmetatable({}, { __mode = "v" }), count = 0, of = setmetatable({}, { __mode = "k" }), folder = nil }

local Grid = { kind = "grid" }
Grid.__index = Grid

local axis_names = { "x", "y", "z" }

local function per_axis(v, dim, what, check)
  local list = {}
  for a = 1, dim do
    local x = v
    if type(v) == "table" then x = v[a] end
    if x == nil then core.fail(string.format("grid: %s has no entry for axis %s", what, axis_names[a])) end
    list[a] = check(x, axis_names[a])
  end
  if type(v) == "table" and #v > dim then core.fail("grid: " .. what .. " has more entries than there are axes") end
  return list
end

local function check_cells(n, axis)
  if type(n) ~= "number" or n ~= math.floor(n) or n < 1 then
    core.fail(string.format("grid: cells along %s have to be a whole number of at least 1, found %s", axis, tostring(n)))
  end
  return n
end

local function check_spacing(h, axis)
  if type(h) ~= "number" or not (h > 0 and h < math.huge) then
    core.fail(string.format("grid: the spacing along %s has to be a positive number, found %s", axis, tostring(h)))
  end
  return h
end

local function check_wall(w, axis)
  if w == "periodic" then return false elseif w == "mirror" then return true end
  core.fail(string.format("grid: the walls along %s have to be \"periodic\" or \"mirror\", found %s", axis,
    type(w) == "string" and ('"' .. w .. '"') or options.kind(w)))
end

-- mottle check runs a script on finer grids: cells multiplied, the box and the starts as the script has them.
M.refine = 1

local function refined(o)
  local cells, spacing = {}, {}
  for a, n in ipairs(type(o.cells) == "table" and o.cells or { o.cells }) do
    local h = type(o.spacing) == "table" and o.spacing[a] or o.spacing
    cells[a] = n == 1 and 1 or math.floor(n * M.refine + 0.5)
    spacing[a] = h * n / cells[a]
  end
  return { cells = cells, spacing = spacing, walls = o.walls }
end

---A box of cells. grid{ cells = {nx, ny}, spacing = h, walls = "periodic" or "mirror" or a list per axis }
function M.grid(t)
  if M.refine == 1 then return M.plain(t) end
  local coarse = M.plain(t)
  local g = M.plain(refined(t))
  g.coarse, g.twin = coarse, {}
  return g
end

function M.plain(t)
  local o = options.read(t, "grid", { { "cells", "any", required = true }, { "spacing", "any", required = true },
    { "walls", "any", default = "periodic" } })
  local cells = type(o.cells) == "table" and o.cells or { o.cells }
  if #cells < 1 or #cells > 3 then core.fail("grid: cells needs 1, 2 or 3 entries, found " .. #cells) end
  local g = setmetatable({ dim = #cells, fields = {} }, Grid)
  g.cells = per_axis(cells, g.dim, "cells", check_cells)
  g.spacing = per_axis(o.spacing, g.dim, "spacing", check_spacing)
  g.mirror = per_axis(o.walls, g.dim, "walls", check_wall)
  local count = 1
  for a = 1, g.dim do count = count * g.cells[a] end
  local _, _, installed = core.memory()
  if count * 48 > installed then
    core.fail(string.format("grid: %.4g cells; a model with one field would take about %.4g GB, and this machine has %.4g GB",
      count, count * 48 / 1e9, installed / 1e9))
  end
  collectgarbage() -- it does not see how large arrays are, so it would wait too long with those of earlier models
  g.core = core.grid(g.cells, g.spacing, g.mirror)
  g.count = count
  g.length = {}
  for a = 1, g.dim do
    g[axis_names[a]] = core.coord(a - 1)
    g.length[a] = g.cells[a] * g.spacing[a]
  end
  M.count = M.count + 1
  M.all[M.count] = g
  return g
end

-- Starting states that need the grid: a sum of scaled loaders plus a formula.
local Start = { kind = "starting state" }
Start.__index = Start

local function as_start(v)
  if getmetatable(v) == Start then return v end
  return setmetatable({ parts = {}, rest = v }, Start)
end

function Start.__add(a, b)
  a, b = as_start(a), as_start(b)
  local s = setmetatable({ parts = {}, rest = a.rest + b.rest }, Start)
  for _, list in ipairs { a.parts, b.parts } do
    for _, p in ipairs(list) do s.parts[#s.parts + 1] = p end
  end
  return s
end

function Start.__mul(a, b)
  if getmetatable(b) == Start then a, b = b, a end
  if type(b) ~= "number" then core.fail("a start from a file or placed particles can only be multiplied by a number") end
  local s = setmetatable({ parts = {}, rest = a.rest * b }, Start)
  for i, p in ipairs(a.parts) do s.parts[i] = { scale = p.scale * b, load = p.load } end
  return s
end

function Start.__sub(a, b) return as_start(a) + as_start(b) * -1 end
function Start.__unm(a) return a * -1 end

---A start that a function loads into a field: load(field, grid).
function M.loader(load) return setmetatable({ parts = { { scale = 1, load = load } }, rest = 0 }, Start) end

---Values from a .npy array beside the script; its shape has to be the grid's.
function M.from_array(t)
  local o = options.read(t, "from_array", { { "file", "string", required = true } })
  return M.loader(function(f)
    core.read_array(M.folder, o.file, f)
    sources.note(M.folder, o.file)
  end)
end

---Values from a PNG picture beside the script: black and white stand for the values given.
---pixel is the size of a pixel; without it the picture is stretched over the box.
function M.from_image(t)
  local o = options.read(t, "from_image", { { "file", "string", required = true }, { "black", "number", default = 0 },
    { "white", "number", default = 1 }, { "pixel", "positive" } })
  local s = M.loader(function(f)
    core.read_image(M.folder, o.file, f, o.pixel)
    sources.note(M.folder, o.file)
  end) * (o.white - o.black)
  return s + o.black
end

---A plane wave: amplitude * cos(2 pi r.direction / wavelength).
function M.wave(t)
  local o = options.read(t, "wave", { { "wavelength", "positive", required = true }, { "amplitude", "number", required = true },
    { "direction", "table", default = { 1 } } })
  local phase, norm = 0, 0
  for a, d in ipairs(o.direction) do
    if type(d) ~= "number" or a > 3 then core.fail("wave: direction has to be a list of up to three numbers") end
    phase, norm = phase + d * core.coord(a - 1), norm + d * d
  end
  if norm == 0 then core.fail("wave: direction must not be zero") end
  return o.amplitude * formula.cos(2 * math.pi / o.wavelength / math.sqrt(norm) * phase)
end

local function particle_volume(g, r) return ({ 2 * r, math.pi * r ^ 2, 4 / 3 * math.pi * r ^ 3 })[g.dim] end

local function overlaps(g, centres, c, distance)
  for i = 1, #centres, g.dim do
    local d2 = 0
    for a = 1, g.dim do
      local d = math.abs(centres[i + a - 1] - c[a])
      if not g.mirror[a] then d = math.min(d, g.length[a] - d) end
      d2 = d2 + d * d
    end
    if d2 < distance * distance then return true end
  end
  return false
end

local function random_centres(g, o, count)
  local centres, tries, stream = {}, 0, 0
  while #centres < count * g.dim do
    local c = {}
    for a = 1, g.dim do
      local margin = g.mirror[a] and math.min(o.radius, g.length[a] / 2) or 0
      c[a] = margin + core.random(o.seed, stream) * (g.length[a] - 2 * margin)
      stream = stream + 1
    end
    if not overlaps(g, centres, c, 2 * o.radius + o.gap) then
      for a = 1, g.dim do centres[#centres + 1] = c[a] end
      tries = 0
    end
    tries = tries + 1
    if tries > 20000 then
      core.fail(string.format("place: only %d of %d particles found room; ask for fewer or smaller ones", #centres // g.dim, count))
    end
  end
  return centres
end

---Seeds: smooth-edged discs (spheres) that add `value`, at random places that do not overlap or at given ones.
---place{ radius, fraction or count or at = {{x, y}, ...}, value, seed, width }
function M.place(t)
  local o = options.read(t, "place", { { "radius", "positive", required = true }, { "value", "number", required = true },
    { "fraction", "positive" }, { "count", "count" }, { "at", "table" }, { "seed", "whole", default = 1 },
    { "width", "positive" }, { "gap", "number" } })
  if (o.fraction and 1 or 0) + (o.count and 1 or 0) + (o.at and 1 or 0) ~= 1 then
    core.fail("place: say one of fraction, count or at")
  end
  formula.seeds[#formula.seeds + 1] = not o.at and o.seed or nil
  o.seed = math.tointeger(o.seed)
  return M.loader(function(f, g)
    local width = o.width or 1.5 * g.spacing[1]
    o.gap = o.gap or 2 * width
    local centres = {}
    if o.at then
      for _, c in ipairs(o.at) do
        for a = 1, g.dim do
          if type(c) ~= "table" or type(c[a]) ~= "number" then core.fail("place: each place in `at` has to be a list of " .. g.dim .. " coordinates") end
          centres[#centres + 1] = c[a]
        end
      end
    else
      local volume = 1
      for a = 1, g.dim do volume = volume * g.length[a] end
      local count = o.count or math.floor(o.fraction * volume / particle_volume(g, o.radius) + 0.5)
      if count < 1 then core.fail("place: the fraction asked for is less than one particle of this radius") end
      centres = random_centres(g, o, count)
    end
    core.add_discs(f, centres, o.radius, width, o.value)
  end)
end

-- On a refined grid the start is made on the script's own and taken over wave by wave, so that both start alike.
local function set_refined(f, start, g)
  local twin = g.twin[f]
  if not twin then
    twin = core.field(g.coarse.core, core.field_name(f))
    g.twin[f], M.of[twin] = twin, g.coarse
    table.insert(g.coarse.fields, twin)
  end
  start = as_start(start)
  local rest = start.rest
  if core.is_expr(rest) then
    for _, x in ipairs(g.fields) do if g.twin[x] then rest = core.replace(rest, x, g.twin[x]) end end
  end
  M.set(twin, setmetatable({ parts = start.parts, rest = rest }, Start))
  core.resample(f, g.core, twin, g.coarse.core)
end

---Gives a field the values of a start.
function M.set(f, start)
  local g = M.of[f]
  if not g then core.fail("set: expected a field first") end
  if g.coarse then return set_refined(f, start, g) end
  start = as_start(start)
  if not options.kind(start.rest):find("number") and not core.is_expr(start.rest) then
    core.fail("field '" .. core.field_name(f) .. "': expected a number, a formula of position and noise, or a starting state, found " ..
      options.kind(start.rest))
  end
  local sum = start.rest
  local parts = {}
  for i, p in ipairs(start.parts) do
    parts[i] = core.field(g.core, "part " .. i)
    p.load(parts[i], g)
    sum = sum + p.scale * parts[i]
  end
  local list = {}
  for _, x in ipairs(g.fields) do list[#list + 1] = x end
  for _, x in ipairs(parts) do list[#list + 1] = x end
  for i = 1, M.count do
    local other = M.all[i]
    for _, x in ipairs(other and other ~= g and other.fields or {}) do
      if core.contains(sum, x) then
        core.fail(string.format("field '%s': its start contains field '%s', which is on another grid", core.field_name(f), core.field_name(x)))
      end
    end
  end
  core.field_set(f, g.core, sum, list, 0)
end

---A field on this grid with its start.
function Grid:field(name, start)
  if getmetatable(self) ~= Grid then core.fail("write g:field(...) with a colon") end
  if type(name) ~= "string" or name == "" then core.fail("field: expected its name as text first, as g:field(\"c\", 0.5)") end
  if not options.is_name(name) then core.fail("field: its name has to be text of 1 to 100 bytes on one line") end
  if start == nil then core.fail("field '" .. name .. "': its start is missing, as g:field(\"" .. name .. "\", 0.5)") end
  for _, other in ipairs(self.fields) do
    if core.field_name(other) == name then core.fail("field '" .. name .. "': the grid has a field of that name already") end
  end
  local f = core.field(self.core, name)
  M.of[f] = self
  M.set(f, start)
  self.fields[#self.fields + 1] = f
  return f
end

---Cell number (from 0) as the script counts: (3, 14).
function Grid:cell_text(cell)
  local list, rest = {}, cell
  for a = 1, self.dim do
    list[a] = string.format("%d", rest % self.cells[a] + 1)
    rest = rest // self.cells[a]
  end
  return "(" .. table.concat(list, ", ") .. ")"
end

---The grid a formula lives on: of its fields, else the last one made.
function M.find(e)
  if M.of[e] then return M.of[e] end
  for i = 1, M.count do
    local g = M.all[i]
    for _, f in ipairs(g and g.fields or {}) do
      if core.is_expr(e) and core.contains(e, f) then return g end
    end
  end
  for i = M.count, 1, -1 do
    if M.all[i] then return M.all[i] end
  end
  core.fail("there is no grid yet")
end

formula.grid_of = M.find

return M
