-- SPDX-License-Identifier: GPL-3.0-or-later
-- Uncertainty by realisations on ray-traced scans: Monte Carlo beside the analytic propagation, the bootstrap where the
-- shape misses, the budget, and the recipe that offers them.
local lw = require "linewright"
local helper = dofile((debug.getinfo(1, "S").source:match "^@(.*/)" or "./") .. "helper.lua")
local record = dofile(helper.spec .. "/record.lua")

local raytraced = helper.root .. "/tests/data/raytraced/"
local python = helper.exists "/usr/bin/python3" and "/usr/bin/python3" or "python3"
local has_jsonschema = os.execute(python .. " -c 'import jsonschema' 2>/dev/null") == true

local function rows_of(list)
  local rows = {}
  for _, row in ipairs(list) do rows[row.quantity] = row end
  return rows
end

-- What rows of the budget have for some sources together.
local function of_sources(row, ...)
  local sum, wanted = 0, {}
  for _, name in ipairs { ... } do wanted[name] = true end
  for _, part in ipairs(row.parts) do
    if wanted[part.source] then sum = sum + part.u ^ 2 end
  end
  return math.sqrt(sum)
end

describe("uncertainty", function()
  local instrument, ceria, nickel
  local function profiles_of(path, material, way)
    local scan = lw.read_scan(path, { radiation = instrument.radiation })
    local valid = instrument.valid_two_theta
    scan = scan:crop(math.max(valid[1], scan.two_theta[1]), math.min(valid[2], scan.two_theta[scan.n]))
    return lw.deconvolve(lw.fit_lines(scan, lw.material(material), { instrument = instrument }), { method = way })
  end
  setup(function()
    local scan = lw.read_scan(helper.demo .. "/lab6_after_service.xy", { radiation = "Cu Ka" })
    local standard = lw.standard "lab6-660c"
    instrument = lw.calibrate(lw.fit_lines(scan, standard:reflections(scan), { widths = "smooth", axial = "soller" }),
      standard, {})
    ceria = profiles_of(raytraced .. "ceria_size_only.xy", "ceria")
    nickel = profiles_of(helper.demo .. "/nickel_milled_04h.xy", "nickel")
  end)

  it("by Monte Carlo is the propagated one on ray-traced ceria", function()
    local n = 120
    local results = lw.separate(ceria, { uncertainty = "monte_carlo", realisations = n })
    local u = results.uncertainty
    assert.are.same({ "monte_carlo", n, 1, 0 }, { u.how, u.realisations, u.seed, u.failed })
    assert.is_near(1 / math.sqrt(2 * (n - 1)), u.relative_accuracy, 1e-12)
    assert.are.equal("whole_pattern", u.methods_left_out[1])
    local drawn, budget = rows_of(u.quantities), rows_of(results.budget.rows)
    -- 4 standard deviations of an u from n realisations (JCGM 101, 7.9.4: those of a standard deviation), and 5 % for
    -- what first order leaves out where lines of a few hundred counts carry a part
    local allowed = 4 / math.sqrt(2 * n) + 0.05
    local seen = 0
    for _, name in ipairs { "methods.scherrer.size_volume", "methods.halder_wagner.size_volume",
                            "methods.double_voigt.size_volume", "methods.double_voigt.size_area", "lattice.a" } do
      local row = drawn[name]
      assert.is_near(1, row.ratio_of_parts, allowed, name)
      -- counts are drawn about the curve that describes them best, whose Voigts need not be the fit's to the last u
      assert.is_near(0, (row.drawn.value - row.analytic.value) / row.drawn.u, 4 / math.sqrt(n) + 0.5, name)
      assert.is_true(row.low.value < row.drawn.value and row.drawn.value < row.high.value, name)
      -- a normal distribution's 95 % interval is 3.92 u wide; an end has the standard deviation 2.67 u/sqrt(n)
      assert.is_near(3.92, (row.high.value - row.low.value) / row.drawn.u, 4 * 1.41 * 2.67 / math.sqrt(n), name)
    end
    for name, row in pairs(drawn) do
      if name:match "^lines%.%d+%.breadth_sample$" then
        seen = seen + 1
        assert.is_near(1, row.ratio, allowed, name)
        assert.is_near(row.analytic.u, math.sqrt(of_sources(budget[name], "counting", "background") ^ 2
          + of_sources(budget[name], "misfit", "calibration", "wavelength") ^ 2), 0.01 * row.analytic.u, name)
      end
    end
    assert.is_true(seen >= 12)
    -- strain is a limit in every realisation, as it is in the results: told, not averaged
    local strain = drawn["methods.halder_wagner.strain_rms"]
    assert.are.same({ "upper limit", 0, n }, { strain.analytic.kind, strain.values, strain.limits })
    assert.is_nil(strain:get "drawn")
  end)

  it("has a budget that adds up, by default", function()
    for name, results in pairs { ceria = lw.separate(ceria), nickel = lw.separate(nickel) } do
      assert.is_nil(results:get "uncertainty")
      local rows, n = rows_of(results.budget.rows), 0
      for quantity, row in pairs(rows) do
        local sum = 0
        for _, part in ipairs(row.parts) do
          sum = sum + part.percent
          assert.is_near(part.percent, 100 * part.u ^ 2 / row.stated.u ^ 2, 1e-9 * (1 + part.percent), quantity)
        end
        assert.is_near(sum, row.sum_percent, 1e-9 * sum)
        n = n + 1
        -- slopes by differences, and weights that move with the breadths: 2 % of the whole
        assert.is_near(100, row.sum_percent, 2, name .. " " .. quantity)
      end
      assert.is_true(n > 20)
      assert.matches("neither the calibration", results.budget.wavelength)
    end
    assert.is_nil(lw.separate(ceria, { budget = false }):get "budget")
    -- another way out: what comes through the fit is told together
    local stokes = lw.separate(profiles_of(helper.demo .. "/nickel_milled_16h.xy", "nickel", "stokes"))
    assert.matches("together, as propagated", stokes.budget.remark)
    assert.are.equal("propagated", rows_of(stokes.budget.rows)["methods.scherrer.size_volume"].parts[1].source)
  end)

  it("by bootstrap is wider than counting where the shape misses", function()
    local n = 100
    local function breadths(options)
      options.realisations, options.sources = n, { "counting" }
      local results = lw.separate(nickel, options)
      local rows, list = rows_of(results.uncertainty.quantities), {}
      for _, hkl in ipairs { "111", "200", "220", "311", "222" } do
        list[#list + 1] = rows["lines." .. hkl .. ".breadth_sample"]
      end
      return list, results.uncertainty
    end
    local counted = breadths { uncertainty = "monte_carlo" }
    local resampled, how = breadths { uncertainty = "bootstrap" }
    assert.is_true(how.blocks.under_lines.correlation > 0)
    assert.is_true(how.blocks.under_lines.length > how.blocks.between_lines.length)
    local more, interval = 0, 0
    for i, row in ipairs(resampled) do
      more = more + row.drawn.u / counted[i].drawn.u / #resampled
      local one = counted[i]
      interval = interval + (row.high.value - row.low.value) / (one.high.value - one.low.value) / #resampled
    end
    -- were they equal, the mean of five ratios of two u would scatter by sqrt(2/5) 7 %; 3 of that
    assert.is_true(more > 1 + 3 * math.sqrt(2 / 5) * 0.07, "u " .. more)
    assert.is_true(interval > 1, "interval " .. interval)
    local analytic = rows_of(lw.separate(nickel).budget.rows)["lines.111.breadth_sample"]
    assert.is_true(resampled[1].drawn.u > of_sources(analytic, "counting", "background"))
  end)

  it("repeats any method by name, and any way out", function()
    local n = 12
    local results = lw.separate(nickel,
      { methods = { "whole_pattern" }, uncertainty = "monte_carlo", realisations = n })
    local row = rows_of(results.uncertainty.quantities)["methods.whole_pattern.size_area"]
    assert.are.equal(n, row.values)
    -- it reads the counts anew, so these must be drawn about the powder's shapes: Voigts would say 22.3 nm, 6 u away
    assert.matches("physical shapes", results.uncertainty.drawn_about)
    assert.is_near(0, (row.drawn.value - row.analytic.value) / row.drawn.u, 4 / math.sqrt(n) + 0.5)
    assert.is_nil(results.uncertainty:get "methods_left_out")
    local stokes = lw.separate(profiles_of(helper.demo .. "/nickel_milled_16h.xy", "nickel", "stokes"),
      { methods = { "scherrer" }, uncertainty = "monte_carlo", realisations = 3 })
    assert.are.equal(3, rows_of(stokes.uncertainty.quantities)["methods.scherrer.size_volume"].values)
  end)

  it("says what is wrong with what was asked", function()
    assert.error_matches(function() lw.separate(ceria, { uncertainty = "monte_carlo", realisations = 1 }) end,
      "realisations' is 1, allowed is 2 to")
    assert.error_matches(function() lw.separate(ceria, { uncertainty = "montecarlo" }) end,
      "did you mean 'monte_carlo'")
    assert.error_matches(function() lw.separate(ceria, { uncertainty = "bootstrap", sources = { "count" } }) end,
      "nothing called 'count' can be drawn.*choose from: counting")
    -- intensities that are no counts are asked about where they are read, so no realisation pretends they were
    assert.error_matches(function()
      lw.scan { two_theta = { 10, 11, 12, 13 }, intensity = { 0.5, 1.5, 0.25, 1 }, radiation = "Cu Ka" }
    end, "scaled")
  end)
end)

describe("the recipe size_strain", function()
  local made
  setup(function()
    made = helper.folder()
    assert.are.equal(0, helper.run(made, { helper.root .. "/scripts/calibrate.lua", "scan=" .. helper.demo
      .. "/lab6_after_service.xy", "standard=lab6-660c", "radiation=Cu Ka", "out=cal" }))
  end)
  teardown(function() helper.remove(made) end)

  local function run(out, ...)
    local code, _, err = helper.run(made, { helper.root .. "/scripts/size_strain.lua",
      "scan=" .. helper.demo .. "/nickel_milled_16h.xy", "material=nickel", "calibration=cal/calibration.json",
      "methods=scherrer,halder_wagner", "out=" .. out, ... })
    return code, err
  end
  -- The record but its date and the folder it went to.
  local function bytes(out)
    return (helper.read(made .. "/" .. out .. "/results.json"):gsub('"date": *"[^"]*"', "")
      :gsub('"out": *"[^"]*"', ""))
  end

  it("gives the same bytes for the same seed", function()
    for out, seed in pairs { one = 5, two = 5, three = 6 } do
      assert.are.same({ 0, "" }, { run(out, "uncertainty=monte_carlo", "realisations=20", "seed=" .. seed) })
    end
    assert.are.equal(bytes "one", bytes "two")
    assert.are_not.equal(bytes "one", bytes "three")
    local results = record.read(made .. "/one/results.json")
    assert.are.equal(5, results.uncertainty.seed)
    assert.are.equal(5, results.provenance.seed)
    assert.are.equal(20, results.uncertainty.realisations)
    assert.matches("By Monte Carlo", helper.read(made .. "/one/report.html"))
    assert.matches("Where the uncertainty comes from", helper.read(made .. "/one/report.html"))
  end)

  it("writes budget and realisations as the schema has them", function()
    if not has_jsonschema then
      pending "python3-jsonschema is not here"
      return
    end
    assert.are.equal(0, run("boot", "uncertainty=bootstrap", "realisations=5"))
    assert.are.equal("", helper.output_of(table.concat({ python, "-c", helper.quote [[
import json, sys, jsonschema
schema = json.load(open(sys.argv[1])); record = json.load(open(sys.argv[2]))
def errors(r):
    kind = jsonschema.validators.validator_for(schema)
    return ["/".join(map(str, e.absolute_path)) + " " + e.message[:200] for e in kind(schema).iter_errors(r)]
print("\n".join(errors(record)[:5]))
record["budget"]["rows"][0]["parts"][0]["source"] = "weather"
record["uncertainty"]["seed"] = -1
if len(errors(record)) < 2: print("spoilt, and nothing said")
]], helper.quote(helper.root .. "/standards/schema/results-1.json"), helper.quote(made .. "/boot/results.json"),
      "2>&1" }, " ")))
  end)

  it("refuses one realisation", function()
    local code, err = run("bad", "uncertainty=monte_carlo", "realisations=1")
    assert.are.equal(1, code)
    assert.matches("realisations", err)
  end)
end)
