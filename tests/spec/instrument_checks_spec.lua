-- SPDX-License-Identifier: GPL-3.0-or-later
-- Response and dead time. Intensities are held against the structure factors from which the rays were traced; dead
-- times against counts drawn here by the closed forms, with the dead time known.
local lw = require "linewright"
local here = debug.getinfo(1, "S").source:match "^@(.*/)" or "./"
local roads = dofile(here .. "../truth/roads.lua")
local record = dofile(here .. "record.lua")
local helper = roads.helper
local folder
setup(function() folder = helper.folder() end)
teardown(function() helper.remove(folder) end)

describe("the response", function()
  -- The traced crystals' intensities: sum of F^2 times multiplicity, times the Lorentz-polarisation factor of a powder
  -- without monochromator (Warren 1969, X-ray Diffraction, from memory; the traced rays have it in them).
  local function certificate(bend, change)
    local list = {}
    for _, r in ipairs(roads.truth "lab6_after_service".reflections) do
      if not r.outside_range and #r.hkl_families == 1 then
        local t = math.rad(r.two_theta)
        local i = r.F2_sum * (1 + math.cos(t) ^ 2) / (math.sin(t / 2) ^ 2 * math.cos(t / 2)) / bend(r.two_theta)
        list[#list + 1] = { hkl = table.concat(r.hkl, " "), value = i, expanded_uncertainty = 0.004 * i }
      end
    end
    local literal = {
      name = "lab6-intensities", title = "LaB6 with intensities", formula = "LaB6", space_group = "Pm-3m", unit = "nm",
      cell = { a = 0.4156826 }, certificate = "traced", coverage_factor = 2, intensities = list,
    }
    for key, value in pairs(change or {}) do literal[key] = value end
    return literal
  end
  local function flat() return 1 end
  local function lines() return roads.calibration("lab6_after_service", "lab6-660c").fitted_lines end

  it("of the traced diffractometer is flat, as it is", function()
    local r = lw.response(lines(), lw.standard(certificate(flat)), {})
    assert.is_true(r.flat_within_u)
    assert.are.equal("pass", r.verdict)
    assert.are.equal(0, r.order)
    assert.are.equal(18, #r.lines)
    assert.is_true(r.p > 1e-3)
    assert.are.equal("upper limit", r.largest_departure.kind)
    assert.is_true(r.largest_departure.value < 0.02)
    assert.matches("preferred orientation", r.cautions[1])
    roads.tell("response of lab6_after_service: flat within %s", tostring(r.largest_departure))
  end)

  it("that is bent is found with its size, whichever way", function()
    for _, slope in ipairs { 0.1, -0.1 } do
      -- 10 % from one end to the other, in the logarithm: what is certified is smaller by as much
      local function bend(angle) return math.exp(slope * (angle - 75) / 110) end
      local r = lw.response(lines(), lw.standard(certificate(bend)), {})
      assert.is_false(r.flat_within_u)
      assert.are.equal("attention", r.verdict)
      assert.are.equal(1, r.order)
      local first, last = r.lines[1], r.lines[#r.lines]
      local true_step = bend(last.two_theta.value) / bend(first.two_theta.value)
      local step = last.curve.value / first.curve.value
      local u = step * math.sqrt((first.curve.u / first.curve.value) ^ 2 + (last.curve.u / last.curve.value) ^ 2)
      assert.is_true(math.abs(step - true_step) < 3 * u, ("%.4f, wanted %.4f(%.4f)"):format(step, true_step, u))
      -- the curve that is drawn is the one of the table, from its first line to its last
      local drawn = r.curve
      assert.is_near(first.curve.value, drawn.response[1], 1e-9)
      assert.is_near(last.curve.value, drawn.response[#drawn.response], 1e-9)
      assert.is_near(first.curve.u, drawn.u[1], 1e-9)
      assert.matches("not flat", r.warnings[1])
    end
  end)

  it("is no better known than the certificate", function()
    local literal = certificate(flat)
    for _, row in ipairs(literal.intensities) do row.expanded_uncertainty = 0.2 * row.value end
    local r = lw.response(lines(), lw.standard(literal), {})
    for _, row in ipairs(r.lines) do
      -- of a quotient: relative u in quadrature (JCGM 100:2008, 5.1.6), the certificate's 0.2 being k = 2
      local relative = math.sqrt((row.observed.u / row.observed.value) ^ 2 + 0.1 ^ 2)
      assert.is_near(relative, row.ratio.u / row.ratio.value, 1e-9)
    end
  end)

  it("says that one line of a textured plate is not the response", function()
    local literal = certificate(flat)
    literal.intensities[4].value = 1.3 * literal.intensities[4].value
    local r = lw.response(lines(), lw.standard(literal), {})
    assert.is_true(r.birge_ratio > 1)
    assert.matches("texture", table.concat(r.warnings:table(), " "))
    assert.are.equal("attention", r.verdict)
  end)

  it("is refused without numbers, and bad numbers are", function()
    local function refused(message, standard, options)
      assert.error_matches(function() lw.response(lines(), lw.standard(standard), options or {}) end, message)
    end
    refused("carries no certified intensities", "lab6-660c")
    refused("order_most", certificate(flat), { order_most = 9 })
    local few = certificate(flat)
    for _ = 1, #few.intensities - 3 do table.remove(few.intensities) end
    refused("3 lines with a certified intensity", few)
    for _, case in ipairs {
      { { intensities = {} }, "0 intensities" }, { { intensities = 7 }, "intensities" },
      { { intensities = { { hkl = "1 x 0", value = 1 } } }, "Miller indices" },
      { { intensities = { { hkl = "110", value = -1 } } }, "must be positive" },
      { { intensities = { { hkl = "110", value = 1, u = 1 } } }, "expanded_uncertainty" },
      { { intensities = { { hkl = "110", value = 1 }, { hkl = "1 1 0", value = 1 } } }, "given twice" },
      { { intensities_of = "counts" }, "areas" },
    } do
      assert.error_matches(function() lw.standard(certificate(flat, case[1])) end, case[2])
    end
  end)

  it("has a recipe", function()
    local rows = {}
    for _, line in ipairs(certificate(flat).intensities) do
      rows[#rows + 1] = ("{ hkl = %q, value = %.4f, expanded_uncertainty = %.4f },"):format(line.hkl, line.value,
        line.expanded_uncertainty)
    end
    helper.write(folder .. "/plate.lua", ([[return { name = "plate", title = "plate", formula = "LaB6",
      space_group = "Pm-3m", unit = "nm", cell = { a = 0.4156826 }, certificate = "traced", coverage_factor = 2,
      intensities = { %s } }]]):format(table.concat(rows, "\n")))
    local code, out, err = helper.run(folder, { helper.root .. "/scripts/response.lua",
      "scan=" .. roads.path "lab6_after_service", "standard=plate.lua", "radiation=Cu Ka", "out=r" })
    assert.are.same({ 0, "" }, { code, err })
    assert.matches("flat_within_u +yes", out)
    local written = record.read(folder .. "/r/response.json")
    assert.are.equal("linewright/response/1", written.schema)
    assert.is_true(helper.exists(folder .. "/r/report.html"))
  end)
end)

describe("the dead time", function()
  local function poisson(mean)
    if mean > 30 then -- normal: its skewness is below a fifth
      local g = math.sqrt(-2 * math.log(1 - math.random())) * math.cos(2 * math.pi * math.random())
      return math.max(0, math.floor(mean + math.sqrt(mean) * g + 0.5))
    end
    local least, n, product = math.exp(-mean), 0, math.random()
    while product > least do n, product = n + 1, product * math.random() end
    return n
  end

  -- Six lines between 300 and 10000 counts a second, times a factor, as a counter of a known dead time shows them
  -- (Knoll, Radiation Detection and Measurement, from memory).
  local function scan(name, factor, tau, model, time, step)
    local out = { ("# counting time %g s"):format(time) }
    for i = 0, 1500 do
      local x, n = 20 + (step or 0.04) * i, 40
      for k, c in ipairs { 25, 33, 41, 52, 60, 70 } do
        n = n + ({ 10000, 5000, 2000, 700, 300, 9000 })[k] * math.exp(-4 * math.log(2) * ((x - c) / 0.15) ^ 2)
      end
      n = n * factor
      local m = model == "paralysable" and n * math.exp(-n * tau) or n / (1 + n * tau)
      out[#out + 1] = ("%.3f %d"):format(x, poisson(m * time))
    end
    helper.write(folder .. "/" .. name, table.concat(out, "\n") .. "\n")
    return lw.read_scan(folder .. "/" .. name, {})
  end

  it("of drawn counts comes back, with an honest u, in both models", function()
    math.randomseed(91, 3)
    for _, model in ipairs { "non_paralysable", "paralysable" } do
      local sum, runs, widened = 0, 20, 0
      for _ = 1, runs do
        local r = lw.dead_time(scan("s.xy", 5, 3e-6, model, 2), scan("w.xy", 1, 3e-6, model, 4), { model = model })
        widened = widened + (r.birge_ratio > 1 and 1 or 0)
        sum = sum + r.dead_time:pull(3e-6) ^ 2
        assert.is_true(math.abs(r.intensity_ratio:pull(5)) < 4)
        -- n tau/(1 + n tau) or 1 - exp(-n tau) of the strongest point, 50200 a second
        local n_tau = 5 * 10040 * 3e-6
        local loss = model == "paralysable" and 1 - math.exp(-n_tau) or n_tau / (1 + n_tau)
        assert.is_true(math.abs(r.loss_at_strongest:pull(loss)) < 4, tostring(r.loss_at_strongest))
        assert.are.equal("attention", r.verdict)
      end
      -- u comes from counting: chi-square beyond chance (p < 1e-3) more than once in 20 happens in one of 5000 cases
      assert.is_true(widened <= 1, widened .. " widened")
      -- rms of 20 pulls: 1 within 3 of its standard deviations, 1/sqrt(40)
      local rms = math.sqrt(sum / runs)
      assert.is_true(math.abs(rms - 1) < 3 / math.sqrt(2 * runs), ("%s: rms pull %.2f"):format(model, rms))
    end
  end)

  it("that is not there is a limit", function()
    math.randomseed(92, 3)
    local below, runs = 0, 20
    for _ = 1, runs do
      local r = lw.dead_time(scan("s.xy", 5, 0, "", 2), scan("w.xy", 1, 0, "", 2), {})
      if r.dead_time.kind == "upper limit" then
        below = below + 1
        assert.are.equal("upper limit", r.loss_at_strongest.kind)
        assert.are.equal("pass", r.verdict)
      end
    end
    -- a value beyond 2 u comes by chance in 2.3 % of runs: more than 3 of 20 in one of 900 cases
    assert.is_true(below >= runs - 3, below .. " limits")
  end)

  it("that is stated gives the loss of one scan", function()
    math.randomseed(93, 3)
    local one = scan("one.xy", 5, 2e-6, "", 1)
    local r = lw.dead_time(one, { dead_time = 2e-6 })
    -- m tau for a non-paralysable counter
    local most = one.intensity:max()
    assert.is_near(most * 2e-6, r.loss_at_strongest.value, 1e-12)
    assert.are.equal(0, r.loss_at_strongest.u)
    assert.matches("lost at the strongest point", r.warnings[1])
    assert.are.equal("pass", lw.dead_time(one, nil, { dead_time = 1e-7 }).verdict)
    -- n tau exp(-n tau) = m tau has its root by the series of Lambert's function: W = x + x^2 + 3/2 x^3 + 8/3 x^4 ...
    local x = most * 1e-6
    local w = x + x ^ 2 + 3 / 2 * x ^ 3 + 8 / 3 * x ^ 4 + 125 / 24 * x ^ 5 + 54 / 5 * x ^ 6
    local p = lw.dead_time(one, { dead_time = 1e-6, model = "paralysable" })
    assert.is_near(1 - x / w, p.loss_at_strongest.value, 30 * x ^ 6)
  end)

  it("has a recipe", function()
    math.randomseed(94, 3)
    scan("s.xy", 5, 3e-6, "", 2)
    scan("w.xy", 1, 3e-6, "", 2)
    local recipe = helper.root .. "/scripts/dead_time.lua"
    local code, out, err = helper.run(folder, { recipe, "stronger=s.xy", "weaker=w.xy", "out=d" })
    assert.are.same({ 0, "" }, { code, err })
    assert.matches("dead_time +%d", out)
    assert.are.equal("linewright/dead_time/1", record.read(folder .. "/d/dead_time.json").schema)
    assert.are.equal(0, (helper.run(folder, { recipe, "stronger=s.xy", "dead_time=2e-6", "out=e" })))
    code, out, err = helper.run(folder, { recipe, "stronger=s.xy", "out=f" })
    assert.are.same({ 1, "" }, { code, out })
    assert.matches("one scan alone does not tell it", err)
    code, out, err = helper.run(folder, { recipe, "stronger=s.xy", "weaker=gone.xy", "out=f" })
    assert.are.same({ 1, "" }, { code, out })
    assert.matches("gone.xy", err)
  end)

  it("is refused where nothing can be learnt", function()
    math.randomseed(95, 3)
    local s, w = scan("s.xy", 5, 0, "", 1), scan("w.xy", 1, 0, "", 1)
    local function refused(message, ...)
      local arguments = table.pack(...)
      assert.error_matches(function() lw.dead_time(table.unpack(arguments, 1, arguments.n)) end, message)
    end
    refused("as strong as the weaker", w, s, {})
    refused("both a weaker scan and a dead time", s, w, { dead_time = 1e-6 })
    refused("can't show", s, { dead_time = 1e-4 })
    refused("points", s, w:crop(20, 60), {})
    refused("is at", s, scan("other.xy", 1, 0, "", 1, 0.041), {})
    refused("model", s, w, { model = "dead" })
    refused("too few counts", s, scan("dark.xy", 1, 0, "", 1e-4), {})
    refused("counting_time", s, w, { counting_time = -1 })
    refused("not counts", roads.calibration("si", "si-640f").fitted_lines.scan, lw.read_scan((function()
      helper.write(folder .. "/sigma.xy", "20 1.5 0.2\n21 2.5 0.2\n22 3.5 0.3\n")
      return folder .. "/sigma.xy"
    end)(), {}), { counting_time = 1 })
    helper.write(folder .. "/silent.xy", (helper.read(folder .. "/s.xy"):gsub("^#[^\n]*\n", "")))
    refused("how long each point was counted", lw.read_scan(folder .. "/silent.xy", {}), w, {})
  end)
end)
