-- Words and numbers for people.
local core = require "core"

local M = {}

---Edits between two words; two letters swapped count as one (Damerau 1964, in its simple form).
---@param a string
---@param b string
---@return integer
local function edits(a, b)
  local before, last, row = {}, {}, {}
  for j = 0, #b do last[j] = j end
  for i = 1, #a do
    row = { [0] = i }
    for j = 1, #b do
      local x, y = a:sub(i, i), b:sub(j, j)
      row[j] = math.min(last[j] + 1, row[j - 1] + 1, last[j - 1] + (x == y and 0 or 1))
      if i > 1 and j > 1 and x == b:sub(j - 1, j - 1) and a:sub(i - 1, i - 1) == y then row[j] = math.min(row[j], before[j - 2] + 1) end
    end
    before, last = last, row
  end
  return last[#b]
end

---The name among `names` that `name` was probably meant to be, or nil.
---@param name string
---@param names string[]
function M.nearest(name, names)
  local best, least = nil, math.min(math.max(2, #name // 3), #name // 2) + 1 -- half of a short word is no likeness
  table.sort(names)
  for _, n in ipairs(names) do
    local d = edits(name:lower(), n:lower())
    if d < least then best, least = n, d end
  end
  return best
end

---Keys of a table, sorted.
function M.keys(t)
  local keys = {}
  for k in next, t do keys[#keys + 1] = k end
  table.sort(keys, function(a, b)
    if type(a) == type(b) and type(a) ~= "table" and type(a) ~= "userdata" and type(a) ~= "function" and type(a) ~= "boolean" then
      return a < b
    end
    if type(a) == "boolean" and type(b) == "boolean" then return not a and b end
    return type(a) < type(b)
  end)
  return keys
end

---"; did you mean 'x'?" or "".
function M.hint(name, names)
  local best = M.nearest(name, names)
  return best and ("; did you mean '" .. best .. "'?") or ""
end

---A script's text as Lua takes it: without a byte order mark, its first line a comment where it names a program (#!).
---@param s string
---@return string
function M.source(s)
  s = s:gsub("^\239\187\191", "")
  if s:sub(1, 1) == "#" then s = "--" .. s end
  return s
end

---A number with four digits.
function M.number(x)
  if x ~= x then return "-" end
  return string.format("%.4g", x)
end

---A time: readable units in a run in real units, else a bare number.
function M.time(t, real)
  return real and core.time_text(t) or M.number(t)
end

---A length likewise.
function M.length(l, real)
  return real and core.length_text(l) or M.number(l)
end

return M
