-- SPDX-License-Identifier: GPL-3.0-or-later
-- Size distribution and strain of one powder, fitted to the counts of all its lines at once.
local lw = require "linewright"

local job = lw.recipe {
  title  = "Whole pattern of a powder",
  inputs = {
    scan        = { kind = "file", help = "scan of the powder" },
    material    = { kind = "name", help = "material: a name from standards/materials, or a file" },
    calibration = { kind = "file", help = "calibration.json of the instrument" },
    strain      = { kind = "text", default = "auto",
                    choices = { "auto", "none", "constant", "correlated", "gaussian_correlated", "voigt",
                                "dislocations", "knots" },
                    help = "form of strain against column length, knots for a free one; auto weighs all of them" },
    size        = { kind = "text", default = "lognormal", choices = { "lognormal", "histogram" },
                    help = "distribution of diameters: lognormal, or a smoothed histogram without a formula" },
    anisotropy  = { kind = "text", default = "auto", choices = { "auto", "no", "yes" },
                    help = "strain of a cubic crystal depends on direction" },
  },
}

local instrument = lw.load_calibration(job.calibration)
local powder     = lw.material(job.material)
local scan       = lw.read_scan(job.scan, { radiation = instrument.radiation })

local valid  = instrument.valid_two_theta
local margin = 0.05 * (valid[2] - valid[1])
scan = scan:crop(math.max(valid[1] - margin, scan.two_theta[1]), math.min(valid[2] + margin, scan.two_theta[scan.n]))

local lines    = lw.fit_lines(scan, powder:reflections(scan), { instrument = instrument })
local profiles = lw.deconvolve(lines, { method = "convolution", accept_refold = true }) -- a start, no more
local result   = lw.whole_pattern(profiles, { strain = job.strain, size = job.size, anisotropy = job.anisotropy })
local rest     = lw.separate(profiles, { methods = "lattice" }) -- lines and cell, for the record
print(result)

local items = { title = "Whole pattern: " .. powder.title, subtitle = scan.file }
if powder.hazard ~= "" then
  items[#items + 1] = { caution = powder.hazard, title = "Handling the powder" }
end
for _, item in ipairs { result, lines } do
  items[#items + 1] = item
end
job:write({
  lines = rest.lines, methods = { whole_pattern = result }, lattice = rest.lattice, agreement = rest.agreement,
  notes = rest.notes,
}, lw.report(items))
