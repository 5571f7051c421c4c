-- SPDX-License-Identifier: GPL-3.0-or-later
-- The recipes of the column-length methods through the command line: exit codes, files and what they say.
local helper = dofile((debug.getinfo(1, "S").source:match "^@(.*/)" or "./") .. "helper.lua")
local record = dofile(helper.spec .. "/record.lua")
local scripts, demo = helper.root .. "/scripts/", helper.demo

describe("the recipe", function()
  local folder
  local function recipe(name, ...)
    return helper.run(folder, { scripts .. name .. ".lua", "scan=" .. demo .. "/nickel_milled_16h.xy",
      "material=nickel", "calibration=cal/calibration.json", "out=" .. name, ... })
  end
  setup(function()
    folder = helper.folder()
    assert.are.equal(0, (helper.run(folder, { scripts .. "calibrate.lua", "geometry=reflection", "out=cal",
      "scan=" .. demo .. "/lab6_after_service.xy", "standard=lab6-660c", "radiation=Cu Ka" })))
  end)
  teardown(function() helper.remove(folder) end)

  -- fields of linewright/results/1
  local function complete(name)
    local r = record.read(folder .. "/" .. name .. "/results.json")
    assert.are.equal("linewright/results/1", r.schema)
    for _, field in ipairs { "lines", "methods", "lattice", "agreement", "provenance" } do
      assert.is_table(r[field], field)
    end
    assert.is_true(#r.lines >= 6)
    return r
  end

  it("warren_averbach tells size, strain, columns and what is not determined, with its figures", function()
    local code, out, err = recipe "warren_averbach"
    assert.are.same({ 0, "" }, { code, err })
    assert.matches("size_area", out)
    assert.matches("strain_not_determined", out)
    local r = complete("warren_averbach").methods.warren_averbach
    assert.are.equal("nm", r.size_area.unit)
    assert.is_true(r.size_area.u > 0)
    assert.is_nil(r.size_volume)
    assert.is_string(r.size_volume_not_determined)
    assert.is_true(#r.strain_rms_at >= 4)
    for _, row in ipairs(r.strain_rms_at) do
      assert.is_true(row.length > 0 and row.value > 0 and row.u > 0)
    end
    for _, name in ipairs { "coefficients", "orders", "strain" } do
      assert.is_true(helper.exists(folder .. "/warren_averbach/figures/warren_averbach_" .. name .. ".svg"), name)
    end
  end)

  it("warren_averbach takes the instrument from the standard's own lines, but not with a fitted shape", function()
    local code, out, err = recipe("warren_averbach", "standard=" .. demo .. "/lab6_after_service.xy",
      "deconvolve=tikhonov")
    assert.are.same({ 0, "" }, { code, err })
    assert.matches("size_area", out)
    local refused, _, why = recipe("warren_averbach", "standard=" .. demo .. "/lab6_after_service.xy",
      "deconvolve=physical")
    assert.are.equal(1, refused)
    assert.matches("method physical folds the calibration's own function into a fit", why)
  end)

  it("warren_averbach takes named lines, and refuses those that are not there", function()
    local code, out = recipe("warren_averbach", "lines=111,220,311")
    assert.are.equal(0, code)
    assert.matches("test_of_orders", out)
    local refused, _, err = recipe("warren_averbach", "lines=111,531")
    assert.are.equal(1, refused)
    assert.matches("no resolved line 531", err)
  end)

  it("whole_pattern tells the distribution, the forms of strain and their covariance", function()
    local code, _, err = recipe "whole_pattern"
    assert.are.same({ 0, "" }, { code, err })
    local r = complete("whole_pattern").methods.whole_pattern
    for _, name in ipairs { "size_volume", "size_area", "diameter_mean", "diameter_dispersion", "strain_rms" } do
      assert.is_true(r[name].u > 0, name)
    end
    local sum = 0
    for _, form in ipairs(r.forms) do
      sum = sum + form.weight
    end
    assert.is_true(math.abs(sum - 1) < 1e-9)
    assert.are.equal(5, #r.covariance.rows)
    assert.is_true(math.abs(r.covariance.rows[2][2] ^ 0.5 / r.size_area.u - 1) < 1e-9)
    assert.is_true(helper.exists(folder .. "/whole_pattern/figures/whole_pattern_strain.svg"))
    assert.are.equal("lognormal", r.size_form)
  end)

  it("whole_pattern takes a histogram of sizes and strain at knots", function()
    local code, _, err = recipe("whole_pattern", "size=histogram", "strain=knots")
    assert.are.same({ 0, "" }, { code, err })
    local r = complete("whole_pattern").methods.whole_pattern
    assert.are.same({ "histogram", "knots" }, { r.size_form, r.strain_form })
    local before, knots = math.huge, r.forms[1].knots
    assert.is_true(#knots > 3 and r.forms[1].smoothing_of_sizes > 0 and r.forms[1].smoothing_of_strain > 0)
    for _, knot in ipairs(knots) do
      assert.is_true(knot.value > 0 and knot.value <= before)
      before = knot.value
    end
    local volume, last = 0, nil
    for _, row in ipairs(r.diameter_distribution) do
      assert.is_true(row.value >= 0 and row.u > 0)
      volume = volume + (last and 0.5 * (row.value + last.value) * (row.diameter - last.diameter) or 0)
      last = row
    end
    assert.is_true(math.abs(volume - 1) < 0.02, volume) -- the ends' outer halves apart
    assert.is_true(helper.exists(folder .. "/whole_pattern/figures/whole_pattern_sizes.svg"))
  end)

  it("compare_methods lays every method beside the others", function()
    local code, out, err = recipe("compare_methods", "ways=convolution,stokes")
    assert.are.same({ 0, "" }, { code, err })
    for _, words in ipairs { "Warren%-Averbach +stokes", "Warren%-Averbach +convolution", "Double Voigt",
                             "Whole pattern +none: the counts" } do
      assert.matches(words, out)
    end
    local ways = complete("compare_methods").ways
    assert.is_table(ways.stokes.methods.warren_averbach)
    assert.is_true(helper.exists(folder .. "/compare_methods/figures/compared_size_area.svg"))
  end)

  it("compare_methods takes the standard's own lines for the ways that can, and says where none can", function()
    local standard = "standard=" .. demo .. "/lab6_after_service.xy"
    local function of(...)
      local code, _, err = recipe("compare_methods", "ways=convolution,stokes", "methods=williamson_hall", ...)
      assert.are.same({ 0, "" }, { code, err })
      local ways = record.read(folder .. "/compare_methods/results.json").ways
      return ways.convolution.methods.williamson_hall, ways.stokes.methods.williamson_hall
    end
    local same, smooth = of()
    local shape, measured = of(standard)
    assert.are.equal(same.size_volume.value, shape.size_volume.value)
    assert.are_not.equal(smooth.size_volume.value, measured.size_volume.value)
    assert.matches("as measured on the lines of", helper.read(folder .. "/compare_methods/report.html"))
    local refused, _, why = recipe("compare_methods", standard, "ways=convolution,physical")
    assert.are.equal(1, refused)
    assert.matches("none of the ways %(convolution, physical%) can take the standard's measured lines", why)
  end)
end)
