-- SPDX-License-Identifier: GPL-3.0-or-later
-- Kestrel Works, pilot mill for nickel filter powder: the diffractometer comes back from service and is
-- calibrated, then a milling series is measured on it.
local lw = require "linewright"

local job = lw.recipe {
  title  = "Kestrel Works: calibration after service and a milling series",
  inputs = {
    data = { kind = "folder", default = "scripts/demo", help = "folder of the demonstration scans" },
  },
}

local function run(recipe, inputs)
  return job:run("../" .. recipe .. ".lua", inputs)
end

run("calibrate", { scan = job.data .. "/lab6_before_service.xy", standard = "lab6-660c", radiation = "Cu Ka",
                   out = "before_service" })
run("calibrate", { scan = job.data .. "/lab6_after_service.xy", standard = "lab6-660c", radiation = "Cu Ka",
                   previous = job:path "before_service/calibration.json", out = "calibration" })
run("milling_series", { scans = job.data .. "/nickel_milled_*.xy", material = "nickel",
                        calibration = job:path "calibration/calibration.json", out = "series" })
