-- SPDX-License-Identifier: GPL-3.0-or-later
-- One powder, every method, and every way of taking the instrument out: do they say the same?
local lw = require "linewright"

local job = lw.recipe {
  title  = "Methods compared on one powder",
  inputs = {
    scan        = { kind = "file", help = "scan of the powder" },
    material    = { kind = "name", help = "material: a name from standards/materials, or a file" },
    calibration = { kind = "file", help = "calibration.json of the instrument" },
    ways        = { kind = "list", default = { "convolution", "stokes", "physical" },
                    help = "ways of taking the instrument out" },
    standard    = { kind = "file", default = "",
                    help = "scan of the calibration's standard: stokes, tikhonov, richardson_lucy and \z
                    maximum_entropy take the instrument as measured on its nearest lines" },
    methods     = { kind = "list", default = "all", help = "methods to run" },
    uncertainty = { kind = "text", default = "analytic", choices = { "analytic", "monte_carlo", "bootstrap" },
                    help = "monte_carlo, bootstrap: the whole chain again for drawn counts; ways other than "
                      .. "convolution take their time" },
    realisations = { kind = "number", default = 200, least = 2, most = 1e6, help = "of Monte Carlo or bootstrap" },
    seed        = { kind = "number", default = 1, least = 0, most = 2147483647, help = "of the realisations" },
  },
}

local instrument = lw.load_calibration(job.calibration)
local powder     = lw.material(job.material)
local scan       = lw.read_scan(job.scan, { radiation = instrument.radiation })

local valid  = instrument.valid_two_theta
local margin = 0.05 * (valid[2] - valid[1])
scan = scan:crop(math.max(valid[1] - margin, scan.two_theta[1]), math.min(valid[2] + margin, scan.two_theta[scan.n]))

-- The standard's lines, and the ways that let them stand for the instrument; the others fit shapes.
local neighbours, measured = nil, { stokes = true, tikhonov = true, richardson_lucy = true, maximum_entropy = true }
if job.standard then
  local any = false
  for _, way in ipairs(job.ways) do
    any = any or measured[way]
  end
  if not any then
    error("none of the ways (" .. table.concat(job.ways, ", ") .. ") can take the standard's measured lines; " ..
      "add stokes, tikhonov, richardson_lucy or maximum_entropy to ways=, or leave standard= out")
  end
  local standard = lw.standard(instrument.standard.name)
  local perfect  = lw.read_scan(job.standard, { radiation = instrument.radiation })
  neighbours = lw.fit_lines(perfect, standard:reflections(perfect), {
    widths = "smooth", axial = instrument.geometry == "capillary" and "finger_cox_jephcoat" or "soller",
  })
end

local lines = lw.fit_lines(scan, powder:reflections(scan), { instrument = instrument })
local items = { title = "Methods compared: " .. powder.title, subtitle = scan.file }
if powder.hazard ~= "" then
  items[#items + 1] = { caution = powder.hazard, title = "Handling the powder" }
end

-- One row a method and way; a method that reads the counts themselves says the same whatever the way, so only once.
local rows, record, shown = {}, {}, {}
for _, way in ipairs(job.ways) do
  local profiles = lw.deconvolve(lines, {
    method = way, standard = measured[way] and neighbours or nil,
    accept_refold = true, -- a failed refold is told, not hidden
  })
  local results  = lw.separate(profiles, {
    methods = job.methods, uncertainty = job.uncertainty, realisations = job.realisations, seed = job.seed,
  })
  record[way] = results
  for name, method in pairs(results.methods:table()) do
    local first = not shown[name]
    shown[name] = true
    if not method.not_applied and (name ~= "whole_pattern" or first) then
      rows[#rows + 1] = {
        method = method.title, way = name == "whole_pattern" and "none: the counts" or way,
        size_volume = method.size_volume, size_area = method.size_area, strain_rms = method.strain_rms,
      }
    end
  end
end
table.sort(rows, function(a, b) return a.method .. a.way < b.method .. b.way end)
for _, row in ipairs(rows) do
  print(("%-26s %-18s %-22s %-22s %s"):format(row.method, row.way, tostring(row.size_volume or "-"),
    tostring(row.size_area or "-"), tostring(row.strain_rms or "-")))
end

-- Values with 2 u beside each other, a field a figure, the ways of each method side by side.
local function compared(field, label, unit)
  local series, by_way, shift, place, count, names = {}, {}, {}, {}, 0, {}
  for _, row in ipairs(rows) do
    local q = row[field]
    if q and q.kind == "value" and q.value == q.value then
      if not place[row.method] then
        count = count + 1
        place[row.method] = count
        names[#names + 1] = { x = count, y = q.value, text = row.method:match "^[^(]*" }
      end
      local one = by_way[row.way]
      if not one then
        one = { kind = "points", label = row.way .. ", 2 u", x = {}, y = {}, u_y = {} }
        by_way[row.way], series[#series + 1] = one, one
        shift[one] = 0.12 * (#series - 2)
      end
      local n = #one.x + 1
      one.x[n], one.y[n], one.u_y[n] = place[row.method] + shift[one], q.value, 2 * q.u
    end
  end
  return count > 1 and lw.figure {
    name = "compared_" .. field, title = label:gsub("^%l", string.upper) .. " by method",
    caption = label .. " with two standard uncertainties, for each method and way of taking the instrument out.",
    x = { label = "method" }, y = { label = label, unit = unit }, series = series, notes = names,
  }
end

if neighbours then
  items[#items + 1] = "Stokes, tikhonov, richardson_lucy and maximum_entropy take the instrument as measured on the "
    .. "lines of " .. job.standard .. "; the other ways take the calibration's smooth functions."
end
items[#items + 1] = { table = rows, caption = "What each method says, by how the instrument was taken out" }
for _, figure in ipairs {
  compared("size_volume", "volume-weighted size", "nm") or false,
  compared("size_area", "area-weighted size", "nm") or false,
  compared("strain_rms", "rms strain", "") or false,
} do
  if figure then items[#items + 1] = figure end
end
local main = record[job.ways[1]]
items[#items + 1] = main
job:write({
  lines = main.lines, methods = main.methods, lattice = main.lattice, agreement = main.agreement, notes = main.notes,
  budget = main.budget, uncertainty = main:get "uncertainty",
  ways = record,
}, lw.report(items))
