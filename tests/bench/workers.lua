-- SPDX-License-Identifier: GPL-3.0-or-later
-- Benchmark of job:each: the same fits of one scan as eight items, by one process or several.
local lw = require "linewright"
local job = lw.recipe {
  title  = "Fits shared out",
  inputs = {
    scan    = { kind = "file", help = "scan of LaB6, Cu K-alpha" },
    fits    = { kind = "number", default = 4, help = "fits an item" },
    workers = { kind = "text", default = "1", help = "processes" },
  },
}
local scan        = lw.read_scan(job.scan, { radiation = "Cu Ka" })
local reflections = lw.standard("lab6-660c"):reflections(scan)

local function fit()
  local fitted
  for _ = 1, job.fits do
    fitted = lw.fit_lines(scan, reflections, { widths = "free", background_terms = 8 })
  end
  return { chi2 = fitted.fit.chi2 }
end

for _, item, result, message in job:each({ 1, 2, 3, 4, 5, 6, 7, 8 }, tostring, fit, { workers = job.workers }) do
  print(item, result and result.chi2 or message)
end
