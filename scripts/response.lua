-- SPDX-License-Identifier: GPL-3.0-or-later
-- The response of a diffractometer: a standard's relative intensities against its certificate.
local lw = require "linewright"

local job = lw.recipe {
  title  = "Response of a diffractometer",
  inputs = {
    scan      = { kind = "file", help = "scan of the standard for intensities, for example a sintered alumina plate" },
    standard  = { kind = "name", help = "a literal of your own with the certificate's intensities: a file, or a name "
                  .. "from standards/reference" },
    radiation = { kind = "name", help = "Cu Ka, Co Ka ...; or a wavelength, 0.05168nm" },
    instrument = { kind = "file", default = "", help = "calibration.json, folded into the lines where there is one" },
  },
}

-- The lines' areas, each line with its own width.
local standard = lw.standard(job.standard)
local instrument = job.instrument and lw.load_calibration(job.instrument) or nil
local scan  = lw.read_scan(job.scan, { radiation = job.radiation })
local lines = lw.fit_lines(scan, standard:reflections(scan), { instrument = instrument })

local response = lw.response(lines, standard, {})
print(response)

-- Observed over certified against the angle, with the smooth curve and its band.
local x, ratio = {}, {}
for i, line in ipairs(response.lines) do
  x[i], ratio[i] = line.two_theta.value, line.ratio
end
local low, high = {}, {}
for i, u in ipairs(response.curve.u) do
  low[i], high[i] = response.curve.response[i] - 2 * u, response.curve.response[i] + 2 * u
end
local figure = lw.figure {
  name = "response", title = "Response of the instrument",
  caption = "Observed over certified intensity, scaled to a mean of 1; smooth curve of the order that the lines give "
    .. "evidence for, with its band (2 u).",
  x = { label = "2theta", unit = "deg" }, y = { label = "observed over certified" },
  series = {
    { kind = "band", label = "2 u", x = response.curve.two_theta, y = low, high = high },
    { kind = "line", label = ("polynomial of order %d"):format(response.order), x = response.curve.two_theta,
      y = response.curve.response },
    { kind = "points", label = "lines", x = x, y = ratio },
  },
}

local items = {
  title = "Response of a diffractometer", subtitle = ("%s, %s"):format(standard.title, scan.radiation.name),
}
for _, text in ipairs(response.cautions) do
  items[#items + 1] = { caution = text, title = "Certified intensities" }
end
items[#items + 1] = { verdict = response.verdict, text = response.flat_within_u and "The response is flat within u."
  or "The response is not flat within u." }
for _, text in ipairs(response.warnings) do
  items[#items + 1] = text
end
items[#items + 1] = figure
items[#items + 1] = { table = response.lines:table(), columns = { "hkl", "two_theta", "observed", "certified", "ratio",
                      "curve", "pull" }, caption = "Lines of the certificate" }
items[#items + 1] = { details = lines }
job:write(response)
job:write(lw.report(items))
