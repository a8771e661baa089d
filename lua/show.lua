-- A field as a picture of letters in the terminal: half blocks in colour, shades of letters without, a chart for one axis.
local core = require "core"
local options = require "options"
local measure = require "measure"
local text = require "text"
local units = require "unit"

local M = {}

local shades = " .:-=+*#%@"
local eighths = { "▁", "▂", "▃", "▄", "▅", "▆", "▇", "█" }
local chart_rows = 12
local nan_colour = { 255, 0, 255 } -- no map contains it

---What standard output can show: "true" (24 bits), "256" colours or "plain".
function M.colours()
  local terminal, no = core.environment("TERM") or "", core.environment("NO_COLOR") or ""
  if not core.is_terminal(1) or no ~= "" or terminal == "" or terminal == "dumb" or terminal:find("^vt%d") then return "plain" end
  local deep = core.environment("COLORTERM") or ""
  if deep == "truecolor" or deep == "24bit" or terminal:find("%-direct") then return "true" end
  return "256"
end

local function squared(r, g, b, R, G, B) return (r - R) ^ 2 + (g - G) ^ 2 + (b - B) ^ 2 end

local cube = { 0, 95, 135, 175, 215, 255 } -- the steps terminals give the 6 x 6 x 6 colours 16 to 231
local function cube_step(v)
  local best = 1
  for i = 2, 6 do if math.abs(cube[i] - v) < math.abs(cube[best] - v) then best = i end end
  return best
end

---The nearest of a terminal's 256 colours: of its cube or of its 24 greys (8, 18 ... 238).
---@return integer
function M.nearest(r, g, b)
  local i, j, k = cube_step(r), cube_step(g), cube_step(b)
  local grey = math.max(0, math.min(23, math.floor(((r + g + b) / 3 - 8) / 10 + 0.5)))
  local v = 8 + 10 * grey
  if squared(r, g, b, v, v, v) < squared(r, g, b, cube[i], cube[j], cube[k]) then return 232 + grey end
  return 16 + 36 * (i - 1) + 6 * (j - 1) + (k - 1)
end

-- Escape sequences for a colour as ink or ground, made once each.
local function paints(depth, map)
  local bytes = core.map_colours(map)
  local made = { ink = {}, ground = {} }
  return function(where, t)
    local i = t ~= t and -1 or math.floor(255 * t + 0.5)
    local code = made[where][i]
    if not code then
      local r, g, b = table.unpack(i < 0 and nan_colour or { bytes:byte(3 * i + 1, 3 * i + 3) })
      local which = where == "ink" and "38" or "48"
      code = depth == "true" and string.format("\27[%s;2;%d;%d;%dm", which, r, g, b) or string.format("\27[%s;5;%dm", which, M.nearest(r, g, b))
      made[where][i] = code
    end
    return code
  end
end

-- Two rows of dots in one of letters: the upper one is the ink of a half block, the lower one its ground.
local function half_blocks(t, w, h, paint)
  local out = {}
  for top = 0, h - 1, 2 do
    local ink, ground
    for x = 1, w do
      local a = paint("ink", t[top * w + x])
      local b = top + 1 < h and paint("ground", t[(top + 1) * w + x]) or ""
      if a ~= ink then out[#out + 1] = a end
      if b ~= ground then out[#out + 1] = b end
      ink, ground = a, b
      out[#out + 1] = "▀"
    end
    out[#out + 1] = "\27[0m\n"
  end
  return table.concat(out)
end

local function letters(t, w, h)
  local out = {}
  for y = 0, h - 1 do
    local row = {}
    for x = 1, w do
      local v = t[y * w + x]
      local i = v == v and math.min(#shades, 1 + math.floor(v * #shades)) or nil
      row[x] = i and shades:sub(i, i) or "?"
    end
    out[#out + 1] = (table.concat(row):gsub(" +$", ""))
  end
  return table.concat(out, "\n") .. "\n"
end

-- Bars in eighths of a letter; the least value still shows one.
local function chart(t, w, rows)
  local out = {}
  for row = rows, 1, -1 do
    local line = {}
    for x = 1, w do
      local n = t[x] == t[x] and 1 + math.floor(t[x] * (8 * rows - 1) + 0.5) - 8 * (row - 1) or (row == 1 and 0 or -1)
      line[x] = n >= 8 and eighths[8] or n >= 1 and eighths[n] or t[x] ~= t[x] and n == 0 and "?" or " "
    end
    out[#out + 1] = (table.concat(line):gsub(" +$", ""))
  end
  return table.concat(out, "\n") .. "\n"
end

-- Columns and rows a picture may take: a line of numbers and the prompt stay in sight below it.
local function room()
  local columns, rows = core.terminal_size()
  if not columns or not core.is_terminal(1) then return 72, 36 end
  return math.max(1, columns - 1), math.max(1, rows - 3)
end

local function whole(x) return math.max(1, math.min(10000, math.floor(x + 0.5))) end

-- Dots across and down for a box, in its proportions. A dot is one column wide and `tall` columns high. Square cells that have
-- room for it become whole numbers of dots; high dots take two cells at one column each.
local function proportions(g, columns, rows, tall, width)
  local lx, ly, hx = g.length[1], g.length[2], g.spacing[1]
  if width then return whole(width), whole(width * ly / lx / tall) end
  local scale = math.min(columns / lx, rows * tall / ly)
  local columns_each = math.floor(scale * hx + 1e-9)
  local cell = columns_each >= tall and columns_each // tall * tall or columns_each
  if cell >= 1 and hx == g.spacing[2] then scale = cell / hx end
  return whole(lx * scale), whole(ly * scale / tall)
end

-- Values to 0 .. 1 between the limits; a field of one value stands in the middle.
local function scaled(v, low, high)
  for i, x in ipairs(v) do
    v[i] = x ~= x and x or low < high and math.max(0, math.min(1, (x - low) / (high - low))) or x > high and 1 or x < low and 0 or 0.5
  end
  return v
end

local function limits(o, f)
  local s = core.statistics(f)
  local low, high = o.low or s.minimum, o.high or s.maximum
  if low > high and o.low and o.high then core.fail(string.format("show: low (%g) is above high (%g)", low, high)) end
  return math.min(low, o.high or low), math.max(high, o.low or high)
end

local function label(e)
  if core.kind(e) == "field" then return core.field_name(e) end
  local t = tostring(e)
  return #t <= 40 and t or t:sub(1, 37) .. "..."
end

---The one line about a field or formula: name, smallest, largest, mean, time.
function M.line(e, time)
  local s = core.statistics((measure.values(e, "show")))
  return string.format("%s   smallest %s   largest %s   mean %s   time %s", label(e), text.number(s.minimum), text.number(s.maximum),
    text.number(s.mean), text.time(time, units.used))
end

local function picture(f, g, o)
  local columns, rows = room()
  local depth, low, high = M.colours(), limits(o, f)
  local map = o.map or "slate"
  local paint = paints(depth, map) -- also in plain text: a map that there is not should be told
  if g.dim == 1 or (g.cells[2] == 1 and (g.cells[3] or 1) == 1) then
    local w = o.width or math.max(1, columns // g.cells[1]) * math.min(columns, g.cells[1])
    return chart(scaled(core.sketch(f, w, 1), low, high), w, math.min(chart_rows, rows))
  end
  local coloured = depth ~= "plain"
  local w, h = proportions(g, columns, coloured and 2 * rows or rows, coloured and 1 or 2, o.width)
  local t = scaled(core.sketch(f, w, h), low, high)
  return coloured and half_blocks(t, w, h, paint) or letters(t, w, h)
end

---show(c) or show{ c, low =, high =, map =, width = columns }: writes the picture and its line. time_of(grid): the time it shows.
function M.show(t, time_of)
  if type(t) ~= "table" or getmetatable(t) then t = { t } end
  local o = options.read(t, "show", { { "low", "number" }, { "high", "number" }, { "map", "string" }, { "width", "count" } }, true)
  if #t ~= 1 then core.fail("show: expected one field or formula, as show(c) or show{ c, low = 0, high = 1 }") end
  if o.width and o.width > 1000 then core.fail("show: width is a number of columns, at most 1000") end
  o.width = o.width and math.tointeger(o.width)
  local f, g = measure.values(t[1], "show")
  core.write(1, picture(f, g, o))
  local more = (g.dim == 3 and "   middle plane across z" or "") ..
    ((o.low or o.high) and string.format("   shown from %s to %s", text.number(o.low or core.statistics(f).minimum), text.number(o.high or core.statistics(f).maximum)) or "")
  core.write(1, M.line(t[1], time_of(g)) .. more .. "\n")
end

return M
