-- SPDX-License-Identifier: GPL-3.0-or-later
-- Calibrates a diffractometer from the scan of a reference material.
local lw = require "linewright"

local job = lw.recipe {
  title  = "Calibration of a diffractometer",
  inputs = {
    scan      = { kind = "file", help = "scan of the reference material" },
    standard  = { kind = "name", help = "reference material: a name from standards/reference, or a file" },
    radiation = { kind = "name", help = "Cu Ka, Co Ka ...; or a wavelength, 0.05168nm" },
    previous  = { kind = "file", default = "", help = "calibration.json of the time before, to compare with" },
    geometry  = { kind = "text", default = "auto", choices = { "auto", "reflection", "capillary" },
                  help = "flat specimen in reflection, or capillary; auto: capillary for a plain wavelength" },
    profile   = { kind = "text", default = "empirical", choices = { "empirical", "optical" },
                  help = "optical: the convolution of the geometry's aberrations, refined to the scan (reflection)" },
    radius    = { kind = "number", default = "", unit = "mm", least = 10, most = 2000,
                  help = "goniometer radius; left out: as the scan's header says, else 200" },
    noise     = { kind = "text", default = "auto", choices = { "auto", "counts", "sigma", "scaled" },
                  help = "scaled: intensities are not counts, their noise is estimated from the scan" },
  },
}

-- The scan, and where the certificate puts the lines.
local standard = lw.standard(job.standard)
local scan     = lw.read_scan(job.scan, { radiation = job.radiation, noise = job.noise })
local lines    = standard:reflections(scan)

-- All lines at once, their widths smooth functions of the angle. A tube's divergent beam needs the axial
-- divergence of both beams; the parallel beam of a storage ring only that of the diffracted one.
local capillary = job.geometry == "capillary" or (job.geometry == "auto" and scan.radiation.is_plain)
local fitted = lw.fit_lines(scan, lines, {
  widths    = "smooth",
  axial     = capillary and "finger_cox_jephcoat" or "soller",
  polarised = capillary and 0.05 or 0.5,
})
-- Each line by itself as well: these widths show whether the smooth functions do the instrument justice.
local single = lw.fit_lines(scan, lines, {
  widths    = "free",
  axial     = capillary and "finger_cox_jephcoat" or "soller",
  polarised = capillary and 0.05 or 0.5,
})
local instrument = lw.calibrate(fitted, standard, {
  geometry          = capillary and "capillary" or "reflection",
  goniometer_radius = job.radius or nil,
  profile           = job.profile,
})
print(instrument)

-- What changed since the time before.
local changes
if job.previous then
  local before = lw.load_calibration(job.previous)
  if math.abs(before.radiation.wavelength_nm / instrument.radiation.wavelength_nm - 1) > 1e-6 then
    error(("%s was made with %s, this scan with %s: nothing to compare"):format(
      job.previous, before.radiation.name, instrument.radiation.name))
  end
  changes = {}
  local function compare(quantity, was, is)
    changes[#changes + 1] = {
      quantity = quantity, before = was, after = is, difference = is - was,
      in_units_of_u = tonumber(("%.1f"):format(is:pull(was))),
    }
  end
  for name, is in pairs(instrument.record.aberrations) do
    local was = before.record.aberrations[name]
    if was then compare(name, was, is) end
  end
  local low  = math.max(before.valid_two_theta[1], instrument.valid_two_theta[1])
  local high = math.min(before.valid_two_theta[2], instrument.valid_two_theta[2])
  for _, share in ipairs { 0.1, 0.5, 0.9 } do
    local angle = math.floor(low + share * (high - low) + 0.5)
    compare(("FWHM at %d deg"):format(angle), before:profile_at(angle).fwhm, instrument:profile_at(angle).fwhm)
  end
  print(lw.result { changes_since_the_time_before = changes })
end

-- Width against angle with its band, and where the lines stand against the certificate.
local curve = { x = {}, fwhm = {}, low = {}, high = {} }
for angle = instrument.valid_two_theta[1], instrument.valid_two_theta[2], 1.5 do
  local fwhm = instrument:profile_at(angle).fwhm
  local n = #curve.x + 1
  curve.x[n], curve.fwhm[n] = angle, fwhm.value
  curve.low[n], curve.high[n] = fwhm.value - 2 * fwhm.u, fwhm.value + 2 * fwhm.u
end
local points = { x = {}, fwhm = {} }
for _, line in ipairs(single) do
  if line.supported and line.fwhm.u < 0.5 * line.fwhm.value then
    points.x[#points.x + 1], points.fwhm[#points.fwhm + 1] = line.two_theta.value, line.fwhm
  end
end
local residuals = { x = {}, before = {}, after = {} }
for i, line in ipairs(instrument.record.lines) do
  residuals.x[i], residuals.before[i], residuals.after[i] = line.two_theta.value, line.difference, line.residual
end
local widths_figure = lw.figure {
  name = "instrument_width", title = "Width of the instrument at one wavelength",
  caption = "FWHM without the spectrum's share: smooth function with its band (2 u), and every line fitted by itself.",
  x = { label = "2theta", unit = "deg" }, y = { label = "FWHM", unit = "deg" },
  series = {
    { kind = "band", label = "2 u", x = curve.x, y = curve.low, high = curve.high },
    { kind = "line", label = "smooth function", x = curve.x, y = curve.fwhm },
    { kind = "points", label = "single lines", x = points.x, y = points.fwhm },
  },
}
local positions_figure = lw.figure {
  name = "positions", title = "Observed minus certified position",
  caption = "As observed, and after the fitted aberrations; error bars contain the certificate's uncertainty.",
  x = { label = "2theta", unit = "deg" }, y = { label = "observed - certified", unit = "deg" },
  series = {
    { kind = "points", label = "as observed", x = residuals.x, y = residuals.before },
    { kind = "points", label = "after the aberrations", x = residuals.x, y = residuals.after },
  },
}

-- The report opens with what protects people.
local items = {
  title = "Calibration of a diffractometer",
  subtitle = ("%s, %s"):format(standard.title, scan.radiation.name),
  { caution = "After work on a tube, shutter or housing the interlocks, warning lights and leakage are checked and "
      .. "released by the licensed radiation-safety officer before the shutter is opened. Local rules come first; a "
      .. "good calibration says nothing about the safety of the beam.", title = "X-rays after maintenance" },
  { heading = "Calibration of the instrument" },
  { brief = instrument },
  widths_figure, positions_figure,
}
if changes then
  items[#items + 1] = { heading = "Since the time before" }
  items[#items + 1] = { table = changes, columns = { "quantity", "before", "after", "difference", "in_units_of_u" },
                        caption = "Before, after, and the difference in units of its u" }
end
items[#items + 1] = { heading = "Fit and record" }
items[#items + 1] = { brief = fitted }
items[#items + 1] = { details = fitted }
items[#items + 1] = { details = instrument }
job:write(instrument) -- before the figures, which take the longest
job:write(lw.report(items))
