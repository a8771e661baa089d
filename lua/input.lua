-- Inputs: values that the command line may set (mottle run SCRIPT name=value).
local core = require "core"
local text = require "text"
local units = require "unit"

local M = { given = {}, list = {} }

---The value of an input: from the command line, or its default.
---@param name string
---@param default number|string|boolean
---@param meaning string?
function M.input(name, default, meaning)
  if type(name) ~= "string" or not name:match("^[%a_][%w_]*$") then
    core.fail("input: expected a name of letters, digits and _ first")
  end
  local kind = type(default)
  if kind ~= "number" and kind ~= "string" and kind ~= "boolean" then
    core.fail("input '" .. name .. "': the default has to be a number, text, or true or false; found " .. kind)
  end
  local value, given = default, M.given[name]
  if given then
    local reason
    if kind == "number" then value, reason = units.parse(given)
    elseif kind == "boolean" then
      value = given == "true" or (given ~= "false" and nil)
      reason = "expected true or false"
    else value = given end
    if value == nil then
      core.fail(string.format("input %s=%s: %s%s", name, given, kind == "number" and
        "expected a number, with a unit if it has one (as 900K, 627degC, 3K/min), but " or "", reason))
    end
  end
  M.list[#M.list + 1] = { name = name, value = value, meaning = meaning, given = given ~= nil }
  return value
end

---Names given on the command line that no input asked for are mistakes.
function M.check()
  local names, known = {}, {}
  for _, i in ipairs(M.list) do
    known[i.name] = true
    names[#names + 1] = i.name
  end
  for _, name in ipairs(text.keys(M.given)) do
    if not known[name] then
      core.fail(string.format("the command line sets '%s', but the script has no such input%s%s", name,
        text.hint(name, names), #names > 0 and (" (inputs: " .. table.concat(names, ", ") .. ")") or ""))
    end
  end
end

return M
