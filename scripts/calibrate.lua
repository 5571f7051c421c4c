-- SPDX-License-Identifier: GPL-3.0-or-later
-- Calibrates a diffractometer from scans of one or more reference materials.
local lw = require "linewright"

local job = lw.recipe {
  title  = "Calibration of a diffractometer",
  inputs = {
    scan      = { kind = "glob", help = "scan of the reference material; several of one state of the instrument: "
                  .. "a.xy,b.xy or a pattern" },
    standard  = { kind = "list", help = "reference material: a name from standards/reference, or a file; one for all "
                  .. "scans, or one for each, with commas between" },
    radiation = { kind = "name", help = "Cu Ka, Co Ka ...; or a wavelength, 0.05168nm" },
    previous  = { kind = "file", default = "", help = "calibration.json of the time before, to compare with" },
    geometry  = { kind = "text", default = "auto", choices = { "auto", "reflection", "capillary" },
                  help = "flat specimen in reflection, or capillary; auto: capillary for a plain wavelength" },
    profile   = { kind = "text", default = "empirical", choices = { "empirical", "optical", "auto" },
                  help = "optical: the convolution of the geometry's aberrations, refined to the scan (reflection); "
                  .. "auto: that, where the header gives the slits and it describes the scan better" },
    radius    = { kind = "number", default = "", unit = "mm", least = 10, most = 2000,
                  help = "goniometer radius; left out: as the scan's header says, else 200" },
    noise     = { kind = "text", default = "auto", choices = { "auto", "counts", "sigma", "scaled" },
                  help = "scaled: intensities are not counts, their noise is estimated from the scan" },
  },
}

if #job.standard ~= 1 and #job.standard ~= #job.scan then
  error(("%d scans and %d standards: give one standard for all scans, or one for each"):format(
    #job.scan, #job.standard))
end

-- A scan, and where the certificate puts the lines. All lines at once, their widths smooth functions of the angle;
-- each line by itself as well: these widths show whether the smooth functions do the instrument justice. A tube's
-- divergent beam needs the axial divergence of both beams; the parallel beam of a storage ring only that of the
-- diffracted one.
local function measure(path, name)
  local standard = lw.standard(name)
  local scan     = lw.read_scan(path, { radiation = job.radiation, noise = job.noise })
  local lines    = standard:reflections(scan)
  local capillary = job.geometry == "capillary" or (job.geometry == "auto" and scan.radiation.is_plain)
  local function fit(widths)
    return lw.fit_lines(scan, lines, {
      widths    = widths,
      axial     = capillary and "finger_cox_jephcoat" or "soller",
      polarised = capillary and 0.05 or 0.5,
    })
  end
  return { scan = scan, standard = standard, capillary = capillary, fitted = fit "smooth", single = fit "free" }
end

local measured, pairs_of = {}, {}
for i, path in ipairs(job.scan) do
  local m = measure(path, job.standard[i] or job.standard[1])
  measured[i], pairs_of[i] = m, { m.fitted, m.standard }
end
local scan = measured[1].scan
local instrument = lw.calibrate(pairs_of, {
  geometry          = measured[1].capillary and "capillary" or "reflection",
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
-- "single lines", and with several scans whose
local function whose(what, i)
  return #measured == 1 and what or ("%s, %s"):format(what, measured[i].standard.title)
end
local width_series = {
  { kind = "band", label = "2 u", x = curve.x, y = curve.low, high = curve.high },
  { kind = "line", label = "smooth function", x = curve.x, y = curve.fwhm },
}
local position_series = {}
for i, m in ipairs(measured) do
  local x, fwhm, place, before, after = {}, {}, {}, {}, {}
  for _, line in ipairs(m.single) do
    if line.supported and line.fwhm.u < 0.5 * line.fwhm.value then
      x[#x + 1], fwhm[#fwhm + 1] = line.two_theta.value, line.fwhm
    end
  end
  for k, line in ipairs(#measured == 1 and instrument.record.lines or instrument.record.scans[i].lines) do
    place[k], before[k], after[k] = line.two_theta.value, line.difference, line.residual
  end
  width_series[#width_series + 1] = { kind = "points", label = whose("single lines", i), x = x, y = fwhm }
  local n = #position_series
  position_series[n + 1] = { kind = "points", label = whose("as observed", i), x = place, y = before }
  position_series[n + 2] = { kind = "points", label = whose("after the aberrations", i), x = place, y = after }
end
local widths_figure = lw.figure {
  name = "instrument_width", title = "Width of the instrument at one wavelength",
  caption = "FWHM without the spectrum's share: smooth function with its band (2 u), and every line fitted by itself.",
  x = { label = "2theta", unit = "deg" }, y = { label = "FWHM", unit = "deg" },
  series = width_series,
}
local positions_figure = lw.figure {
  name = "positions", title = "Observed minus certified position",
  caption = "As observed, and after the fitted aberrations; error bars contain the certificate's uncertainty.",
  x = { label = "2theta", unit = "deg" }, y = { label = "observed - certified", unit = "deg" },
  series = position_series,
}

-- The profile itself at a low, a middle and a high angle, and how skew it is.
local low, high = instrument.valid_two_theta[1], instrument.valid_two_theta[2]
local profile_series, skew = {}, { x = {}, y = {}, low = {}, high = {} }
local from, to = 0, 0 -- where there is something to see
for i, share in ipairs { 0.1, 0.5, 0.9 } do
  local angle = math.floor(low + share * (high - low) + 0.5)
  local shape, top = instrument:profile_curve(angle), 0
  for _, y in ipairs(shape.density) do top = math.max(top, y) end
  for k, y in ipairs(shape.density) do
    if y > 0.005 * top then from, to = math.min(from, shape.offset[k]), math.max(to, shape.offset[k]) end
  end
  profile_series[i] = { kind = "line", label = ("%d deg"):format(angle), x = shape.offset, y = shape.density }
end
local profile_figure = lw.figure {
  name = "instrument_profile", title = "Profile of the instrument at one wavelength",
  caption = "Density against the distance from the unaberrated place at three angles, each of unit area.",
  x = { label = "2theta - unaberrated place", unit = "deg", low = from, high = to },
  y = { label = "density", unit = "deg^-1" }, series = profile_series,
}
for i = 0, 30 do skew.x[i + 1] = low + (high - low) * i / 30 end
for i, q in ipairs(instrument:asymmetry_at(skew.x)) do
  skew.y[i], skew.low[i], skew.high[i] = q.value, q.value - 2 * q.u, q.value + 2 * q.u
end
local skew_figure = lw.figure {
  name = "instrument_asymmetry", title = "Asymmetry of the instrument's profile",
  caption = "Centroid minus the middle at half height, at one wavelength; negative where the tail goes to low angles.",
  x = { label = "2theta", unit = "deg" }, y = { label = "centroid - middle", unit = "deg" },
  series = { { kind = "line", label = "asymmetry", x = skew.x, y = skew.y },
             { kind = "band", label = "2 u", x = skew.x, y = skew.low, high = skew.high } },
}

local titles = {}
for i, m in ipairs(measured) do
  titles[i] = m.standard.title
end

-- The report opens with what protects people.
local items = {
  title = "Calibration of a diffractometer",
  subtitle = ("%s, %s"):format(table.concat(titles, " and "), scan.radiation.name),
  { caution = "After work on a tube, shutter or housing the interlocks, warning lights and leakage are checked and "
      .. "released by the licensed radiation-safety officer before the shutter is opened. Local rules come first; a "
      .. "good calibration says nothing about the safety of the beam.", title = "X-rays after maintenance" },
  { heading = "Calibration of the instrument" },
  { brief = instrument },
  widths_figure, profile_figure, skew_figure, positions_figure,
}
if #measured > 1 then
  local rows = {}
  for i, s in ipairs(instrument.record.scans) do
    rows[i] = {
      scan = s.file, standard = s.standard.name, used_for = s.used_for, positions_rms_deg = s.fit.position_rms_deg,
      displacement = s:get "aberrations.displacement", transparency = s:get "aberrations.transparency",
      attenuation = s:get "attenuation",
    }
  end
  items[#items + 1] = { heading = "Scans in this calibration" }
  items[#items + 1] = {
    table = rows,
    columns = { "scan", "standard", "used_for", "displacement", "transparency", "attenuation", "positions_rms_deg" },
    caption = "Zero shift and profile are shared; displacement and transparency are each specimen's",
  }
  items[#items + 1] = { details = lw.result { join = instrument.record.join } }
end
if #instrument.record.off_certificate > 0 then
  items[#items + 1] = { heading = "Lines off the certificate" }
  items[#items + 1] = {
    table = instrument.record.off_certificate:table(), columns = { "hkl", "standard", "residual", "pull", "why" },
    caption = "Farther than 3 u from their certified places after the aberrations, and why that may be",
  }
end
if changes then
  items[#items + 1] = { heading = "Since the time before" }
  items[#items + 1] = { table = changes, columns = { "quantity", "before", "after", "difference", "in_units_of_u" },
                        caption = "Before, after, and the difference in units of its u" }
end
items[#items + 1] = { heading = "Fit and record" }
for _, m in ipairs(measured) do
  items[#items + 1] = { brief = m.fitted }
  items[#items + 1] = { details = m.fitted }
end
items[#items + 1] = { details = instrument }
job:write(instrument) -- before the figures, which take the longest
job:write(lw.report(items))
