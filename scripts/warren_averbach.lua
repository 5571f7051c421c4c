-- SPDX-License-Identifier: GPL-3.0-or-later
-- Size and strain of one powder at every column length, from orders of a direction.
local lw = require "linewright"

local job = lw.recipe {
  title  = "Warren-Averbach analysis of a powder",
  inputs = {
    scan        = { kind = "file", help = "scan of the powder" },
    material    = { kind = "name", help = "material: a name from standards/materials, or a file" },
    calibration = { kind = "file", help = "calibration.json of the instrument" },
    deconvolve  = { kind = "text", default = "stokes",
                    choices = { "stokes", "tikhonov", "maximum_entropy", "physical", "convolution" },
                    help = "how the coefficients are made: physical and convolution are fitted shapes" },
    standard    = { kind = "file", default = "",
                    help = "scan of the calibration's standard: the instrument as measured on its nearest lines, \z
                    instead of smooth functions (not with fitted shapes)" },
    form        = { kind = "text", default = "log", choices = { "log", "linear" },
                    help = "straight lines through ln A (log) or through A (linear)" },
    lines       = { kind = "list", default = "", help = "lines to take as one set (111,220,311 or all): isotropic" },
    length_most = { kind = "number", default = "", unit = "nm", least = 0, help = "longest column length to use" },
  },
}

local instrument = lw.load_calibration(job.calibration)
local powder     = lw.material(job.material)
local scan       = lw.read_scan(job.scan, { radiation = instrument.radiation })

local valid  = instrument.valid_two_theta
local margin = 0.05 * (valid[2] - valid[1])
scan = scan:crop(math.max(valid[1] - margin, scan.two_theta[1]), math.min(valid[2] + margin, scan.two_theta[scan.n]))

-- The standard's lines, where they are to stand for the instrument themselves.
local neighbours
if job.standard then
  local standard = lw.standard(instrument.standard.name)
  local perfect  = lw.read_scan(job.standard, { radiation = instrument.radiation })
  neighbours = lw.fit_lines(perfect, standard:reflections(perfect), {
    widths = "smooth", axial = instrument.geometry == "capillary" and "finger_cox_jephcoat" or "soller",
  })
end

local lines    = lw.fit_lines(scan, powder:reflections(scan), { instrument = instrument })
local profiles = lw.deconvolve(lines, { method = job.deconvolve, standard = neighbours })
local result   = lw.warren_averbach(profiles, {
  form = job.form, lines = job.lines or nil, length_most = job.length_most or nil,
})
local rest     = lw.separate(profiles, { methods = "lattice" }) -- lines and cell, for the record
print(result)

local items = { title = "Warren-Averbach: " .. powder.title, subtitle = scan.file }
if powder.hazard ~= "" then
  items[#items + 1] = { caution = powder.hazard, title = "Handling the powder" }
end
for _, item in ipairs { result, profiles, lines } do
  items[#items + 1] = item
end
job:write({
  lines = rest.lines, methods = { warren_averbach = result }, lattice = rest.lattice, agreement = rest.agreement,
  notes = rest.notes,
}, lw.report(items))
