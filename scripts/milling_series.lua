-- SPDX-License-Identifier: GPL-3.0-or-later
-- Sizes and strains along a series of powders of one material, for example from a mill.
local lw = require "linewright"

local job = lw.recipe {
  title  = "Size and strain along a series",
  inputs = {
    scans       = { kind = "glob", help = "scans of the series, for example powder_*.xy" },
    material    = { kind = "name", help = "material: a name from standards/materials, or a file" },
    calibration = { kind = "file", help = "calibration.json of the instrument" },
    noise       = { kind = "text", default = "auto", choices = { "auto", "counts", "sigma", "scaled" },
                    help = "scaled: intensities are not counts, their noise is estimated from the scan" },
    uncertainty = { kind = "text", default = "analytic", choices = { "analytic", "monte_carlo", "bootstrap" },
                    help = "monte_carlo, bootstrap: the whole chain again for drawn counts, for each scan" },
    realisations = { kind = "number", default = 200, least = 2, most = 1e6, help = "of Monte Carlo or bootstrap" },
    seed        = { kind = "number", default = 1, least = 0, most = 2147483647, help = "of the realisations" },
    workers     = { kind = "text", default = "1",
                    help = "processes that share the scans: a number, or auto for one a processor core" },
  },
}

local instrument = lw.load_calibration(job.calibration)
local powder     = lw.material(job.material)

-- Milling time from the file's name (nickel_milled_08h.xy: 8); without one, the place in the series.
local function hours(path, place)
  local name = path:match "[^/]+$"
  return tonumber(name:match "(%d+%.?%d*)h") or place
end

local function analyse(path, scan)
  local lines    = lw.fit_lines(scan, powder:reflections(scan), { instrument = instrument })
  local profiles = lw.deconvolve(lines, { method = "convolution" })
  local results  = lw.separate(profiles, {
    uncertainty = job.uncertainty, realisations = job.realisations, seed = job.seed,
  })
  return { name = path:match "[^/]+$", lines = lines, profiles = profiles, results = results }
end

local function read(path)
  return lw.read_scan(path, { radiation = instrument.radiation, noise = job.noise })
end

-- Each powder is done once: a run that was stopped goes on where it was. The key names what the analysis
-- depends on.
local function key(path)
  local words = { read(path).hash, instrument.hash, job.noise, job.uncertainty, tostring(powder) }
  if job.uncertainty ~= "analytic" then
    words[#words + 1] = ("%d %d"):format(job.realisations, job.seed)
  end
  return (table.concat(words, " "):gsub('["\\\n]', " "))
end

local fresh = {} -- what this process analysed itself, by path: its fits are drawn
local function analyse_once(path)
  local analysed = analyse(path, read(path))
  local lines, results = analysed.lines, analysed.results
  fresh[path] = analysed
  return { goodness_of_fit = lines.fit.goodness_of_fit, lines = results.lines, methods = results.methods,
           lattice = results.lattice, agreement = results.agreement, notes = results.notes,
           budget = results.budget, uncertainty = results:get "uncertainty" }
end

-- One powder after the other, or several at a time. One that can't be analysed is told and left out; the others go on.
local entries, rows, failed, shown = {}, {}, {}, {}
for place, path, known, message in job:each(job.scans, key, analyse_once, { workers = job.workers }) do
  if known then
    local wh = known.methods.williamson_hall
    local row = {
      scan = path:match "[^/]+$", milling_time_h = hours(path, place),
      size_volume = wh.size_volume, strain_rms = wh.strain_rms, strain_apparent = wh.strain_apparent,
      whole_pattern_size = known:get "methods.whole_pattern.size_volume",
      whole_pattern_strain = known:get "methods.whole_pattern.strain_rms",
      lattice_a = known:get "lattice.a", goodness_of_fit = known.goodness_of_fit,
    }
    rows[#rows + 1] = row
    entries[#entries + 1] = { scan = path, milling_time_h = row.milling_time_h, lines = known.lines,
                              methods = known.methods, lattice = known.lattice,
                              agreement = known.agreement, notes = known.notes,
                              budget = known.budget, uncertainty = known:get "uncertainty" }
    shown[#shown + 1] = fresh[path] or { name = row.scan, results = known }
    print(("%-28s size %-16s strain %s"):format(row.scan, tostring(row.size_volume), tostring(row.strain_rms)))
  else
    entries[#entries + 1] = { scan = path, error = message }
    failed[#failed + 1] = { scan = path, error = message }
    print(("%-28s %s"):format(path:match "[^/]+$", message))
  end
end
if #rows == 0 then
  error("no scan of the series could be analysed: " .. failed[1].error)
end
table.sort(rows, function(a, b) return a.milling_time_h < b.milling_time_h end)
local columns = { "scan", "milling_time_h", "size_volume", "strain_rms", "strain_apparent", "whole_pattern_size",
                  "whole_pattern_strain", "lattice_a", "goodness_of_fit" }
job:write_csv("series.csv", rows, columns)

-- Size and strain against time; limits are left out of the curves and stay in the table.
local function series_of(field)
  local x, y = {}, {}
  for _, row in ipairs(rows) do
    if row[field] and row[field].kind == "value" then
      x[#x + 1], y[#y + 1] = row.milling_time_h, row[field]
    end
  end
  return x, y
end
local function against_time(field, whole_pattern, title, label, unit)
  local curves = {}
  for _, method in ipairs { { "Williamson-Hall", field }, { "whole pattern", whole_pattern } } do
    local x, y = series_of(method[2])
    if #x >= 2 then
      curves[#curves + 1] = { kind = "points", label = method[1], x = x, y = y }
      curves[#curves + 1] = { kind = "line", x = x, y = y }
    end
  end
  if #curves == 0 then return nil end
  return lw.figure {
    name = field .. "_against_time", title = title,
    caption = title .. ", with standard uncertainties: counting, calibration and choice of form; for milled metals the "
      .. "whole pattern assumes less than the straight line.",
    x = { label = "milling time", unit = "h" }, y = { label = label, unit = unit }, series = curves,
  }
end

local items = {
  title = "Milling series: " .. powder.title, subtitle = ("%d powders"):format(#rows),
}
if powder.hazard ~= "" then
  items[#items + 1] = { caution = powder.hazard, title = "Handling the powder" }
end
items[#items + 1] = { heading = "Along the series" }
items[#items + 1] = { table = rows, columns = columns, caption = "Volume-weighted size and strain: first by "
  .. "Williamson-Hall, then by the whole pattern" }
for _, figure in ipairs {
  against_time("size_volume", "whole_pattern_size", "Size against milling time", "volume-weighted size", "nm") or false,
  against_time("strain_rms", "whole_pattern_strain", "Strain against milling time", "rms strain", "") or false,
} do
  if figure then items[#items + 1] = figure end
end
if #failed > 0 then
  items[#items + 1] = { table = failed, columns = { "scan", "error" }, caption = "Not analysed, and why" }
end
-- Of each powder what matters, the rest folded away; all of it is in results.json.
for _, one in ipairs(shown) do
  items[#items + 1] = { heading = one.name, prefix = one.name:gsub("%.%w+$", "") }
  items[#items + 1] = { brief = one.results }
  items[#items + 1] = one.lines and { brief = one.lines }
                      or "An earlier run or another worker analysed it; its fit is not drawn here."
  items[#items + 1] = { details = one.results }
end
job:write({ scans = entries }) -- before the figures, which take the longest
job:write(lw.report(items))
