-- SPDX-License-Identifier: GPL-3.0-or-later
-- Measured scans under open licences (tests/data/measured; SOURCE.md states origin and licence): the engine
-- against what others published about them, or what can be read off them without it.
local lw = require "linewright"
local helper = dofile((debug.getinfo(1, "S").source:match "^@(.*/)" or "./") .. "helper.lua")
local record = dofile(helper.spec .. "/record.lua")

local data = helper.root .. "/tests/data/measured/"
local scripts = helper.root .. "/scripts/"

local function near(expected, tolerance, value, what)
  assert.is_true(math.abs(value - expected) <= tolerance, ("%s: %.9g, not %.9g +- %.3g"):format(what, value, expected,
    tolerance))
end

-- A plain least-squares fit y = sum of c[j] * f[j], by the normal equations: for checks apart from the engine.
local function least_squares(y, columns)
  local n = #columns
  local a = {}
  for i = 1, n do
    a[i] = {}
    for j = 1, n + 1 do
      local sum = 0
      for k = 1, #y do
        sum = sum + columns[i][k] * (j <= n and columns[j][k] or y[k])
      end
      a[i][j] = sum
    end
  end
  for i = 1, n do
    for k = 1, n do
      if k ~= i then
        local factor = a[k][i] / a[i][i]
        for j = i, n + 1 do
          a[k][j] = a[k][j] - factor * a[i][j]
        end
      end
    end
  end
  local c, squares = {}, 0
  for i = 1, n do
    c[i] = a[i][n + 1] / a[i][i]
  end
  for k = 1, #y do
    local model = 0
    for i = 1, n do
      model = model + c[i] * columns[i][k]
    end
    squares = squares + (y[k] - model) ^ 2
  end
  return c, math.sqrt(squares / #y)
end

describe("the synchrotron scans", function()
  local folder, calibration, results, codes
  setup(function()
    folder = helper.folder()
    codes = {}
    codes[1] = { helper.run(folder, { scripts .. "calibrate.lua", "scan=" .. data .. "ptc/ceo2-reference.xy",
      "standard=ceo2", "radiation=0.05168nm", "noise=scaled", "out=cal" }) }
    codes[2] = { helper.run(folder, { scripts .. "size_strain.lua", "scan=" .. data .. "ptc/ptc-tec10v50e.xy",
      "material=platinum", "calibration=cal/calibration.json", "background=" .. data .. "ptc/capillary-empty.xy",
      "noise=scaled", "out=pt" }) }
    calibration = codes[1][1] == 0 and record.read(folder .. "/cal/calibration.json")
    results = codes[2][1] == 0 and record.read(folder .. "/pt/results.json")
  end)
  teardown(function() helper.remove(folder) end)

  it("run through both recipes", function()
    assert.are.same({ 0, "" }, { codes[1][1], codes[1][3] })
    assert.are.same({ 0, "" }, { codes[2][1], codes[2][3] })
  end)

  -- SOURCE.md: from 44 lines by hand 0.51680 angstrom, zero +0.0006 deg, r.m.s. misfit 0.0018 deg
  it("give the wavelength that was found by hand", function()
    local factor = calibration.aberrations.wavelength
    near(0.051680, 4e-6, 0.05168 * (1 + factor.value), "wavelength in nm")
    assert.is_true(factor.u < 5e-5)
    near(0.0006, 0.003, calibration.aberrations.zero_shift.value, "zero in deg")
    assert.are.equal("capillary", calibration.geometry)
  end)

  it("hold line positions to 0.002 deg, as they did by hand", function()
    -- the 44 strongest lines, by a fit of zero and wavelength that is not the engine's
    local strong = {}
    for i, line in ipairs(calibration.lines) do
      strong[i] = line
    end
    table.sort(strong, function(a, b) return a.area.value > b.area.value end)
    local y, one, slope = {}, {}, {}
    for i = 1, 44 do
      local certified = strong[i].two_theta_certified.value
      y[i], one[i] = strong[i].two_theta.value - certified, 1
      slope[i] = 2 * math.tan(math.rad(certified / 2)) * 180 / math.pi
    end
    local c, rms = least_squares(y, { one, slope })
    assert.is_true(rms < 0.0025, rms .. " deg")
    near(0.051680, 4e-6, 0.05168 * (1 + c[2]), "wavelength in nm")
    near(0.0006, 0.003, c[1], "zero in deg")
  end)

  -- SOURCE.md: FWHM 0.015 deg at 9.5 deg, about 0.034 deg at 70 deg, read off the scan
  it("give the widths that can be read off the scan", function()
    local function fwhm(angle)
      local best
      for _, line in ipairs(calibration.lines) do
        if not best or math.abs(line.two_theta.value - angle) < math.abs(best.two_theta.value - angle) then
          best = line
        end
      end
      return best.fwhm.value
    end
    near(0.0165, 0.003, fwhm(9.5), "FWHM at 9.5 deg")
    near(0.032, 0.004, fwhm(70), "FWHM at 70 deg")
    assert.is_true(fwhm(80) > fwhm(60) and fwhm(60) > fwhm(40) and fwhm(40) > fwhm(20))
  end)

  -- SOURCE.md: 111 near 13.15 deg, FWHM about 0.8 deg; by Scherrer's formula with K = 0.9 that is 3.4 nm from the
  -- FWHM, and with K = 1 from an integral breadth of 1.2 to 1.57 times the FWHM 2.4 to 3.1 nm
  it("give platinum of some nanometres, with the overlap told", function()
    local size = results.methods.scherrer.size_volume.value
    assert.is_true(size > 2 and size < 4, size .. " nm")
    near(2.75, 0.4, results.lines[1].size_scherrer.value, "size by 111 in nm")
    near(13.15, 0.05, results.lines[1].two_theta.value, "111 in deg")
    near(0.8, 0.08, results.lines[1].fwhm.value, "FWHM of 111 in deg")
    -- the instrument's share is nothing here
    assert.is_true(results.lines[1].breadth_instrument.value < 0.05 * results.lines[1].breadth_sample.value)
    local told = false
    for _, text in ipairs(results.notes) do
      told = told or text:find("under neighbours", 1, true) ~= nil or text:find("overlap", 1, true) ~= nil
    end
    assert.is_true(told, "no note of overlap")
    -- bulk platinum 0.3924 nm; lines this broad are good for a per cent
    near(0.3924, 0.004, results.lattice.a.value, "a in nm")
  end)
end)

describe("the pyrochlore on a laboratory diffractometer", function()
  local scan = lw.read_scan(data .. "rb-pyrochlore/rbnb2o5f-lab-cu.xy", { radiation = "Cu Ka" })
  -- cell of the publication of these data: Inorg. Chem. 2025, doi 10.1021/acs.inorgchem.5c00615
  local published = lw.standard {
    name = "pyrochlore", title = "RbNb2O5F, published cell", formula = "RbNb2O5F", space_group = "Fd-3m", unit = "nm",
    cell = { a = 1.049561 }, expanded_uncertainty = { a = 0.000012 }, coverage_factor = 2, temperature_c = 22,
    certificate = "none", source = "doi 10.1021/acs.inorgchem.5c00615",
  }
  local lines, calibration
  setup(function()
    -- the data don't show the second slit: held
    lines = lw.fit_lines(scan, published:reflections(scan), { widths = "smooth", axial = "soller", fixed = "axial 2" })
    calibration = lw.calibrate(lines, published, { aberrations = { "zero_shift", "displacement" } })
  end)

  it("is counts", function()
    assert.are.same({ 8757, "counts" }, { scan.n, scan.noise })
    near(5.0197, 1e-9, scan.two_theta[1], "first angle")
    near(119.9884, 1e-9, scan.two_theta[scan.n], "last angle")
  end)

  it("stands where the published analysis put it", function()
    -- its CIF adds 0.0438 deg to every angle (pdcif/rbnb2o5f-profile.cif): lines stand that much too low
    local sum, n = 0, 0
    for _, line in ipairs(calibration.record.lines) do
      if line.area.value > 1000 then
        sum, n = sum + line.difference.value, n + 1
      end
    end
    assert.is_true(n >= 15)
    near(-0.0438, 0.005, sum / n, "mean difference in deg")
  end)

  it("shows zero and displacement, and agrees with the cell after them", function()
    local found = calibration.record.aberrations
    assert.is_true(math.abs(found.displacement.value) > 5 * found.displacement.u, tostring(found.displacement))
    assert.is_true(math.abs(found.zero_shift.value) > 5 * found.zero_shift.u, tostring(found.zero_shift))
    -- with one constant the misfit is several times as large
    local zero = lw.calibrate(lines, published, { aberrations = { "zero_shift" } })
    assert.is_true(calibration.record.fit.position_rms_deg < 0.004, calibration.record.fit.position_rms_deg)
    assert.is_true(zero.record.fit.position_rms_deg > 3 * calibration.record.fit.position_rms_deg)
    -- and by a plain fit to the strong lines: 2theta shift = zero - 2 s cos(theta) / R
    local y, one, cosine = {}, {}, {}
    for _, line in ipairs(calibration.record.lines) do
      if line.area.value > 1000 then
        y[#y + 1], one[#one + 1] = line.difference.value, 1
        cosine[#cosine + 1] = -2 / 200 * math.cos(math.rad(line.two_theta.value / 2)) * 180 / math.pi
      end
    end
    local c, rms = least_squares(y, { one, cosine })
    assert.is_true(rms < 0.004, rms .. " deg")
    near(c[2], 0.03, found.displacement.value, "displacement in mm")
  end)

  it("has lines as wide as can be read off the scan", function()
    -- SOURCE.md: 0.09 to 0.13 deg with the doublet, so less for one wavelength
    for _, line in ipairs(lines) do
      assert.is_true(line.fwhm.value > 0.05 and line.fwhm.value < 0.13, line.hkl)
    end
  end)
end)

describe("powder CIF from others", function()
  it("is read: point ids, corrected angles, intensities with s.u.", function()
    local scan = lw.read_scan(data .. "pdcif/rbnb2o5f-profile.cif", {})
    assert.are.same({ 8751, "sigma" }, { scan.n, scan.noise })
    near(5.1423, 1e-9, scan.two_theta[1], "first angle")
    near(0.15406, 1e-12, scan.radiation.wavelength_nm, "wavelength in nm")
    -- its angles are the laboratory scan's, 0.0438 deg higher
    local plain = lw.read_scan(data .. "rb-pyrochlore/rbnb2o5f-lab-cu.xy", { radiation = "Cu Ka" })
    for _, angle in ipairs { 28.18, 49.06, 82.06 } do
      local here, there = scan:at(angle), plain:at(angle - 0.0438)
      assert.is_true(math.abs(here - there) < 0.02 * there, angle .. " deg")
    end
  end)

  it("is read and fitted: two wavelengths, angles from min, max and step", function()
    local scan = lw.read_scan(data .. "pdcif/cod-1516218-profile.cif", {})
    assert.are.same({ 3955, 2 }, { scan.n, #scan.radiation.components })
    near(0.1540598, 1e-12, scan.radiation.components[1].wavelength_nm, "wavelength 1 in nm")
    near(0.1544390, 1e-12, scan.radiation.components[2].wavelength_nm, "wavelength 2 in nm")
    near(0.5, 1e-12, scan.radiation.components[2].weight / scan.radiation.components[1].weight, "ratio of weights")
    near(89.988, 1e-9, scan.two_theta[scan.n], "last angle")
    -- cell of the record itself, from J. Phys. Chem. B 115, 11805
    local salt = lw.material { name = "salt", title = "propylammonium chloride", formula = "C3H10NCl",
      space_group = "P4/nmm", unit = "angstrom", cell = { a = 6.26428, c = 7.40545 }, source = "COD 1516218" }
    local lines = lw.fit_lines(scan, salt:reflections(scan), {})
    -- SOURCE.md: the strongest lines stand 0.05 deg above what the cell gives; here d = 1 / sqrt(h2/a2 + l2/c2)
    local expected = { ["001"] = 7.40545, ["101"] = 1 / math.sqrt(1 / 6.26428 ^ 2 + 1 / 7.40545 ^ 2),
                       ["200"] = 3.13214, ["111"] = 1 / math.sqrt(2 / 6.26428 ^ 2 + 1 / 7.40545 ^ 2) }
    local seen = 0
    for _, line in ipairs(lines) do
      local d = expected[line.hkl]
      if d then
        seen = seen + 1
        near(0.035, 0.025, line.two_theta.value - 2 * math.deg(math.asin(1.540598 / (2 * d))), line.hkl .. " above")
        assert.is_true(line.fwhm.value > 0.08 and line.fwhm.value < 0.15, line.hkl)
      end
    end
    assert.are.equal(4, seen)
  end)
end)

describe("columns with a row of names", function()
  it("are read and fitted: low counts, widths that depend on direction", function()
    local scan = lw.read_scan(data .. "tacr2o6/tacr2o6-lab.csv", { radiation = "Cu Ka" })
    assert.are.same({ 4251, "counts" }, { scan.n, scan.noise })
    near(63, 0, (scan.intensity:min()), "least count")
    near(2995, 0, (scan.intensity:max()), "largest count")
    local oxide = lw.material { name = "oxide", title = "TaCr2O6", formula = "TaCr2O6", space_group = "P42/mnm",
      unit = "angstrom", cell = { a = 4.646, c = 3.027 }, source = "SOURCE.md" }
    local lines = lw.fit_lines(scan, oxide, { widths = "auto" })
    local by_name = {}
    for _, line in ipairs(lines) do
      by_name[line.hkl] = line
    end
    -- the cell gives the strong lines to the figures it has (0.001 angstrom: 0.02 deg)
    for hkl, d in pairs { ["110"] = 4.646 / math.sqrt(2), ["101"] = 1 / math.sqrt(1 / 4.646 ^ 2 + 1 / 3.027 ^ 2),
                          ["211"] = 1 / math.sqrt(5 / 4.646 ^ 2 + 1 / 3.027 ^ 2) } do
      near(2 * math.deg(math.asin(1.54059 / (2 * d))), 0.06, by_name[hkl].two_theta.value, hkl .. " in deg")
      assert.is_true(by_name[hkl].two_theta.u < 0.01)
      assert.is_true(by_name[hkl].fwhm.value > 0.1 and by_name[hkl].fwhm.value < 0.3)
    end
    -- absent in a rutile-type cell: h + l odd for h0l
    assert.is_nil(by_name["100"])
    assert.is_nil(by_name["201"])
  end)

  it("are read with semicolons; a material that isn't there is refused", function()
    local scan = lw.read_scan(data .. "ceramic/mixed-ceramic.csv", { radiation = "Cu Ka" })
    assert.are.same({ 2989, "counts" }, { scan.n, scan.noise })
    near(10.006, 0.001, scan.two_theta[1], "first angle")
    near(69.819, 0.001, scan.two_theta[scan.n], "last angle")
    -- SOURCE.md: quartz 101 at 3.344 angstrom is the strongest line there
    local top, at = 0, 0
    for i, angle in ipairs(scan.two_theta) do
      if angle > 26 and angle < 27.3 and scan.intensity[i] > top then top, at = scan.intensity[i], angle end
    end
    near(3.344, 0.01, 1.54059 / (2 * math.sin(math.rad(at / 2))), "d of quartz 101 in angstrom")
    for _, name in ipairs { "nickel", "tungsten", "gold", "iron" } do
      assert.error_matches(function() lw.fit_lines(scan, lw.material(name), {}) end,
        "mixed%-ceramic%.csv: the lines of the scan are not where the reflections are expected")
    end
  end)
end)
