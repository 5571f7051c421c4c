-- SPDX-License-Identifier: GPL-3.0-or-later
-- After a tube change or a realignment: what changed, is it accepted, and what would it do to results?
local lw = require "linewright"

local job = lw.recipe {
  title  = "The instrument before and after service",
  inputs = {
    before     = { kind = "file", help = "calibration.json from before the service" },
    after      = { kind = "file", help = "calibration.json from after it" },
    tolerances = { kind = "file", default = "",
                   help = "Lua literal of the laboratory's tolerances; left out: common practice" },
  },
}

local before = lw.load_calibration(job.before)
local after  = lw.load_calibration(job.after)
local change = after:compare(before, { tolerances = job.tolerances or nil })

print(change)

-- Both instruments at angles over their common range.
local low, high = change.two_theta[1], change.two_theta[2]
local function over_angles(value)
  local x, was, is = {}, {}, {}
  for i = 0, 60 do
    local angle = low + (high - low) * i / 60
    x[#x + 1], was[#was + 1], is[#is + 1] = angle, value(before, angle), value(after, angle)
  end
  return x, was, is
end
local function widths(field, title)
  local x, was, is = over_angles(function(c, angle) return c:profile_at(angle)[field] end)
  local function band(values, sign)
    local edge = {}
    for i, q in ipairs(values) do edge[i] = q.value + sign * 2 * q.u end
    return edge
  end
  local function line(values)
    local middle = {}
    for i, q in ipairs(values) do middle[i] = q.value end
    return middle
  end
  return lw.figure {
    name = field .. "_before_after", title = title,
    caption = title .. " at one wavelength against angle, before and after; bands: two standard uncertainties.",
    x = { label = "2theta", unit = "deg" }, y = { label = title, unit = "deg" },
    series = {
      { kind = "line", label = "before", x = x, y = line(was) },
      { kind = "line", label = "after", x = x, y = line(is) },
      { kind = "band", label = "before, 2 u", x = x, y = band(was, -1), high = band(was, 1) },
      { kind = "band", label = "after, 2 u", x = x, y = band(is, -1), high = band(is, 1) },
    },
  }
end

-- Where the standard's lines stand against the certificate, after the aberrations are taken out.
local function residuals(calibration)
  local x, y = {}, {}
  for i, line in ipairs(calibration.record.lines) do
    x[i], y[i] = line.two_theta.value, line.residual
  end
  return x, y
end
local was_x, was_y = residuals(before)
local is_x, is_y   = residuals(after)
local positions = lw.figure {
  name = "position_residuals", title = "Places of the standard's lines",
  caption = "Fitted place minus certified place after the aberrations are taken out, with standard uncertainties.",
  x = { label = "2theta", unit = "deg" }, y = { label = "difference", unit = "deg" },
  series = { { kind = "points", label = "before", x = was_x, y = was_y },
             { kind = "points", label = "after", x = is_x, y = is_y } },
}

-- Sizes without strain, and strains of one size, as they would be reported.
local function effects(name, title, label, unit, caption, pick)
  local x, y = {}, {}
  for _, effect in ipairs(change.effects) do
    local exact, reported = pick(effect)
    if exact and reported == reported then
      x[#x + 1], y[#y + 1] = exact, 100 * (reported / exact - 1)
    end
  end
  if #x < 2 then return false end
  return lw.figure {
    name = name, title = title, caption = caption .. ", measured on the instrument after service and analysed with the "
      .. "calibration from before.",
    x = { label = label, unit = unit, log = true }, y = { label = "reported minus true", unit = "%" },
    series = { { kind = "points", label = "one size, one strain for all lines", x = x, y = y },
               { kind = "line", x = x, y = y } },
  }
end
local of_size = effects("effect_on_size", "Size, if the old calibration were still used", "size", "nm",
  "Samples without strain", function(effect)
    if effect.strain == 0 then return effect.size_nm, effect.reported_size_nm end
  end)
local of_strain = effects("effect_on_strain", "Strain, if the old calibration were still used", "rms strain", "",
  "Samples of 50 nm", function(effect)
    if effect.size_nm == 50 and effect.strain > 0 then return effect.strain, effect.reported_strain end
  end)

local items = {
  title = "The instrument before and after service",
  subtitle = ("%s, %s"):format(after.radiation.name, after.geometry),
  { caution = "After work on a tube, shutter or housing the interlocks, warning lights and leakage are checked and "
      .. "released by the licensed radiation-safety officer before the shutter is opened. Local rules come first; a "
      .. "good comparison says nothing about the safety of the beam.", title = "X-rays after maintenance" },
  { verdict = change.verdict, text = change.rule },
}
for _, reason in ipairs(change.reasons) do
  items[#items + 1] = reason
end
items[#items + 1] = { heading = "What changed" }
items[#items + 1] = { table = change.quantities,
                      caption = "Before, after, difference with its standard uncertainty, z = difference over u" }
items[#items + 1] = positions
items[#items + 1] = widths("fwhm", "FWHM")
items[#items + 1] = widths("breadth", "Integral breadth")
items[#items + 1] = widths("shift", "Shift of a line")
items[#items + 1] = { heading = "What it would do to results" }
items[#items + 1] = change.effects_of
local rows = {}
for i, effect in ipairs(change.effects) do
  local function none(x, form) return x == x and form:format(x) or "none" end
  rows[i] = { size_nm = none(effect.size_nm, "%g"), strain = ("%g"):format(effect.strain),
              reported_size_nm = none(effect.reported_size_nm, "%.4g"),
              reported_strain = none(effect.reported_strain, "%.4g") }
end
items[#items + 1] = { table = rows,
                      caption = "What samples would be reported as, if the old calibration were still used" }
for _, figure in ipairs { of_size, of_strain } do
  if figure then items[#items + 1] = figure end
end
items[#items + 1] = { table = change.effects_on_spacing,
                      caption = "Relative error of spacings corrected with the old aberrations" }
job:write(change) -- before the figures, which take the longest
job:write(lw.report(items))
