-- SPDX-License-Identifier: GPL-3.0-or-later
-- Whole pattern and Warren-Averbach against ray-traced scans, whose truth files say how large the crystals are and how
-- their strain goes with length (tests/data/raytraced/SOURCE.md). Bounds: what these methods must reach. Strains and
-- breadths of one set of crystals are not interchangeable to better than 1 to 3 % (same file).
local lw = require "linewright"
local here = debug.getinfo(1, "S").source:match "^@(.*/)" or "./"
local roads = dofile(here .. "roads.lua")
local tell = roads.tell

local function within(value, truth, most, what)
  local off = 100 * (value / truth - 1)
  assert.is_true(math.abs(off) <= most, ("%s: %.6g, truth %.6g, off by %+.1f %%"):format(what, value, truth, off))
  return off
end

-- Linear between the rows {length, value}; nil outside.
local function at(rows, length)
  for i = 2, #rows do
    local a, b = rows[i - 1], rows[i]
    if a.length <= length and length <= b.length then
      return a.value + (b.value - a.value) * (length - a.length) / (b.length - a.length)
    end
  end
end

local function fitted(name, material, options)
  local began = os.clock()
  local result = lw.whole_pattern(roads.profiles(name, material, "convolution"), options or {}):table()
  return result, os.clock() - began
end

describe("the whole pattern", function()
  for i, name in ipairs(roads.milled) do
    it("of " .. name .. " gives back the crystals and their strain", function()
      local truth = roads.truth(name).sample
      local r, seconds = fitted(name, "nickel")
      local half = truth.size_volume / 2
      local strain, true_strain = at(r.strain_rms_at, half), at(truth.strain_rms_at, half)
        or truth.strain_rms_at_half_size_volume
      local narrow = i == 2 or i >= 6 -- 01h, 16h, 32h
      local volume = within(r.size_volume.value, truth.size_volume, narrow and 8 or 15, "size_volume")
      local area = within(r.size_area.value, truth.size_area, 5, "size_area")
      local half_off = within(strain, true_strain, 6, "strain at half the size")
      tell("%-20s whole pattern: size_volume %+.1f %% (%.1f u), size_area %+.1f %% (%.1f u), strain at half the size "
        .. "%+.1f %%, form %s, %.2f s", name, volume, r.size_volume:pull(truth.size_volume), area,
        r.size_area:pull(truth.size_area), half_off, r.strain_form, seconds)
      -- the choice of the form is in the uncertainty, so that no size_volume is off by more than 3 u
      assert.is_true(math.abs(r.size_volume:pull(truth.size_volume)) < 3)
      assert.is_true(math.abs(r.size_area:pull(truth.size_area)) < 3)
      assert.is_true(r.statistics.goodness < 1.06)
      assert.are_not.equal("constant", r.strain_form)
    end)
  end

  it("of ceria finds size alone", function()
    local truth = roads.truth "ceria_size_only".sample
    local r = fitted("ceria_size_only", "ceria")
    within(r.size_volume.value, truth.size_volume, 0.5, "size_volume")
    within(r.size_area.value, truth.size_area, 0.5, "size_area")
    within(r.diameter_mean.value, truth.diameter_mean, 1, "diameter_mean")
    within(r.diameter_dispersion.value, truth.diameter_dispersion, 5, "diameter_dispersion")
    assert.are.equal("none", r.strain_form)
    assert.are.equal("upper limit", r.strain_rms.kind)
    assert.is_true(r.strain_rms.value < 4e-4)
    tell("%-20s whole pattern: size_volume %s, truth %.3f; size_area %s, truth %.3f", "ceria_size_only",
      tostring(r.size_volume), truth.size_volume, tostring(r.size_area), truth.size_area)
  end)

  for _, name in ipairs(roads.milled) do
    it("of " .. name .. " follows the strain with knots alone", function()
      local truth = roads.truth(name).sample
      local r = fitted(name, "nickel", { strain = "knots" })
      within(r.size_area.value, truth.size_area, 5, "size_area")
      local words, seen = {}, 0
      for _, row in ipairs(r.strain_rms_at) do
        -- where the lines say it to 2 %; beyond 0.6 of the size the truth of so few crystals scatters by more than
        -- 2 % (same file)
        local wanted = row.length <= 0.6 * truth.size_volume and at(truth.strain_rms_at, row.length)
        if wanted and row.u < 0.02 * row.value then
          words[#words + 1] = ("%g: %+.1f"):format(row.length, within(row.value, wanted, 6, "strain at " .. row.length))
          seen = seen + 1
        end
      end
      tell("%-20s whole pattern, knots: size_area %s, truth %.4g; strain off by %%, by nm: %s", name,
        tostring(r.size_area), truth.size_area, table.concat(words, ", "))
      assert.is_true(name == "nickel_milled_00h" or seen >= 4)
      assert.are.equal("knots", r.strain_form)
    end)

    it("of " .. name .. " finds the sizes without a formula", function()
      local truth = roads.truth(name).sample
      local r = fitted(name, "nickel", { size = "histogram" })
      tell("%-20s whole pattern, histogram: size_volume %s, truth %.4g; size_area %s, %.4g", name,
        tostring(r.size_volume), truth.size_volume, tostring(r.size_area), truth.size_area)
      within(r.size_area.value, truth.size_area, 5, "size_area")
      within(r.size_volume.value, truth.size_volume, 15, "size_volume")
      assert.is_true(math.abs(r.size_volume:pull(truth.size_volume)) < 3)
      assert.is_true(math.abs(r.size_area:pull(truth.size_area)) < 3)
    end)
  end

  it("of ceria gives back the distribution of diameters", function()
    local truth = roads.truth "ceria_size_only".sample
    local r = fitted("ceria_size_only", "ceria", { size = "histogram" })
    within(r.size_volume.value, truth.size_volume, 1, "size_volume")
    within(r.size_area.value, truth.size_area, 1, "size_area")
    within(r.diameter_mean.value, truth.diameter_mean, 2, "diameter_mean")
    -- lognormal in truth: the volume over ln D is normal about the mean of ln D plus 3 sigma^2 (Hatch & Choate 1929)
    local variance = math.log(1 + truth.diameter_dispersion)
    local middle, sigma = math.log(truth.diameter_mean) + 2.5 * variance, math.sqrt(variance)
    local beyond, largest = 0, 0
    for _, row in ipairs(r.diameter_distribution) do
      local z = (math.log(row.diameter) - middle) / sigma
      local wanted = math.exp(-z * z / 2) / (sigma * math.sqrt(2 * math.pi)) / row.diameter
      beyond = beyond + (math.abs(row.value - wanted) > 2 * row.u and 1 or 0)
      largest = math.max(largest, math.abs(row.value - wanted))
    end
    tell("%-20s whole pattern, histogram: size_volume %s, truth %.3f; size_area %s, %.3f; %d of %d nodes beyond 2 u",
      "ceria_size_only", tostring(r.size_volume), truth.size_volume, tostring(r.size_area), truth.size_area, beyond,
      #r.diameter_distribution)
    assert.is_true(beyond <= #r.diameter_distribution // 8)
    assert.is_true(largest < 0.01) -- nm^-1, of 0.097 at the top
    assert.are.equal("histogram", r.size_form)
  end)

  it("of tungsten with dislocations says that its lines contradict each other", function()
    local truth = roads.truth "tungsten_filings".sample
    local r = fitted("tungsten_filings", "tungsten")
    tell("%-20s whole pattern: size_volume %s, truth %.4g; size_area %s, %.4g; strain varies between crystals: %s",
      "tungsten_filings", tostring(r.size_volume), truth.size_volume, tostring(r.size_area), truth.size_area,
      tostring(r.strain_variation))
    assert.is_true(math.abs(r.size_volume:pull(truth.size_volume)) < 3)
    assert.is_true(r.strain_variation.value > 3 * r.strain_variation.u) -- few dislocations in each crystal
    local remarks = table.concat(r.remarks, "\n")
    assert.is_truthy(remarks:find("contradict each other", 1, true))
    assert.is_truthy(remarks:find("indicative", 1, true))
  end)

  it("of strained crystals without size finds strain alone", function()
    local r = fitted("ni_strain_only", "nickel")
    within(r.strain_rms.value, 0.0016, 0.5, "strain_rms")
    assert.are.equal("constant", r.strain_form)
    assert.are.equal("lower limit", r.size_volume.kind)
    assert.is_true(r.size_volume.value > 500)
    tell("%-20s whole pattern: strain_rms %s, truth 0.0016", "ni_strain_only", tostring(r.strain_rms))
  end)
end)

describe("Warren-Averbach", function()
  for i, name in ipairs(roads.milled) do
    for _, way in ipairs { "stokes", "physical" } do
      it("of " .. name .. " by " .. way .. " finds area-weighted size and strain", function()
        local truth = roads.truth(name).sample
        local ok, profiles = pcall(roads.profiles, name, "nickel", way)
        assert.is_true(ok, tostring(profiles))
        local all = lw.warren_averbach(profiles):table()
        local r
        for _, direction in ipairs(all.directions) do
          r = direction.direction == "111" and direction or r
        end
        assert.is_truthy(r, "no orders of 111")
        local area = within(r.size_area.value, truth.size_area, 12, "size_area")
        local worst = 0
        for _, row in ipairs(r.strain_rms_at) do
          assert.is_true(row.length >= 1.5) -- shorter columns are not determined
          if i >= 5 and row.length >= 4 and row.length <= 8 then
            local off = within(row.value, at(truth.strain_rms_at, row.length), 12, "strain at " .. row.length .. " nm")
            worst = math.abs(off) > math.abs(worst) and off or worst
          end
        end
        local half = at(r.strain_rms_at, truth.size_volume / 2)
        if i >= 5 and half then
          within(half, truth.strain_rms_at_half_size_volume, 10, "strain at half the size")
        end
        tell("%-20s Warren-Averbach, %s: size_area %+.1f %%, strain at 4 to 8 nm %+.1f %%, at half the size %s",
          name, way, area, worst,
          half and ("%+.1f %%"):format(100 * (half / truth.strain_rms_at_half_size_volume - 1)) or "not determined")
        if i > 1 then -- strain has taken too much off the orders for the integral to be a measurement
          assert.is_nil(r.size_volume)
          assert.is_string(r.size_volume_not_determined)
        end
      end)
    end
  end
end)
