-- SPDX-License-Identifier: GPL-3.0-or-later
-- Benchmark P1 as a user runs it: read the scan, fit all lines, tell chi-square.
local lw = require "linewright"
local job = lw.recipe {
  title  = "All lines of a scan",
  inputs = { scan = { kind = "file", help = "scan of LaB6, ideal Cu K-alpha doublet" } },
}
local doublet = lw.radiation {
  name = "doublet",
  components = { { wavelength_nm = 0.15405929, share = 2 / 3 }, { wavelength_nm = 0.15444274, share = 1 / 3 } },
}
local scan   = lw.read_scan(job.scan, { radiation = doublet })
local fitted = lw.fit_lines(scan, lw.standard("lab6-660c"):reflections(scan), {
  widths = "free", axis = "two_theta", intensity_factor = "none", background_terms = 8, weights = "observed",
})
print(#fitted, fitted.fit.chi2)
