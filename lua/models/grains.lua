-- Many grains: each field is 1 in its grains and 0 outside, all compete for room (Chen & Yang, Phys. Rev. B 50 (1994) 15752; Fan & Chen,
-- Acta Mater. 45 (1997) 611); gamma = 3/2 has closed forms (Moelans, Blanpain & Wollants, Phys. Rev. B 78 (2008) 024113, from memory).
--   local grains = require "grains"
--   local fields = grains.fields(g, { grains = 40, count = 10, seed = 3 })
--   local m = model{ energy = grains.energy{ fields = fields } }
--   for _, e in ipairs(fields) do m:relax(e, { rate = 1 }) end
local M = {}

-- kappa: of (kappa/2)|grad e|^2; rate: of m:relax; grains on count fields (those that share one merge where they meet) from nuclei
local defaults = { fields = {}, height = 1, kappa = 2, gamma = 3/2, rate = 1, grains = 40, count = 10, radius = 4, seed = 1 }

-- The options with their defaults. The same table may go to every function; `...` names what one cannot do without.
local function options(t, ...)
  local o = setmetatable({}, { __index = defaults })
  for k, v in pairs(t or {}) do
    if defaults[k] == nil then error("grains: there is no option '" .. tostring(k) .. "'", 3) end
    local wanted = type(defaults[k]) == "table" and "list" or "number or formula"
    local fits = wanted == "list" and type(v) == "table" or wanted ~= "list" and (type(v) == "number" or type(v) == "userdata")
    if not fits then error("grains: option '" .. k .. "' has to be a " .. wanted .. ", found a " .. type(v), 3) end
    o[k] = v
  end
  for _, k in ipairs{ ... } do
    if not o[k] then error("grains: option '" .. k .. "' is missing", 3) end
  end
  return o
end

---Energy density, 0 in grains: height (1/4 + sum(e^4/4 - e^2/2) + gamma sum over pairs e_i^2 e_j^2) + (kappa/2) sum |grad e|^2.
function M.energy(t)
  local o, well, meeting, gradients, before = options(t), 1/4, 0, 0, 0
  for _, e in ipairs(o.fields) do
    well, meeting, gradients, before = well + e^4/4 - e^2/2, meeting + before*e^2, gradients + gradsq(e), before + e^2
  end
  return o.height*(well + o.gamma*meeting) + o.kappa/2*gradients, before -- and sum e^2: 1 in grains, 1/2 on boundaries, for pictures
end

---At gamma = 3/2: a boundary's energy per area, its width from 10 to 90 %, and the area that a round grain loses per time.
function M.boundary(t)
  local o = options(t)
  return sqrt(2*o.kappa*o.height)/3, 2*math.log(9)*sqrt(o.kappa/(2*o.height)), 2*math.pi*o.kappa*o.rate
end

---Fields "e1", "e2" ... of a grid that start as nuclei; these grow until they meet, within a time of a few distances over
---2 rate sqrt(height kappa), and leave polygons (Voronoi). Nuclei of one field keep half their mean distance.
function M.fields(g, t)
  local o, list, volume = options(t), {}, 1
  for a = 1, g.dim do volume = volume*g.length[a] end
  local each = math.ceil(o.grains/o.count)
  for i = 1, o.count do -- where nuclei of two fields overlap, the one of the greater value stays
    list[i] = g:field("e" .. i, place{ radius = o.radius, value = 1 - 0.01*i, count = each, seed = o.seed*1000 + i,
      gap = (volume/each)^(1/g.dim)/2 })
  end
  return list
end

return M
