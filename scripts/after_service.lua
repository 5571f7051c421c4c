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
-- Two curves with their bands of two standard uncertainties, each band beside its curve.
local function overlaid(name, title, caption, label, x, was, is)
  local series = {}
  for _, one in ipairs { { "before", was }, { "after", is } } do
    local middle, least, most = {}, {}, {}
    for i, q in ipairs(one[2]) do
      middle[i], least[i], most[i] = q.value, q.value - 2 * q.u, q.value + 2 * q.u
    end
    series[#series + 1] = { kind = "line", label = one[1], x = x, y = middle }
    series[#series + 1] = { kind = "band", label = one[1] .. ", 2 u", x = x, y = least, high = most }
  end
  return lw.figure {
    name = name, title = title, caption = caption .. ", before and after; bands: two standard uncertainties.",
    x = { label = "2theta", unit = "deg" }, y = { label = label, unit = "deg" }, series = series,
  }
end
local function widths(field, title)
  local x, was, is = over_angles(function(c, angle) return c:profile_at(angle)[field] end)
  return overlaid(field .. "_before_after", title, title .. " at one wavelength against angle", title, x, was, is)
end
local function asymmetry()
  local x = {}
  for i = 0, 30 do x[i + 1] = low + (high - low) * i / 30 end
  return overlaid("asymmetry_before_after", "Asymmetry of the instrument's profile",
    "Centroid minus the middle at half height, at one wavelength (negative: the tail goes to low angles)",
    "centroid - middle", x, before:asymmetry_at(x), after:asymmetry_at(x))
end

-- The profile itself at a low, a middle and a high angle.
local function profile(where, share)
  local angle = math.floor(low + share * (high - low) + 0.5)
  local was, is = before:profile_curve(angle), after:profile_curve(angle)
  local from, to = 0, 0 -- where there is something to see
  for _, curve in ipairs { was, is } do
    local top = 0
    for _, y in ipairs(curve.density) do top = math.max(top, y) end
    for i, y in ipairs(curve.density) do
      if y > 0.005 * top then
        from, to = math.min(from, curve.offset[i]), math.max(to, curve.offset[i])
      end
    end
  end
  return lw.figure {
    name = "profile_" .. where, title = ("Profile of the instrument at %d deg"):format(angle),
    caption = ("Density of the profile at one wavelength at %d deg against the distance from the unaberrated place, "
      .. "before and after, each of unit area."):format(angle),
    x = { label = "2theta - unaberrated place", unit = "deg", low = from, high = to },
    y = { label = "density", unit = "deg^-1" },
    series = { { kind = "line", label = "before", x = was.offset, y = was.density },
               { kind = "line", label = "after", x = is.offset, y = is.density } },
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

-- The whole grid, every size with every strain: the bias of the size, and that of the strain.
local function grid(name, title, label, bias)
  local strains, series = {}, {}
  for _, effect in ipairs(change.effects) do
    local percent = effect.size_nm > 0 and bias(effect)
    if percent and percent == percent then -- what could not be told from none has no bias
      local of = strains[effect.strain]
      if not of then
        of = { x = {}, y = {} }
        strains[effect.strain], strains[#strains + 1] = of, effect.strain
      end
      of.x[#of.x + 1], of.y[#of.y + 1] = effect.size_nm, percent
    end
  end
  table.sort(strains, function(one, other) return (one > 0 and one or 1) < (other > 0 and other or 1) end)
  for i, strain in ipairs(strains) do
    local of = strains[strain]
    local which = strain == 0 and "no strain" or ("strain %g %%"):format(100 * strain)
    series[i] = { kind = "points", label = which, x = of.x, y = of.y }
  end
  if #series == 0 then return false end
  return lw.figure {
    name = name, title = title,
    caption = "Reported minus true for every size and strain of the table, measured on the instrument after service "
      .. "and analysed with the calibration from before. Points that are missing could not be told from none.",
    x = { label = "size of the sample", unit = "nm", log = true, low = 8, high = 125 },
    y = { label = label, unit = "%" }, series = series,
  }
end
local grid_of_size = grid("effects_grid_size", "Size of every sample, if the old calibration were still used",
  "size, reported minus true", function(effect) return 100 * (effect.reported_size_nm / effect.size_nm - 1) end)
local grid_of_strain = grid("effects_grid_strain", "Strain of every sample, if the old calibration were still used",
  "strain, reported minus true", function(effect)
    return effect.strain > 0 and 100 * (effect.reported_strain / effect.strain - 1)
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
items[#items + 1] = widths("fwhm", "FWHM of the instrument")
items[#items + 1] = widths("breadth", "Integral breadth of the instrument")
items[#items + 1] = widths("shift", "Shift of a line")
items[#items + 1] = asymmetry()
for _, at in ipairs { { "low", 0.1 }, { "middle", 0.5 }, { "high", 0.9 } } do
  items[#items + 1] = profile(at[1], at[2])
end
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
for _, figure in ipairs { of_size, of_strain, grid_of_size, grid_of_strain } do
  if figure then items[#items + 1] = figure end
end
items[#items + 1] = { table = change.effects_on_spacing,
                      caption = "Relative error of spacings corrected with the old aberrations" }
job:write(change) -- before the figures, which take the longest
job:write(lw.report(items))
