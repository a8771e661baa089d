-- Files a script reads from beside itself are part of what was run: each is copied into the run folder's inputs/.
local core = require "core"

local M = { list = {} } -- { file = as the script names it, copy = its name in the run folder }

local folder, from -- the run folder once there is one; the script's own folder

local function copy(s) core.copy(folder, s.copy, from, s.file) end

-- inputs/ has no folders in it, so data/a.npy becomes data_a.npy, or data_a_2.npy where that name is taken.
local function name_for(file)
  local base, ending = file:gsub("/", "_"):match("^(.-)(%.?[^.]*)$")
  local taken, name, n = {}, "inputs/" .. base .. ending, 2
  for _, s in ipairs(M.list) do taken[s.copy] = true end
  while taken[name] do name, n = "inputs/" .. base .. "_" .. n .. ending, n + 1 end
  return name
end

---Notes that the script has read a file of its folder `own`.
---@param own userdata
---@param file string
function M.note(own, file)
  for _, s in ipairs(M.list) do if s.file == file then return end end
  from = own
  local s = { file = file, copy = name_for(file) }
  M.list[#M.list + 1] = s
  if folder then
    core.sub_folder(folder, "inputs")
    copy(s)
  end
end

---Copies what was read so far, and from now on what is read later.
---@param run_folder userdata
function M.keep(run_folder)
  folder = run_folder
  if #M.list > 0 then core.sub_folder(folder, "inputs") end
  for _, s in ipairs(M.list) do copy(s) end
end

return M
