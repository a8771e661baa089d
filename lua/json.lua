-- JSON (RFC 8259), as much of it as summaries need: objects, lists, text, finite numbers, true, false, null.
local core = require "core"
local text = require "text"

local M = {}

local escapes = { ['"'] = '\\"', ["\\"] = "\\\\", ["\n"] = "\\n", ["\r"] = "\\r", ["\t"] = "\\t" }

local function quote(s)
  return '"' .. s:gsub('[%c"\\]', function(c) return escapes[c] or string.format("\\u%04x", c:byte()) end) .. '"'
end

---Text of a value; lists are tables with [1] or empty tables marked { list = true }.
function M.write(v, indent)
  indent = indent or ""
  local deeper = indent .. "  "
  if type(v) == "number" then return v == v and math.abs(v) < math.huge and core.exact_text(v) or "null" end
  if type(v) == "string" then return quote(v) end
  if type(v) ~= "table" then return tostring(v) end
  local parts = {}
  if #v > 0 or next(v) == nil then
    for i, x in ipairs(v) do parts[i] = deeper .. M.write(x, deeper) end
    return #parts == 0 and "[]" or "[\n" .. table.concat(parts, ",\n") .. "\n" .. indent .. "]"
  end
  for _, k in ipairs(text.keys(v)) do parts[#parts + 1] = deeper .. quote(tostring(k)) .. ": " .. M.write(v[k], deeper) end
  return "{\n" .. table.concat(parts, ",\n") .. "\n" .. indent .. "}"
end

local unescapes = { b = "\b", f = "\f", n = "\n", r = "\r", t = "\t" }
local value

local function skip(s, i) return s:match("^[ \t\r\n]*()", i) end

local function string_at(s, i)
  local out = {}
  while true do
    local plain, j = s:match('^([^"\\%c]*)()', i)
    out[#out + 1] = plain
    local c = s:sub(j, j)
    if c == '"' then return table.concat(out), j + 1 end
    if c ~= "\\" then error("text that does not end", 0) end
    local e = s:sub(j + 1, j + 1)
    if e == "u" then
      local hex = s:match("^%x%x%x%x", j + 2) or error("a wrong escape", 0)
      out[#out + 1] = utf8.char(tonumber(hex, 16))
      i = j + 6
    else
      out[#out + 1] = unescapes[e] or e
      i = j + 2
    end
  end
end

local function members(s, i, close, one)
  i = skip(s, i)
  if s:sub(i, i) == close then return i + 1 end
  while true do
    i = skip(s, one(skip(s, i)))
    local c = s:sub(i, i)
    if c == close then return i + 1 end
    if c ~= "," then error("',' or '" .. close .. "' expected", 0) end
    i = i + 1
  end
end

function value(s, i, depth)
  if depth > 50 then error("nested too deep", 0) end
  local c = s:sub(i, i)
  local t = {}
  if c == '"' then return string_at(s, i + 1) end
  if c == "{" then
    i = members(s, i + 1, "}", function(j)
      if s:sub(j, j) ~= '"' then error("a name expected", 0) end
      local k
      k, j = string_at(s, j + 1)
      j = skip(s, j)
      if s:sub(j, j) ~= ":" then error("':' expected", 0) end
      t[k], j = value(s, skip(s, j + 1), depth + 1)
      return j
    end)
    return t, i
  end
  if c == "[" then
    i = members(s, i + 1, "]", function(j)
      local v
      v, j = value(s, j, depth + 1)
      t[#t + 1] = v
      return j
    end)
    return t, i
  end
  for word, v in next, { ["true"] = true, ["false"] = false } do
    if s:sub(i, i + #word - 1) == word then return v, i + #word end
  end
  if s:sub(i, i + 3) == "null" then return nil, i + 4 end
  local number, j = s:match("^(%-?[%d%.eE%+%-]+)()", i)
  local n = tonumber(number)
  if not n then error("a value expected at byte " .. i, 0) end
  return n, j
end

---Value of a text; raises text without a position where it is malformed.
function M.read(s) return (value(s, skip(s, 1), 0)) end

return M
