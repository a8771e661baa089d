-- The report as one self-contained page: no scripts needed, nothing fetched, prints on A4, light and dark.
local text = require "text"

local M = {}

local function escape(s) return (tostring(s):gsub("[&<>\"]", { ["&"] = "&amp;", ["<"] = "&lt;", [">"] = "&gt;", ['"'] = "&quot;" })) end

local style = [[
:root { color-scheme: light dark; --ink: #1d2433; --soft: #5a6476; --line: #c9cfda; --paper: #fbfbf8; --panel: #f1f2ee; --mark: #9a3b26; --curve: #1f5f8b; }
@media (prefers-color-scheme: dark) { :root { --ink: #e4e6ea; --soft: #a3abb9; --line: #3d4554; --paper: #171a20; --panel: #20242c; --mark: #e08a6d; --curve: #7fb7dd; } }
body { font: 16px/1.5 Georgia, "DejaVu Serif", serif; color: var(--ink); background: var(--paper); margin: 0 auto; padding: 1.5rem; max-width: 62rem; }
h1 { font-size: 1.6rem; margin: 0 0 .2rem; } h2 { font-size: 1.15rem; margin: 2rem 0 .6rem; border-bottom: 1px solid var(--line); padding-bottom: .2rem; }
p, li { max-width: 46rem; } .soft { color: var(--soft); } .verdict { margin: .8rem 0; padding: .6rem .9rem; background: var(--panel); border-left: .3rem solid var(--curve); }
.verdict p { margin: .1rem 0; } .warning { border-left-color: var(--mark); }
table { border-collapse: collapse; font: .86rem/1.4 "DejaVu Sans", Verdana, sans-serif; margin: .4rem 0; } td, th { padding: .25rem .7rem .25rem 0; text-align: right; border-bottom: 1px solid var(--line); vertical-align: top; }
td:first-child, th:first-child { text-align: left; } .scroll { overflow-x: auto; }
.charts { display: grid; grid-template-columns: repeat(auto-fill, minmax(19rem, 1fr)); gap: 1rem; } figure { margin: 0; break-inside: avoid; } figcaption { font-size: .85rem; color: var(--soft); }
svg { width: 100%; height: auto; } svg text { font: 11px "DejaVu Sans", Verdana, sans-serif; fill: var(--soft); } .axis { stroke: var(--line); fill: none; } .curve { stroke: var(--curve); stroke-width: 1.6; fill: none; } .band { fill: var(--panel); }
.strip { display: flex; gap: .8rem; overflow-x: auto; padding-bottom: .6rem; } .strip figure { flex: 0 0 17rem; } .strip img { width: 100%; height: auto; border: 1px solid var(--line); background: white; }
pre { white-space: pre-wrap; overflow-wrap: anywhere; background: var(--panel); padding: .7rem; font-size: .84rem; }
@media print { body { max-width: none; padding: 0; font-size: 11pt; } .strip { flex-wrap: wrap; overflow: visible; } .strip figure { flex-basis: 30%; } .charts { grid-template-columns: 1fr 1fr; } }
]]

-- Base 64 (RFC 4648).
local alphabet = "ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789+/"
local function base64(bytes)
  local out = {}
  for i = 1, #bytes, 3 do
    local a, b, c = bytes:byte(i, i + 2)
    local n = a << 16 | (b or 0) << 8 | (c or 0)
    for shift = 18, 0, -6 do
      local k = n >> shift & 63
      out[#out + 1] = alphabet:sub(k + 1, k + 1)
    end
    if not c then out[#out] = "=" end
    if not b then out[#out - 1] = "=" end
  end
  return table.concat(out)
end

-- --- charts ---------------------------------------------------------------------------------------------------------------------

local function ticks(low, high)
  local raw = (high - low) / 4
  local power = 10 ^ math.floor(math.log(raw, 10))
  local step = power
  for _, m in ipairs { 1, 2, 5, 10 } do
    if m * power >= raw * 0.999 then
      step = m * power
      break
    end
  end
  local list, t = {}, math.ceil(low / step - 1e-9) * step
  while t <= high + 1e-9 * step do
    list[#list + 1] = t
    t = t + step
  end
  return list
end

local function extent(rows, i)
  local low, high
  for _, r in ipairs(rows) do
    local v = r[i]
    if type(v) == "number" then
      low, high = math.min(low or v, v), math.max(high or v, v)
    end
  end
  if not low then return nil end
  if high - low <= 1e-12 * math.max(math.abs(low), math.abs(high)) then
    local pad = math.abs(high) * 0.05 + (high == 0 and 1 or 0)
    low, high = low - pad, high + pad
  end
  return low, high
end

local function tick_text(v, low, high)
  if math.abs(v) < 1e-9 * (high - low) then v = 0 end
  return string.format("%.4g", v)
end

local W, H, left, right, top, bottom = 360, 210, 58, 12, 10, 34

local function chart(d, rows, i)
  local x0, x1 = extent(rows, 1)
  local y0, y1 = extent(rows, i)
  if not x0 or not y0 or #rows < 2 then return "" end
  local function px(x) return left + (x - x0) / (x1 - x0) * (W - left - right) end
  local function py(y) return H - bottom - (y - y0) / (y1 - y0) * (H - top - bottom) end
  local c = d.columns[i]
  local name = c.name .. (c.unit ~= "" and " [" .. c.unit .. "]" or "")
  local out = { string.format('<figure><svg viewBox="0 0 %d %d" role="img" aria-label="%s against time">', W, H, escape(name)) }
  for n, s in ipairs(d.stages or {}) do
    local a, b = px(math.max(x0, s.from / d.time_scale)), px(math.min(x1, s.upto / d.time_scale))
    if n % 2 == 0 and b > a then out[#out + 1] = string.format('<rect class="band" x="%.1f" y="%d" width="%.1f" height="%d"/>', a, top, b - a, H - top - bottom) end
  end
  for _, t in ipairs(ticks(y0, y1)) do
    out[#out + 1] = string.format('<path class="axis" d="M%d %.1fH%d"/><text x="%d" y="%.1f" text-anchor="end">%s</text>', left, py(t), W - right, left - 5, py(t) + 4, tick_text(t, y0, y1))
  end
  for _, t in ipairs(ticks(x0, x1)) do
    out[#out + 1] = string.format('<path class="axis" d="M%.1f %dv4"/><text x="%.1f" y="%d" text-anchor="middle">%s</text>', px(t), H - bottom, px(t), H - bottom + 16, tick_text(t, x0, x1))
  end
  out[#out + 1] = string.format('<path class="axis" d="M%d %dV%dH%d"/><text x="%d" y="%d" text-anchor="end">time%s</text>', left, top, H - bottom, W - right, W - right, H - 3, d.time_unit ~= "" and " [" .. d.time_unit .. "]" or "")
  local path, pen = {}, "M"
  for _, r in ipairs(rows) do
    if type(r[i]) == "number" then
      path[#path + 1] = string.format("%s%.1f %.1f", pen, px(r[1]), py(r[i]))
      pen = "L"
    else pen = "M" end
  end
  out[#out + 1] = '<path class="curve" d="' .. table.concat(path) .. '"/></svg><figcaption>' .. escape(name) .. "</figcaption></figure>"
  return table.concat(out)
end

-- --- sections ---------------------------------------------------------------------------------------------------------------------

local function unit_text(c) return c.unit ~= "" and " [" .. c.unit .. "]" or "" end

local function warnings(d)
  local list = {}
  if d.running then list[#list + 1] = "The run is still going on; this page is rewritten from time to time." end
  if d.failure then list[#list + 1] = "The run did not reach its end: " .. d.failure end
  if d.dim and d.dim < 3 then
    list[#list + 1] = string.format("This is a %d-D run: percolation and the prefactors of times differ from 3-D material.", d.dim)
  end
  for _, w in ipairs(d.warnings or {}) do list[#list + 1] = w:sub(1, 1):upper() .. w:sub(2) .. "." end
  local s = d.state
  if s and (s.log_steps or 0) > 0 then
    list[#list + 1] = string.format("In %d steps a composition came so near to a pure component that the logarithm's smooth extension was used (lowest argument %s).", s.log_steps, text.number(s.log_lowest or 0))
  end
  return list
end

local function verdict(d)
  local out = { '<div class="verdict"><p><strong>Numerically converged:</strong> ', escape(d.converged), "</p><p><strong>Checked against measurements:</strong> ", escape(d.measured), "</p></div>" }
  for _, w in ipairs(warnings(d)) do out[#out + 1] = '<div class="verdict warning"><p>' .. escape(w) .. "</p></div>" end
  return table.concat(out)
end

local function what_was_run(d)
  local out = { "<h2>What was run</h2><table>" }
  local function row(a, b) out[#out + 1] = "<tr><th scope=\"row\">" .. escape(a) .. "</th><td style=\"text-align:left\">" .. escape(b) .. "</td></tr>" end
  row("script", d.script)
  if d.grid then
    local length = {}
    for a, n in ipairs(d.grid.cells) do length[a] = text.length(n * d.grid.spacing[a], d.real_units) end
    row("box", table.concat(d.grid.cells, " x ") .. " cells, " .. table.concat(length, " x ") .. ", walls " .. table.concat(d.grid.walls, ", "))
    row("cell", text.length(d.grid.spacing[1], d.real_units))
    row("fields", table.concat(d.fields, ", "))
  end
  for _, i in ipairs(d.inputs or {}) do
    row("input " .. i.name, (type(i.value) == "number" and text.number(i.value) or tostring(i.value)) .. (i.meaning and " - " .. i.meaning or "") .. (i.given and " (from the command line)" or ""))
  end
  if d.seeds and #d.seeds > 0 then
    local t = {}
    for i, s in ipairs(d.seeds) do t[i] = string.format("%d", s) end
    row("seeds of noise", table.concat(t, ", "))
  end
  out[#out + 1] = "</table>"
  if d.energy then out[#out + 1] = "<p class=\"soft\">Energy density</p><pre>" .. escape(d.energy) .. "</pre>" end
  return table.concat(out)
end

local function stages(d, rows)
  if not d.stages or #d.stages == 0 then return "" end
  local out = { '<h2>Stages</h2><div class="scroll"><table><tr><th scope="col">stage</th><th scope="col">from</th><th scope="col">to</th>' }
  local T = d.stages[1].T0 ~= nil
  if T then out[#out + 1] = '<th scope="col">temperature in</th><th scope="col">out</th>' end
  for i = 4, #d.columns do out[#out + 1] = '<th scope="col">' .. escape(d.columns[i].name .. unit_text(d.columns[i])) .. "</th>" end
  out[#out + 1] = "</tr>"
  for _, s in ipairs(d.stages) do
    out[#out + 1] = "<tr><td>" .. escape(s.name ~= "" and s.name or "run") .. "</td><td>" .. escape(text.time(s.from, d.real_units)) .. "</td><td>" .. escape(text.time(s.upto, d.real_units)) .. "</td>"
    if T then out[#out + 1] = "<td>" .. text.number(s.T0 or 0 / 0) .. "</td><td>" .. text.number(s.T1 or 0 / 0) .. "</td>" end
    local row = rows[s.last] or {}
    for i = 4, #d.columns do out[#out + 1] = "<td>" .. (type(row[i]) == "number" and text.number(row[i]) or "&ndash;") .. "</td>" end
    out[#out + 1] = "</tr>"
  end
  out[#out + 1] = '</table></div><p class="soft">Values at the end of each stage. A dash: not defined yet (for a wavelength: no wave stands out of the noise).</p>'
  return table.concat(out)
end

local function pictures(d, load)
  if not d.pictures or #d.pictures == 0 then return "" end
  local out, every = { '<h2>Pictures</h2><div class="strip" tabindex="0" aria-label="pictures in the order of time">' }, math.max(1, #d.pictures // 24)
  for i, p in ipairs(d.pictures) do
    if (i - 1) % every == 0 or i == #d.pictures then
      local ok, bytes = pcall(load, p.file)
      if ok then
        out[#out + 1] = string.format('<figure><img alt="%s" src="data:image/png;base64,%s"><figcaption>%s</figcaption></figure>', escape(p.name .. " at " .. p.title), base64(bytes), escape(p.title))
      end
    end
  end
  out[#out + 1] = "</div>"
  return table.concat(out)
end

local function charts(d, rows)
  local out = {}
  for i = 4, #(d.columns or {}) do
    if not d.columns[i].text then out[#out + 1] = chart(d, rows, i) end
  end
  if #out == 0 then return "" end
  return '<h2>Charts</h2><div class="charts">' .. table.concat(out) .. '</div><p class="soft">All numbers are in ledger.csv.</p>'
end

local function tables(d)
  if not d.tables or #d.tables == 0 then return "" end
  local out = { '<h2>Tables</h2><table><tr><th scope="col">measurement</th><th scope="col">file in the run folder</th></tr>' }
  for _, t in ipairs(d.tables) do out[#out + 1] = "<tr><td>" .. escape(t.measurement) .. "</td><td>" .. escape(t.file) .. "</td></tr>" end
  out[#out + 1] = "</table>"
  return table.concat(out)
end

local function health(d)
  local s = d.state
  if not s then return "" end
  local out = { "<h2>Numerical health</h2><table>" }
  local function row(a, b) out[#out + 1] = "<tr><th scope=\"row\">" .. escape(a) .. "</th><td>" .. escape(b) .. "</td></tr>" end
  row("steps accepted", string.format("%d", s.steps))
  row("steps rejected", string.format("%d", s.rejected))
  row("right-hand sides", string.format("%d", s.evaluations))
  row("step sizes", text.time(s.step_min or 0 / 0, d.real_units) .. " to " .. text.time(s.step_max or 0 / 0, d.real_units))
  row("largest rise of the energy in a step where it can only fall", text.number(math.max(0, s.energy_rise or 0)) .. " (relative)")
  row("movement of the mean of conserved fields", text.number(s.mean_drift or 0 / 0))
  out[#out + 1] = "</table>"
  return table.concat(out)
end

local cautions = [[
<h2>Cautions</h2>
<p>This is a prediction of a model, not the qualification of a part. <strong>Not modelled</strong>: discontinuous and grain-boundary precipitation, other phases, ordering unless the script has it, segregation, precipitate-free zones, residual stress. A result that looks safe says nothing about these; toughness is to be tested on the real section.</p>
<p>The schedule is a trial schedule, to be verified with witness specimens and load thermocouples. Times outside the range in which the model was calibrated are not for service life, inspection intervals or pressure equipment.</p>
<p>Furnace and quench work has its hazards: hot surfaces and radiant heat, burns, steam and boiling or burning of quench media, fumes, protective gases that suffocate or ignite, molten salts, pressurised or stored energy, moving loads. Local codes and licensed practice come before anything written here.</p>
]]

local function provenance(d)
  local m = d.machine or {}
  return "<h2>Provenance</h2><p class=\"soft\">" .. escape(string.format("%s, %s, %s, %s; %s cores, %s threads; %s; wall time %s s.", d.program or "", m.fftw or "", m.lua or "", m.system or "",
    m.cores or "?", d.threads or "?", d.date or "", text.number(d.wall_time or 0 / 0))) .. " The script is kept as script.lua, " .. (d.sources and #d.sources > 0 and "the files it read in inputs/, " or "") .. "the inputs and seeds in summary.json.</p>"
end

---The page for a summary `d` and ledger rows; load(file) gives a picture's bytes.
function M.page(d, rows, load)
  local title = (d.script or "run"):gsub("%.lua$", "")
  return table.concat { "<!DOCTYPE html>\n<html lang=\"en\"><head><meta charset=\"utf-8\"><meta name=\"viewport\" content=\"width=device-width, initial-scale=1\"><title>", escape(title),
    "</title><style>", style, "</style></head><body><main><h1>", escape(title), "</h1><p class=\"soft\">", escape(d.program or ""), ", ", escape(d.date or ""), "</p>",
    verdict(d), what_was_run(d), stages(d, rows), pictures(d, load), charts(d, rows), tables(d), health(d), cautions, provenance(d), "</main></body></html>\n" }
end

---Rows of a ledger as written by core: text columns as text, empty cells as false.
function M.parse_ledger(csv, columns)
  local rows, first = {}, true
  for line in csv:gmatch("([^\n]*)\n") do
    if first then first = false
    else
      local row, i = {}, 1
      while i <= #line + 1 do
        local cell, j
        if line:sub(i, i) == '"' then
          cell, j = line:match('^"(.-)"()', i)
          while cell and line:sub(j, j) == '"' do -- a doubled quote inside
            local more, k = line:match('^"(.-)"()', j)
            if not more then break end
            cell, j = cell .. '"' .. more, k
          end
          j = (j or #line + 1) + 1
        else
          cell, j = line:match("^([^,]*),?()", i)
          if i == #line + 1 then cell = "" end
        end
        local c = columns[#row + 1]
        row[#row + 1] = cell == "" and false or (c and c.text and cell) or tonumber(cell) or cell or false
        if j <= i then break end
        i = j
        if #row >= #columns then break end
      end
      rows[#rows + 1] = row
    end
  end
  return rows
end

return M
