-- SPDX-License-Identifier: GPL-3.0-or-later
-- Sizes and strains of one powder, against a calibrated instrument.
local lw = require "linewright"

local job = lw.recipe {
  title  = "Size and strain of a powder",
  inputs = {
    scan        = { kind = "file", help = "scan of the powder" },
    material    = { kind = "name", help = "material: a name from standards/materials, or a file" },
    calibration = { kind = "file", help = "calibration.json of the instrument" },
    background  = { kind = "file", default = "", help = "scan of the empty holder or capillary" },
    deconvolve  = { kind = "text", default = "convolution",
                    choices = { "convolution", "physical", "stokes", "tikhonov", "richardson_lucy", "maximum_entropy" },
                    help = "how the instrument is taken out" },
    standard    = { kind = "file", default = "",
                    help = "scan of the calibration's standard: the instrument as measured on its nearest lines, \z
                    instead of smooth functions (not with convolution or physical, which fit shapes)" },
    methods     = { kind = "list", default = "all", help = "methods to run" },
    uncertainty = { kind = "text", default = "analytic", choices = { "analytic", "monte_carlo", "bootstrap" },
                    help = "monte_carlo: the whole chain again for drawn counts and calibrations; bootstrap: with "
                      .. "blocks of the residuals, where the shape misses the data" },
    realisations = { kind = "number", default = 200, least = 2, most = 1e6,
                     help = "of Monte Carlo or bootstrap: 200 give every u to 5 %, 5000 to 1 %" },
    seed        = { kind = "number", default = 1, least = 0, most = 2147483647, help = "of the realisations" },
    low         = { kind = "number", default = "", unit = "deg", least = 0, most = 180, help = "first 2theta to use" },
    high        = { kind = "number", default = "", unit = "deg", least = 0, most = 180, help = "last 2theta to use" },
    noise       = { kind = "text", default = "auto", choices = { "auto", "counts", "sigma", "scaled" },
                    help = "scaled: intensities are not counts, their noise is estimated from the scan" },
  },
}

local instrument = lw.load_calibration(job.calibration)
local powder     = lw.material(job.material)
local reading    = { radiation = instrument.radiation, noise = job.noise }
local scan       = lw.read_scan(job.scan, reading)
local holder     = job.background and lw.read_scan(job.background, reading) or nil

-- Only where the instrument is known, unless the angles are given.
local valid = instrument.valid_two_theta
local margin = 0.05 * (valid[2] - valid[1])
local low   = job.low or math.max(valid[1] - margin, scan.two_theta[1])
local high  = job.high or math.min(valid[2] + margin, scan.two_theta[scan.n])
scan = scan:crop(low, high)

-- The standard's lines, where they are to stand for the instrument themselves.
local neighbours
if job.standard then
  local standard = lw.standard(instrument.standard.name)
  local perfect  = lw.read_scan(job.standard, reading)
  neighbours = lw.fit_lines(perfect, standard:reflections(perfect), {
    widths = "smooth", axial = instrument.geometry == "capillary" and "finger_cox_jephcoat" or "soller",
  })
end

local lines    = lw.fit_lines(scan, powder:reflections(scan), {
  instrument = instrument, background = holder,
  polarised  = instrument.geometry == "capillary" and 0.05 or 0.5,
})
local profiles = lw.deconvolve(lines, { method = job.deconvolve, standard = neighbours }) -- refolded, or it stops here
local results  = lw.separate(profiles, {                               -- every method that applies
  methods = job.methods, uncertainty = job.uncertainty, realisations = job.realisations, seed = job.seed,
})
print(results)

local items = { title = "Size and strain: " .. powder.title, subtitle = scan.file }
if powder.hazard ~= "" then
  items[#items + 1] = { caution = powder.hazard, title = "Handling the powder" }
end
for _, item in ipairs { results, profiles, lines } do
  items[#items + 1] = item
end
job:write_cif("fit.cif", lines)
job:write(results) -- before the figures, which take the longest
job:write(lw.report(items))
