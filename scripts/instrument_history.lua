-- SPDX-License-Identifier: GPL-3.0-or-later
-- The history of an instrument: control charts of its calibrations, and which point broke which rule.
local lw = require "linewright"

local job = lw.recipe {
  title  = "History of a diffractometer",
  inputs = {
    calibrations = { kind = "glob", help = "calibration.json files, for example 'records/*/calibration.json'" },
    services     = { kind = "list", default = {},
                     help = "dates of services, 2026-03-01,2026-09-14: charts begin anew" },
    run_length   = { kind = "number", default = 7, least = 2, most = 30,
                     help = "so many points in a row on one side of the centre are a signal" },
    trend_length = { kind = "number", default = 7, least = 2, most = 30,
                     help = "so many points in a row that only rise, or only fall, are a signal" },
  },
}

-- In order of time: the date in the path, else the date on which the record was made.
local entries = {}
for _, path in ipairs(job.calibrations) do
  local calibration = lw.load_calibration(path)
  local made = calibration.record:get "provenance.date"
  local date = path:match "%d%d%d%d%-%d%d%-%d%d[T0-9:]*" or made or ""
  entries[#entries + 1] = { calibration = calibration, label = date ~= "" and date or path, date = date, path = path }
end
table.sort(entries, function(a, b)
  if a.date ~= b.date then return a.date < b.date end
  return a.path < b.path
end)
for _, service in ipairs(job.services) do
  assert(service:match "^%d%d%d%d%-%d%d%-%d%d", "services: give dates as 2026-03-01, not '" .. service .. "'")
  for _, entry in ipairs(entries) do
    if entry.date >= service then
      entry.after_service = true
      break
    end
  end
end

local list = {}
for i, entry in ipairs(entries) do
  list[i] = { calibration = entry.calibration, label = entry.label, after_service = entry.after_service or false }
end
local history = lw.history(list, { run = job.run_length, trend = job.trend_length })
print(history)

-- One chart a quantity: points, centre and limits of each phase, services and signals noted.
local function chart(of)
  local x, y, series, notes = {}, {}, {}, {}
  for i, point in ipairs(of.points) do
    x[i], y[i] = point.at, point.value
    local words = {}
    if point.after_service and point.at > 1 then words[1] = "service" end
    for _, rule in ipairs(point.rules) do words[#words + 1] = rule:gsub("_", " ") end
    if #words > 0 then
      notes[#notes + 1] = { x = point.at, y = point.value.value, text = table.concat(words, ", ") }
    end
  end
  series[1] = { kind = "points", label = "calibrations", x = x, y = y }
  local first = 1
  for i, phase in ipairs(of.phases) do
    local last = first + math.tointeger(phase.points) - 1
    local span = { x[first] - 0.3, x[last] + 0.3 }
    series[#series + 1] = { kind = "line", label = i == 1 and "centre" or nil, x = span,
                            y = { phase.centre.value, phase.centre.value } }
    series[#series + 1] = { kind = "band", label = i == 1 and "limits" or nil, x = span,
                            y = { phase.lower, phase.lower }, high = { phase.upper, phase.upper } }
    first = last + 1
  end
  local angle = of:get "two_theta"
  local title = of.title .. (angle and (" at %g deg"):format(angle) or "")
  return lw.figure {
    name = of.name, title = title,
    caption = title .. ": calibrations in order of time, bars: standard uncertainty; centre and limits (three standard "
      .. "deviations by the mean moving range) of each phase between services.",
    x = { label = "calibration" }, y = { label = of.title, unit = of.unit }, series = series, notes = notes,
  }
end

local items = {
  title = "History of a diffractometer", subtitle = ("%d calibrations"):format(#entries),
  { verdict = history.verdict, text = history.rules },
  { table = history.calibrations, caption = "The calibrations, in order of time" },
}
if #history.signals > 0 then
  items[#items + 1] = { table = history.signals, caption = "Which point broke which rule" }
else
  items[#items + 1] = "No point broke a rule."
end
for _, of in ipairs(history.charts) do
  items[#items + 1] = chart(of)
end
job:write(history) -- before the figures, which take the longest
job:write(lw.report(items))
