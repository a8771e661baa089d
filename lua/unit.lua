-- Units as SI factors. The one place where quantities are made: `quantity` and `parse`.
local core = require "core"
local text = require "text"

local M = {}

local factors = {
  m = 1, km = 1e3, cm = 1e-2, mm = 1e-3, um = 1e-6, nm = 1e-9, pm = 1e-12, angstrom = 1e-10,
  s = 1, ms = 1e-3, us = 1e-6, ns = 1e-9, minute = 60, min = 60, hour = 3600, h = 3600, day = 86400, d = 86400, year = 31557600,
  K = 1, mK = 1e-3,
  kg = 1, g = 1e-3, mg = 1e-6,
  mol = 1, kmol = 1e3,
  N = 1, Pa = 1, kPa = 1e3, MPa = 1e6, GPa = 1e9, bar = 1e5,
  J = 1, kJ = 1e3, MJ = 1e6, mJ = 1e-3, uJ = 1e-6, aJ = 1e-18, eV = 1.602176634e-19, cal = 4.184, kcal = 4184,
  W = 1, kW = 1e3, Hz = 1, rad = 1, degree = math.pi / 180, percent = 0.01,
}
-- CODATA 2018 (exact since the SI of 2019)
local constants = { R = 8.31446261815324, kB = 1.380649e-23, NA = 6.02214076e23 }

M.used = false -- a script that touches a unit is a run in real units
M.factors = factors
M.constants = constants

---unit.nm, unit.hour ...
M.unit = setmetatable({}, {
  kind = "unit table",
  __index = function(_, name)
    M.used = true
    local f = factors[name]
    if f then return f end
    core.fail("unit: there is no unit '" .. tostring(name) .. "'" .. text.hint(tostring(name), text.keys(factors)))
  end,
  __newindex = function() core.fail("unit: units cannot be changed") end,
  __metatable = false,
})

---Temperature in kelvin from degrees Celsius.
function M.degC(t)
  M.used = true
  if type(t) ~= "number" then core.fail("degC: expected a number of degrees Celsius") end
  if t < -273.15 then core.fail("degC: " .. t .. " degrees Celsius is below absolute zero") end
  return t + 273.15
end

local function factor_of(expression)
  local value, sign = 1, 1
  local rest = expression:gsub("%s", "")
  while rest ~= "" do
    local name, power, more = rest:match("^(%a+)%^?(%-?%d*)(.*)$")
    if not name or not factors[name] then return nil, name or rest end
    value = value * factors[name] ^ (sign * (tonumber(power) or 1))
    if more == "" then break end
    local op = more:sub(1, 1)
    if op ~= "/" and op ~= "*" then return nil, more end
    sign = op == "/" and -1 or 1
    rest = more:sub(2)
  end
  return value
end

---A quantity from the command line: "900K", "627degC", "3K/min", "12h", "0.42". nil and the reason if it is none.
---@param s string
---@return number|nil value
---@return string|nil reason
function M.parse(s)
  local number, rest = s:match("^%s*([%+%-]?[%d%.]+[eE][%+%-]?%d+)%s*(.-)%s*$")
  if not number then number, rest = s:match("^%s*([%+%-]?[%d%.]+)%s*(.-)%s*$") end
  local v = number and tonumber(number)
  if not v then return nil, "it does not start with a number" end
  if rest == "" then return v end
  M.used = true
  if rest == "degC" then
    if v < -273.15 then return nil, "it is below absolute zero" end
    return v + 273.15
  end
  local f, bad = factor_of(rest)
  if not f then return nil, "'" .. tostring(bad) .. "' is no unit" end
  return v * f
end

return M
