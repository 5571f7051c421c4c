-- SPDX-License-Identifier: GPL-3.0-or-later
-- The road from a scan to sizes and strains, as a recipe walks it. What the numbers should be is judged
-- elsewhere; here: that each verb takes what the one before gave, keeps it alive, and says what is wrong.
local lw = require "linewright"
local helper = dofile((debug.getinfo(1, "S").source:match "^@(.*/)" or "./") .. "helper.lua")

local function read(name)
  return lw.read_scan(helper.demo .. "/" .. name .. ".xy", { radiation = "Cu Ka" })
end
local function sweep()
  collectgarbage()
  collectgarbage()
end

describe("a scan", function()
  local scan = read "lab6_before_service"

  it("has its columns, header, hash and radiation", function()
    assert.are.equal(13001, scan.n)
    assert.are.equal(13001, #scan.two_theta)
    assert.are.equal(20, scan.two_theta[1])
    assert.are.equal("counts", scan.noise)
    assert.matches("line%-shape standard LaB6", scan.header)
    assert.are.equal(helper.output_of("sha256sum " .. scan.file):match "^%x+", scan.hash)
    assert.are.equal(lw.radiation "Cu Ka", scan.radiation)
    assert.is_nil(scan.sigma)
  end)

  it("is cropped into a new one", function()
    local part = scan:crop(30, 40)
    assert.are.equal(1001, part.n)
    assert.are.equal(part.two_theta, scan:crop({ 30, 40 }).two_theta)
    assert.are.equal(13001, scan.n)
    assert.error_matches(function() scan:crop(200, 210) end, "choose a wider range")
  end)

  it("has the hash of the bytes that were read, whatever becomes of the file", function()
    local folder = helper.folder()
    local path = folder .. "/a.xy"
    helper.write(path, "20.00 195\n20.02 190\n20.04 201\n20.06 180\n")
    local hash = helper.output_of("sha256sum " .. path):match "^%x+"
    local before = lw.read_scan(path)
    local cut = lw.read_scan(path, { range = { 20.01, 20.07 } })
    local part = before:crop(20.01, 20.07)
    helper.write(path, "30.00 195\n30.02 190\n30.04 201\n")
    assert.are.equal(hash, part.hash)
    before = nil -- luacheck: ignore 311
    sweep()
    assert.are.equal(hash, cut.hash)
    assert.are.equal(hash, part.hash)
    assert.are.equal(helper.output_of("sha256sum " .. path):match "^%x+", lw.read_scan(path).hash)
    helper.remove(folder)
  end)

  it("is not read with a radiation that its file contradicts", function()
    -- K-alpha1 lines in angstrom: Cu 1.54059, Mo 0.70932, Ag 0.55942; mean of Cu 1.5418, of Mo 0.71073, as published
    -- tables print them (International Tables C, 4.2.2); all from memory
    local folder = helper.folder()
    local rows = "20.00 195\n20.02 190\n20.04 201\n20.06 180\n"
    local function cif(wavelength)
      return "data_a\n_diffrn_radiation_wavelength " .. wavelength
        .. "\nloop_\n_pd_meas_2theta_scan\n_pd_meas_counts_total\n" .. rows
    end
    local plain = lw.radiation
    local function try(text, radiation, differs)
      helper.write(folder .. "/a", text)
      local ok, result = pcall(lw.read_scan, folder .. "/a", { radiation = radiation, radiation_differs = differs })
      if ok and result.header:find("while the file states", 1, true) then return "noted", result.header end
      return ok and "read" or "refused", tostring(ok or result)
    end
    for _, case in ipairs {
      { cif "1.540593", "Cu Ka", "read" }, { cif "1.54059", "Cu Ka", "read" }, { cif "1.5418", "Cu Ka", "noted" },
      { cif "1.5406", "Cu Ka", "read" }, { cif "1.5444", "Cu Ka", "refused" }, { cif "1.5432", "Cu Ka", "noted" },
      { cif "0.70932", "Cu Ka", "refused" }, { cif "0.71073", "Mo Ka", "noted" }, { cif "0.70932", "Mo Ka", "read" },
      { cif "0.51678", plain(0.051678), "read" }, { cif "0.51678", plain(0.0516), "refused" },
      { cif "0.5165", plain(0.0516501), "read" },
      { "# wavelength: 1.5406 A\n" .. rows, "Cu Ka", "read" },
      { "# Wavelength (nm) = 0.154\n" .. rows, "Cu Ka", "read" },
      { "# wavelength 1.54\n" .. rows, "Cu Ka", "read" }, { "# wavelength 1.5\n" .. rows, "Cu Ka", "read" },
      { "# wavelength 1.5406\n" .. rows, "Mo Ka", "refused" },
      { "# wavelength 0.7093 \xc3\x85\n" .. rows, "Mo Ka", "read" },
      { "# wavelength=1.5406 nm\n" .. rows, "Cu Ka", "read" }, -- no diffractometer has that: not understood
      { "# wavelength = 0.1789 nm\n" .. rows, "Cu Ka", "refused" },
      { "# wavelength not known\n" .. rows, "Cu Ka", "read" },
      { "# wavelengths of 3 lamps\n" .. rows, "Cu Ka", "read" }, { "# radiation: Cu Ka\n" .. rows, "Cu Ka", "read" },
      { "# radiation: Cu Ka\n" .. rows, "Mo Ka", "refused" },
      { "# radiation: Co K-alpha\n" .. rows, "Cu Ka", "refused" },
      { "# radiation: X-rays\n" .. rows, "Cu Ka", "read" }, { "# radiation: Cu Ka\n" .. rows, plain(0.0709), "read" },
    } do
      local got, why = try(case[1], case[2])
      assert.are.equal(case[3], got, case[1]:sub(1, 60) .. tostring(case[2]) .. ": " .. why)
    end
    local _, why = try(cif "0.70932", "Cu Ka")
    assert.matches("the file states a wavelength of 0.0709320 nm, but the radiation given is Cu Ka %(0.15405%d+ nm%); "
      .. "give", why)
    assert.matches("radiation_differs = true", why)
    local got, header = try(cif "0.70932", "Cu Ka", true)
    assert.are.equal("noted", got)
    assert.matches("read with Cu Ka %(0.15405%d+ nm%), while the file states a wavelength of 0.0709320 nm", header)
    helper.remove(folder)
  end)

  it("keeps its columns alive", function()
    local column = read("lab6_before_service").intensity:slice(1, 100)
    sweep()
    assert.are.equal(scan.intensity[1], column[1])
  end)

  it("may be made from numbers", function()
    local made = lw.scan { two_theta = scan.two_theta, intensity = scan.intensity, radiation = "Cu Ka" }
    assert.are.equal(13001, made.n)
    assert.is_near(scan:at(30.005), made:at(30.005), 1e-9)
    assert.error_matches(function() lw.scan { two_theta = { 1, 2 }, intensity = { 1 } } end, "columns have 2, 1")
    assert.error_matches(function() scan:at(10) end, "outside the scan")
  end)

  it("without a radiation says what to do", function()
    local bare = lw.scan { two_theta = { 10, 11, 12, 13 }, intensity = { 1, 2, 3, 4 } }
    assert.error_matches(function() lw.material("nickel"):reflections(bare) end, "read it with { radiation")
    assert.error_matches(function() lw.fit_lines(bare, lw.material "nickel") end, "read it with { radiation")
  end)
end)

describe("the road", function()
  local lines, calibration, powder, profiles, results
  setup(function()
    local scan = read "lab6_after_service"
    lines = lw.fit_lines(scan, lw.standard("lab6-660c"):reflections(scan), {})
    calibration = lw.calibrate(lines, "lab6-660c", {})
    local sample = read "nickel_milled_04h"
    powder = lw.fit_lines(sample, lw.material "nickel", { instrument = calibration })
    profiles = lw.deconvolve(powder)
    results = lw.separate(profiles, { methods = { "scherrer", "williamson_hall" } })
    sweep()
  end)

  it("gives lines that know their scan", function()
    assert.are.equal(24, #lines)
    assert.are.equal("100", lines[1].hkl)
    assert.is_true(lines[1].fwhm.u > 0)
    assert.is_nil(lines[25])
    assert.matches("lab6_after_service", lines.scan.file)
    assert.is_nil(lines.instrument)
    assert.are.equal("LaB6", lines.material.formula)
    assert.are.equal(lines.scan.n, #lines.fitted)
    assert.is_true(lines.fit.goodness_of_fit > 0)
    assert.are.equal("100", lines:table().lines[1].hkl)
    assert.matches("hkl +two_theta %(deg%)", tostring(lines))
    local n = 0
    for _, line in ipairs(lines) do
      n = n + 1
      assert.is_string(line.hkl)
    end
    assert.are.equal(24, n)
  end)

  it("gives a calibration that is saved and loaded", function()
    local folder = helper.folder()
    calibration:save(folder .. "/c.json")
    assert.are.equal(helper.output_of("sha256sum " .. folder .. "/c.json"):match "^%x+", calibration.hash)
    local again = lw.load_calibration(folder .. "/c.json")
    assert.are.equal(calibration.hash, again.hash)
    assert.are.equal(calibration.radiation, again.radiation)
    local at, at_again = calibration:profile_at(60), again:profile_at(60)
    assert.are.equal(at.fwhm.value, at_again.fwhm.value)
    assert.is_near(at.fwhm.u, at_again.fwhm.u, 1e-12)
    assert.error_matches(function() again:profile_at(5) end, "outside")
    helper.write(folder .. "/bad.json", "{\"schema\": 1}")
    assert.error_matches(function() lw.load_calibration(folder .. "/bad.json") end, "bad.json")
    helper.remove(folder)
  end)

  it("gives a sample's lines that know their instrument", function()
    assert.are.equal(calibration, powder.instrument)
    assert.are.equal("linewright.calibration", getmetatable(powder.instrument))
    assert.is_near(4, #powder, 6)
    assert.error_matches(function() lw.deconvolve(lines) end, "fitted without an instrument")
  end)

  it("gives profiles with coefficients", function()
    assert.is_true(#profiles > 3)
    local c = profiles:coefficients(1)
    assert.are.equal(#c.length_nm, #c.cosine)
    if #c.cosine > 0 then
      assert.is_near(1, c.cosine[1], 1e-6)
    end
    assert.error_matches(function() profiles:coefficients(99) end, "there are profiles 1 to")
    assert.are.equal(powder, profiles.fitted_lines)
  end)

  it("gives results by method, alone or side by side", function()
    assert.are.same({ "scherrer", "williamson_hall" }, results.methods:names())
    local alone = lw.williamson_hall(profiles)
    assert.are.equal(results.methods.williamson_hall.size_volume, alone.size_volume)
    assert.are.equal("nm", alone.size_volume.unit)
    local meaning = alone:describe "size_volume"
    assert.matches("%S", meaning)
    assert.matches("the methods", tostring(results))
    assert.error_matches(function() lw.separate(profiles, { methods = { "scherer" } }) end, "did you mean 'scherrer'")
    assert.error_matches(function() lw.scherrer(profiles, { shpae = "cube" }) end, "did you mean 'shape'")
    assert.error_matches(function() lw.scherrer(lines) end, "wants a profiles, not lines")
  end)

  it("draws each of its objects", function()
    for _, figure in ipairs { lines:figure(), calibration:figure(), profiles:figure(), profiles:figure "refold",
      results:figure "williamson_hall", lines.scan:figure() } do
      assert.matches("^figure ", tostring(figure))
      assert.matches("%S", figure.title)
    end
    assert.error_matches(function() profiles:figure "refolded" end, "refold")
  end)

  it("keeps all it needs when only the end is held", function()
    local function walk()
      local sample = read "nickel_milled_04h"
      return lw.deconvolve(lw.fit_lines(sample, lw.material "nickel", { instrument = calibration }))
    end
    local held = walk()
    sweep()
    assert.are.equal(tostring(results.methods.scherrer.size_volume), tostring(lw.scherrer(held).size_volume))
    assert.matches("nickel_milled_04h", held.fitted_lines.scan.file)
  end)

  it("is the same on every rung and every run, but for stated rounding", function()
    local again = lw.fit_lines(read "lab6_after_service", lw.standard "lab6-660c", {})
    for i = 1, #lines do
      assert.are.equal(lines[i].fwhm.value, again[i].fwhm.value)
    end
  end)
end)
