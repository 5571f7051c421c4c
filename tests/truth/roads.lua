-- SPDX-License-Identifier: GPL-3.0-or-later
-- What the truth specs share: scans with their truths, and the road from scan to results, each walked once.
local lw = require "linewright"
local here = debug.getinfo(1, "S").source:match "^@(.*/)" or "./"
local helper = dofile(here .. "../spec/helper.lua")
local json = dofile(here .. "json.lua")

local roads = { helper = helper, json = json }

local demo, own = helper.root .. "/scripts/demo/", helper.root .. "/tests/data/raytraced/"
local folder_of = {
  lab6_before_service = demo, lab6_after_service = demo, si = own, ceria_size_only = own, ni_strain_only = own,
  tungsten_filings = own,
}
roads.milled = {}
for i, hours in ipairs { "00", "01", "02", "04", "08", "16", "32" } do
  roads.milled[i] = ("nickel_milled_%sh"):format(hours)
  folder_of[roads.milled[i]] = demo
end

function roads.path(name) return folder_of[name] .. name .. ".xy" end

-- f(...) once for the same words.
local function once(f)
  local kept = {}
  return function(...)
    local key = table.concat({ ... }, "|")
    kept[key] = kept[key] or f(...)
    return kept[key]
  end
end

roads.truth = once(function(name) return json(helper.read(own .. name .. ".truth.json")) end)

-- A calibration, as scripts/calibrate.lua makes it.
roads.calibration = once(function(name, standard)
  standard = lw.standard(standard)
  local scan = lw.read_scan(roads.path(name), { radiation = "Cu Ka" })
  local fitted = lw.fit_lines(scan, standard:reflections(scan), { widths = "smooth", axial = "soller" })
  return lw.calibrate(fitted, standard, { geometry = "reflection" })
end)

-- Lines of a powder against the instrument after its service, as scripts/size_strain.lua makes them.
roads.lines = once(function(name, material)
  local instrument = roads.calibration("lab6_after_service", "lab6-660c")
  local powder = lw.material(material)
  local scan = lw.read_scan(roads.path(name), { radiation = instrument.radiation })
  return lw.fit_lines(scan, powder:reflections(scan), { instrument = instrument })
end)

roads.profiles = once(function(name, material, method)
  return lw.deconvolve(roads.lines(name, material), { method = method })
end)

roads.results = once(function(name, material)
  return lw.separate(roads.profiles(name, material, "convolution")):table()
end)

-- Rows by the name of their line; one of several families is found by each of them.
function roads.by_hkl(rows)
  local found = {}
  for _, row in ipairs(rows) do
    for _, hkl in ipairs(row.hkl_families or { row.hkl }) do
      found[type(hkl) == "table" and table.concat(hkl) or hkl] = row
    end
  end
  return found
end

-- A line of the table truth against result, in the log of the tests.
function roads.tell(...)
  print("truth  " .. string.format(...))
end

return roads
