-- Option tables: unknown keys are refused with the nearest valid one, types are checked, defaults filled in.
local core = require "core"
local text = require "text"

local M = {}

local function article(word) return (word:find("^[aeiou]") and "an " or "a ") .. word end

---What a value is, in the script's words.
function M.kind(v)
  local k = core.kind(v)
  if k == "table" and getmetatable(v) and getmetatable(v).kind then return getmetatable(v).kind end
  return k
end

-- Names go into tables and the names of files.
function M.is_name(v) return type(v) == "string" and #v >= 1 and #v <= 100 and not v:find("%c") end

local checks = {
  number = function(v) return type(v) == "number" and v == v end,
  positive = function(v) return type(v) == "number" and v > 0 and v < math.huge end,
  whole = function(v) return type(v) == "number" and v == math.floor(v) and math.abs(v) <= 2 ^ 53 end,
  count = function(v) return type(v) == "number" and v == math.floor(v) and v >= 1 and v <= 1e9 end,
  name = function(v) return M.is_name(v) end,
  string = function(v) return type(v) == "string" end,
  boolean = function(v) return type(v) == "boolean" end,
  ["function"] = function(v) return type(v) == "function" end,
  table = function(v) return type(v) == "table" end,
  formula = function(v) return type(v) == "number" or core.is_expr(v) end,
  field = function(v) return core.kind(v) == "field" end,
  param = function(v) return core.kind(v) == "param" end,
  any = function() return true end,
}
local names = { positive = "positive number", whole = "whole number", formula = "number or formula", count = "whole number from 1 to 1e9",
  name = "text of 1 to 100 bytes on one line" }

---Checks the options `t` of `what` against a list of { name, type, default = , required = }.
---Positions (t[1], t[2] ...) are left to the caller: `list` says that they are allowed.
---@return table options
function M.read(t, what, specs, list)
  if type(t) ~= "table" then core.fail(what .. ": expected options in braces, found " .. M.kind(t)) end
  local known, valid, out = {}, {}, {}
  for _, s in ipairs(specs) do
    known[s[1]] = s
    valid[#valid + 1] = s[1]
  end
  for _, k in ipairs(text.keys(t)) do
    if type(k) == "string" then
      if not known[k] then core.fail(what .. ": unknown option '" .. k .. "'" .. text.hint(k, valid) ..
        " (options: " .. table.concat(valid, ", ") .. ")") end
    elseif not list then
      core.fail(what .. ": its options have names (" .. table.concat(valid, ", ") .. "), found a value without one")
    end
  end
  for _, s in ipairs(specs) do
    local name, kind, v = s[1], s[2], t[s[1]]
    if v == nil then
      if s.required then core.fail(what .. ": option '" .. name .. "' is missing (" .. article(names[kind] or kind) .. ")") end
      v = s.default
    elseif not checks[kind](v) then
      core.fail(string.format("%s: option '%s' has to be %s, found %s", what, name, article(names[kind] or kind),
        type(v) == "number" and tostring(v) or M.kind(v)))
    end
    out[name] = v
  end
  return out
end

return M
