-- What measurements promise in scripts: parts, levels, sides, tables; values that are known by hand.
local function same(a, b, what)
  if a ~= b then error(string.format("%s: %s, expected %s", what or "value", tostring(a), tostring(b)), 2) end
end
local function near(a, b, tolerance, what)
  if not (a and math.abs(a - b) <= tolerance) then error(string.format("%s: %s, expected %.15g", what or "value", tostring(a), b), 2) end
end
local function refused(words, f, ...)
  local ok, message = pcall(f, ...)
  if ok or not message:find(words, 1, true) then error("expected a message with '" .. words .. "', found: " .. tostring(message), 2) end
end

-- stripes of 6 and 10 across x, once around y: cells 48 by 20 of 0.5
local g = grid{ cells = {48, 20}, spacing = 0.5 }
local c = g:field("c", where(above(sin(2*math.pi*(g.x - 0.1)/8), math.cos(math.pi*6/16)), 0.9, 0.1))

-- domains
local d = domains(c)
local all = now(d)
same(all.count, 3, "count"); same(now(d.count), 3, "part"); same(now(domain_count(c)), 3, "domain_count")
near(all.sizes[1], 3*10, 1e-12, "size"); near(now(d.mean), 30, 1e-12, "mean size"); near(now(d.total), 90, 1e-12, "total")
near(now(d.mean_diameter), 2*math.sqrt(30/math.pi), 1e-12, "diameter"); near(now(d.density), 3/240, 1e-15, "density")
same(now(d.percolates_x), 0, "along x"); same(now(d.percolates_y), 1, "along y"); same(all.percolates, "y", "percolates")
same(now(d.mean_aspect), nil, "what winds around has no shape")
near(now(domains(c, { side = "below" }).mean), 50, 1e-12, "the other side")
near(now(phase_fraction(c, { level = "otsu" })), 6/16, 1e-12, "otsu"); near(now(phase_fraction(c, { level = 0.95 })), 0, 0, "number")
near(now(phase_fraction(c, { level = "midway", side = "below" })), 10/16, 1e-12, "midway")
near(now(interface(c, { level = "otsu" })), 6*10, 0.1, "interface at Otsu's level")
same(tostring(d.mean_diameter), "measurement domains(c).mean_diameter", "name"); same(tostring(d:as("particles")), "measurement particles", "as")
refused("has no part 'mean_diametr'; did you mean 'mean_diameter'?", function() return d.mean_diametr end)
refused('"midway" (between the composition peaks) or "otsu", found "middle"', domains, c, { level = "middle" })
refused('has to be "above" or "below", found "left"', domains, c, { side = "left" })

-- chords
local ch = chords(c)
near(now(ch.mean_x), 3, 1e-12, "chords of the stripes"); near(now(chords(c, { side = "below" }).mean_x), 5, 1e-12, "between the stripes")
same(now(ch.mean_y), nil, "lines without an end"); same(now(ch.endless_y), 1.0, "endless"); same(now(ch.endless_x), 0.0, "none endless")
near(now(ch).mean, 3, 1e-12, "all axes"); near(now(ch.deviation_x), 0, 1e-6, "deviation"); same(now(ch).axes[1].number[6], 60.0, "number")

-- topology: three bands around the box
local top = topology(c)
same(now(top.euler), 0.0, "bands are rings"); near(now(top.area), 90, 1e-9, "area"); near(now(top.perimeter), 60, 3.2, "perimeter")
local film = grid{ cells = {40, 30}, spacing = 0.5, walls = "mirror" }
local u = film:field("u", 8 - (film.x^2 + film.y^2)^0.5)
same(now(topology(u, { level = 0 }).euler), 1.0, "a piece in the corner"); near(now(topology(u, { level = 0 }).euler_density), 0.25/300, 1e-12, "a quarter of a disc")
near(now(topology(u, { level = 0, side = "below" }).perimeter), math.pi*4, 0.1, "a quarter of a circle")
same(now(topology(u, { level = 0 })).mean_breadth, nil, "no breadth in 2-D")
local box = grid{ cells = {24, 24, 24}, spacing = 1 }
local b = box:field("b", 8 - ((box.x - 12.1)^2 + (box.y - 12.2)^2 + (box.z - 11.9)^2)^0.5)
local ball = topology(b, { level = 0 })
near(now(ball.volume), 4/3*math.pi*512, 40, "volume"); near(now(ball.surface), 4*math.pi*64, 10, "surface"); near(now(ball.mean_breadth), 16, 0.3, "breadth")
same(now(ball.euler), 1.0, "a ball")

-- spectra and lengths: a wave of 6 along x, half as strong one of 10 along y
local w = g:field("w", 0.5 + 0.2*cos(2*math.pi*g.x/6) + 0.1*cos(2*math.pi*g.y/5))
local s = structure_factor(w)
near(now(s.variance), 0.02 + 0.005, 1e-12, "variance"); near(now(s).first, 2*math.pi/now(s.wavelength), 1e-12, "first moment")
near(now(s.deviation), math.sqrt(now(s.second) - now(s.first)^2), 1e-9, "deviation"); near(now(s.peak_k), 2*math.pi/now(s.peak), 1e-12, "peak")
local way = structure_sectors(w)
near(now(way.share_x), 0.8, 1e-12, "along x"); near(now(way.share_y), 0.2, 1e-12, "along y"); near(now(way.wavelength_x), 6, 0.5, "wavelength along x")
near(now(way.anisotropy), 1, 1e-12, "nothing across"); same(#now(way).share, 12, "sectors")
near(now(correlation(g:field("x wave", 0.1*cos(2*math.pi*g.x/6))).zero), 2.404825557695773*6/(2*math.pi), 1e-6, "first zero of J0")
same(now(correlation(g:field("flat too", 0.5)).zero), nil, "no zero")
local l = now(lengths(c))
near(l.chord_above, 3, 1e-12, "chord"); near(l.chord_below, 5, 1e-12, "chord"); near(l.interface, 240/60, 1e-9, "interface"); near(l.peak, 8, 0.7, "peak")
near(l.diameter_above, now(d.mean_diameter), 1e-12, "diameter"); near(now(lengths(c).wavelength), now(wavelength(c)), 1e-12, "wavelength")
same(now(lengths(g:field("noise", noise.normal{ seed = 4 })).wavelength), nil, "no wavelength in noise")
refused("an even number up to 360, found 5", structure_sectors, c, { sectors = 5 })
refused("leave 'sectors' out", structure_sectors, b, { sectors = 4 })
near(now(structure_sectors(b).share_z), 1/3, 0.01, "a ball has no direction")

-- curvature and orientation, profiles
local disc = grid{ cells = {64, 64}, spacing = 0.5 }
local q = disc:field("q", 0.5 + 0.4*tanh((9 - ((disc.x - 16.2)^2 + (disc.y - 15.7)^2)^0.5)/1.8))
local bent = curvature(q)
near(now(bent.mean), 1/9, 0.001, "1/R"); near(now(bent.integral), 2*math.pi, 0.02, "once around"); near(now(bent.deviation), 0, 0.001, "round")
near(now(curvature(q, { side = "below" }).mean), -1/9, 0.001, "from outside"); same(now(bent.lost), 0.0, "lost")
near(now(orientation(q).anisotropy), 0, 0.01, "a disc faces all ways"); near(now(orientation(q).facing_x), 0.5, 0.01, "half of it")
local facing = now(orientation(c)).facing
near(facing[1], 0.5, 1e-9, "to the right"); near(facing[19], 0.5, 1e-9, "to the left"); same(#facing, 36, "classes")
near(now(orientation(c).preferred_x), 1, 1e-9, "stripes face x"); near(now(orientation(c).anisotropy), 1, 1e-9, "stripes")
local round = curvature(box:field("round", tanh(b/2)), { level = 0 })
near(now(round.mean), 1/8, 0.002, "mean"); near(now(round.gauss), 1/64, 0.001, "Gauss"); near(now(round.gauss_integral), 4*math.pi, 0.3, "Gauss and Bonnet")
refused("has no part 'gauss'", function() return bent.gauss end)
local p = now(profile(w, { axis = "y" }))
near(p.mean[3], 0.5 + 0.1*math.cos(2*math.pi*1.25/5), 1e-12, "mean across y"); near(p.deviation[3], 0.2/math.sqrt(2), 1e-12, "deviation")
near(p.places[3], 1.25, 1e-12, "place"); near(now(profile(w).range), 0.4*math.cos(math.pi/12), 1e-12, "along x")
local line = now(profile(g:field("slope", 1 + 2*g.x - g.y), { from = {1, 1}, to = {4, 5}, points = 11 }))
near(line.mean[11], 1 + 8 - 5, 1e-12, "end"); near(line.mean[6], 1 + 5 - 3, 1e-12, "middle"); near(line.places[11], 5, 1e-12, "length")
local step = disc:field("step", 0.5 + 0.4*(tanh((disc.x - 8)/1.5) - tanh((disc.x - 24)/1.5) - 1))
near(now(interface_width(step, { low = 0.1, high = 0.9 })), 1.5*math.log(9), 1e-3, "10-90 width")
near(now(interface_width(step, { from = {2.25, 3}, to = {14.25, 3}, low = 0.1, high = 0.9 })), 1.5*math.log(9), 1e-3, "along a line")
near(now(interface_width(step)), 1.5*math.log(9), 0.05, "between the peaks")
refused("say both low and high", interface_width, step, { low = 0.1 })
same(now(interface_width(disc:field("even", 0.5))), nil, "no interface")
refused('either axis = "x"', profile, c, { axis = "x", from = {1, 1} }); refused("'to' has to be a list of 2", profile, c, { from = {1, 1}, to = {1} })
refused('has to be x, y, found "z"', profile, c, { axis = "z" })

-- tables and parts in a run
local m = model{ energy = c^2*(1 - c)^2 + 0.5*gradsq(c) }
m:conserve(c, { mobility = 1 })
refused("has no table; its numbers go into m:record", function() m:tabulate{ d.count } end)
refused("has no table; its numbers go into m:record", function() m:tabulate{ top.euler } end)
refused("expected measurements, found field", function() m:tabulate{ c } end)
refused("expected measurements with a table first", function() m:tabulate{ every = 1 } end)
m:record{ every = 1, d, d.mean_diameter, structure_factor(c).peak, top, top.perimeter, ch.mean_x }
m:tabulate{ d, ch, curvature(c), orientation(c), profile(c), profile(c, { from = {0, 0}, to = {4, 4} }):as("slant"), way, correlation(c), lengths(c), structure_sectors(c), domains(c, { side = "below" }):as("matrix"), structure_factor(c), every = 2 }
m:run{ duration = 3 }
refused("before the first m:run", function() m:tabulate{ d } end)
