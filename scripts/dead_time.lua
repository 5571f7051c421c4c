-- SPDX-License-Identifier: GPL-3.0-or-later
-- The dead time of the counter, from two scans of one specimen at two tube currents (or with and without an
-- attenuator); or, by a dead time that is stated for it, what one scan has lost.
local lw = require "linewright"

local job = lw.recipe {
  title  = "Dead time of a counter",
  inputs = {
    stronger      = { kind = "file", help = "scan at the higher current, counts as registered" },
    weaker        = { kind = "file", default = "", help = "the same angles at a lower current, a fifth or less" },
    dead_time     = { kind = "number", default = "", unit = "s", least = 0, most = 1,
                      help = "as stated for the counter, where there is no weaker scan" },
    counting_time = { kind = "number", default = "", unit = "s", least = 1e-9, most = 1e7,
                      help = "of each point of the stronger scan; left out: as its header says" },
    weaker_counting_time = { kind = "number", default = "", unit = "s", least = 1e-9, most = 1e7,
                             help = "of the weaker scan; left out: as its header says, else the same" },
    model         = { kind = "text", default = "non_paralysable", choices = { "non_paralysable", "paralysable" },
                      help = "what a photon does that comes within the dead time: nothing, or prolongs it" },
  },
}

-- What the radiation is does not matter: counts are compared, angle by angle.
local stronger = lw.read_scan(job.stronger, { noise = "counts" })
local weaker = job.weaker and lw.read_scan(job.weaker, { noise = "counts" }) or nil
local result = lw.dead_time(stronger, weaker, {
  dead_time            = job.dead_time or nil,
  counting_time        = job.counting_time or nil,
  weaker_counting_time = job.weaker_counting_time or nil,
  model                = job.model,
})
print(result)

local items = {
  title = "Dead time of a counter", subtitle = job.stronger,
  { verdict = result.verdict, text = "Loss at the strongest point: " .. tostring(result.loss_at_strongest) },
}
for _, text in ipairs(result.warnings) do
  items[#items + 1] = text
end
if weaker then
  local rate, ratio, expected = {}, {}, {}
  for i, level in ipairs(result.levels) do
    rate[i], ratio[i], expected[i] = level.rate_stronger_per_s, level.ratio, level.ratio_expected
  end
  items[#items + 1] = lw.figure {
    name = "dead_time", title = "Stronger over weaker scan",
    caption = "Without losses the ratio is the same at every rate.",
    x = { label = "rate in the stronger scan", unit = "1/s", log = true }, y = { label = "ratio of the scans" },
    series = {
      { kind = "points", label = "scans", x = rate, y = ratio },
      { kind = "line", label = "by the dead time", x = rate, y = expected },
    },
  }
  items[#items + 1] = { table = result.levels:table(), caption = "Ratio of the scans by rate", columns = {
    "rate_weaker_per_s", "rate_stronger_per_s", "ratio", "ratio_expected" } }
end
items[#items + 1] = { details = result }
job:write(result)
job:write(lw.report(items))
