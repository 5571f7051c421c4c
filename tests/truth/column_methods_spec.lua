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

local function fitted(name, material)
  local began = os.clock()
  local result = lw.whole_pattern(roads.profiles(name, material, "convolution")):table()
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
