-- SPDX-License-Identifier: GPL-3.0-or-later
-- The recipes of the instrument's own life: after a service, and its history.
local lw = require "linewright"
local helper = dofile((debug.getinfo(1, "S").source:match "^@(.*/)" or "./") .. "helper.lua")

local function calibrate(name, options)
  local scan = lw.read_scan(helper.demo .. "/" .. name .. ".xy", { radiation = "Cu Ka" })
  local lines = lw.fit_lines(scan, lw.standard("lab6-660c"):reflections(scan), { widths = "smooth", axial = "soller" })
  return lw.calibrate(lines, "lab6-660c", options)
end

describe("a service", function()
  local before, after, folder
  setup(function()
    folder = helper.folder()
    before, after = calibrate "lab6_before_service", calibrate "lab6_after_service"
    before:save(folder .. "/before.json")
    after:save(folder .. "/after.json")
    helper.write(folder .. "/wide.lua",
      "return { zero_shift = 1, displacement = 1, flat_specimen = 1, transparency = 1, shift = 1, fwhm = 200,\n"
        .. "  breadth = 200, asymmetry = 1, intensity = 100 }\n")
  end)
  teardown(function() helper.remove(folder) end)

  it("is compared: before minus after as the diffractometer was really set", function()
    local change = after:compare(before, { effects = false })
    local by_name = {}
    for _, row in ipairs(change.quantities) do by_name[row.name] = row end
    -- the traced diffractometer: zero shift 0.021 and -0.008 deg, displacement 0.085 and -0.030 mm
    assert.is_near(-0.029, by_name.zero_shift.difference.value, 0.002)
    assert.is_near(-0.115, by_name.displacement.difference.value, 0.004)
    assert.are.equal("fail", change.verdict)
    assert.is_true(#change.reasons > 0)
    assert.are.equal(0, #change.effects)
    assert.is_near(by_name.zero_shift.difference.value / by_name.zero_shift.difference.u, by_name.zero_shift.z, 1e-9)
    assert.are.equal("pass", before:compare(before, { effects = false }).verdict)
    assert.are.equal("pass", after:compare(before, { effects = false, tolerances = folder .. "/wide.lua" }).verdict)
  end)

  it("takes the laboratory's tolerances, and says what it does not know", function()
    local function with(tolerances)
      return function() after:compare(before, { effects = false, tolerances = tolerances }) end
    end
    assert.error_matches(with { zero_shfit = 1 }, "zero_shift")
    assert.error_matches(with { fwhm = -1 }, "fwhm")
    assert.error_matches(with(folder .. "/nothing.lua"), "nothing.lua")
    assert.error_matches(function() after:compare(before, { efects = false }) end, "effects")
    assert.error_matches(function() after:compare() end, "calibration")
  end)

  it("refuses what can't be compared", function()
    local record = helper.read(folder .. "/before.json")
    local text = record:gsub('"geometry": "reflection"', '"geometry": "capillary"')
    helper.write(folder .. "/capillary.json", text)
    assert.error_matches(function() after:compare(lw.load_calibration(folder .. "/capillary.json")) end, "geometry")
    text = record:gsub('"wavelength_nm": 0%.154', '"wavelength_nm": 0.174')
    helper.write(folder .. "/iron.json", text)
    local iron = lw.load_calibration(folder .. "/iron.json")
    assert.error_matches(function() after:compare(iron) end, "nothing to compare")
  end)

  it("is told by its recipe, which fails under strict", function()
    local arguments = { helper.root .. "/scripts/after_service.lua", "before=before.json", "after=after.json",
                        "out=told" }
    local code, out = helper.run(folder, arguments)
    assert.are.equal(0, code)
    assert.matches("linewright/comparison/1", out)
    local record = helper.read(folder .. "/told/comparison.json")
    assert.matches('"reported_size_nm"', record)
    assert.matches('"schema": "linewright/comparison/1"', record)
    local report = helper.read(folder .. "/told/report.html")
    assert.matches("licensed", report)
    for _, name in ipairs { "profile_low", "profile_middle", "profile_high", "asymmetry_before_after",
                            "fwhm_before_after", "effects_grid_size", "effects_grid_strain" } do
      assert.is_true(#helper.read(folder .. "/told/figures/" .. name .. ".svg") > 1000, name)
    end
    arguments[#arguments + 1] = "strict=true"
    assert.are.equal(3, (helper.run(folder, arguments)))
    arguments[#arguments + 1] = "tolerances=wide.lua"
    assert.are.equal(0, (helper.run(folder, arguments)))
    local missing, _, message = helper.run(folder, { arguments[1], "before=gone.json", "after=after.json" })
    assert.are.equal(1, missing)
    assert.matches("gone.json", message)
  end)

  it("is a mark in the history", function()
    local function entry(calibration, label, after_service)
      return { calibration = calibration, label = label, after_service = after_service }
    end
    local list = {}
    for i = 1, 8 do list[i] = entry(before, "day " .. i) end
    list[9] = entry(after, "day 9")
    local history = lw.history(list)
    assert.are.equal("fail", history.verdict)
    local found = false
    for _, signal in ipairs(history.signals) do
      found = found
        or (signal.calibration == "day 9" and signal.quantity == "zero_shift" and signal.rule == "beyond_limits")
    end
    assert.is_true(found)
    list[9].after_service = true
    assert.are.equal("pass", lw.history(list).verdict)
    assert.error_matches(function() lw.history { entry(before, "alone") } end, "two")
    assert.error_matches(function() lw.history({ { calibraton = before } }) end, "calibration")
  end)
end)

describe("the optical profile", function()
  it("gives the traced diffractometer back, and is kept in the record", function()
    local optical = calibrate("lab6_after_service", { profile = "optical" })
    local aberrations, geometry = optical.record.aberrations, optical.record.profile.optical
    assert.is_near(-0.008, aberrations.zero_shift.value, 0.005)
    assert.is_near(-0.030, aberrations.displacement.value, 0.008)
    assert.is_near(20, geometry.specimen_length.value, 0.6)
    assert.is_true(geometry.chi2_per_degree_of_freedom < 1.05)
    local folder = helper.folder()
    optical:save(folder .. "/c.json")
    local again = lw.load_calibration(folder .. "/c.json")
    assert.are.equal(optical:profile_at(60).breadth.value, again:profile_at(60).breadth.value)
    helper.remove(folder)
  end)

  it("knows each figure of the profile and how sure it is", function()
    local read = dofile(helper.root .. "/tests/truth/json.lua")
    for _, name in ipairs { "lab6_before_service", "lab6_after_service" } do
      -- one-wavelength profiles by ray tracing, their own u 0.2 % and less
      local truth = read(helper.read(helper.root .. "/tests/data/raytraced/" .. name .. ".truth.json"))
      local record, exact, seen = calibrate(name, { profile = "optical" }).record, {}, 0
      for _, row in ipairs(truth.instrument_profile.rows) do exact[row.two_theta] = row end
      assert.is_true(record.profile.optical.chi2_per_degree_of_freedom < 1.05, name)
      -- nobody told the attenuation: the lines' places and shape do
      assert.is_true(math.abs(record.profile.optical.attenuation:pull(55)) < 3, name)
      for _, row in ipairs(record.instrument_profile) do
        local is = exact[row.two_theta]
        if row.two_theta >= 25 and row.two_theta <= 145 then
          local where, third = name .. " " .. row.two_theta, math.abs(is.third_central_moment)
          assert.is_near(is.fwhm, row.fwhm.value, 0.006 * is.fwhm, where)
          assert.is_near(is.breadth, row.breadth.value, 0.005 * is.breadth, where)
          assert.is_near(is.shift_centroid, row.shift.value, 0.0004, where)
          -- at 100 and 105 deg it passes through 0, and a share of it says little
          assert.is_near(is.third_central_moment, row.third_moment.value, math.max(0.02 * third, 1.5e-8), where)
          local u = math.sqrt(row.third_moment.u ^ 2 + is.third_central_moment_u ^ 2)
          assert.is_true(math.abs(row.third_moment.value - is.third_central_moment) < 3.5 * u, where)
          seen = seen + 1
        end
      end
      assert.are.equal(25, seen)
    end
  end)

  it("shows its shape: of unit area, where the rays fall, with the tail on the right side", function()
    local read = dofile(helper.root .. "/tests/truth/json.lua")
    local truth = read(helper.read(helper.root .. "/tests/data/raytraced/lab6_after_service.truth.json"))
    for _, profile in ipairs { "empirical", "optical" } do
      local instrument = calibrate("lab6_after_service", { profile = profile })
      for _, row in ipairs(truth.instrument_profile.rows) do
        if row.two_theta == 40 or row.two_theta == 90 or row.two_theta == 140 then
          local curve, area, mean, top = instrument:profile_curve(row.two_theta), 0, 0, 0
          local step = curve.offset[2] - curve.offset[1]
          for i, y in ipairs(curve.density) do
            area, mean = area + y * step, mean + y * curve.offset[i] * step
            top = math.max(top, y)
          end
          assert.is_near(1, area, 0.01, profile)
          assert.is_near(row.breadth, 1 / top, 0.05 * row.breadth, profile) -- area over height, as traced
          -- the tail that the traced third moment shows: below 100 deg to low angles, beyond to high ones
          local asymmetry = instrument:asymmetry_at({ row.two_theta })[1]
          assert.is_true(asymmetry.value * row.third_central_moment > 0, profile)
          if profile == "optical" then
            local zero, height = -0.008, 2 * 0.030 * math.cos(math.rad(row.two_theta / 2)) / 217.5
            assert.is_near(row.shift_centroid, mean / area + zero + math.deg(height), 0.0006, profile)
          end
        end
      end
      assert.error_matches(function() instrument:profile_curve(170) end, "170")
      assert.error_matches(function() instrument:asymmetry_at({}) end, "angles")
      assert.error_matches(function() instrument:asymmetry_at({ 30, "far" }) end, "angle")
    end
  end)

  it("takes another specimen: silicon by the calibration from lanthanum hexaboride", function()
    local optical = calibrate("lab6_after_service", { profile = "optical" })
    local silicon = optical:for_specimen { attenuation = 7.5 } -- as traced: tests/data/raytraced/si.truth.json
    local scan = lw.read_scan(helper.root .. "/tests/data/raytraced/si.xy", { radiation = "Cu Ka" })
    local lines = lw.fit_lines(scan, lw.standard("si-640f"):reflections(scan), { instrument = silicon })
    local a = lw.separate(lw.deconvolve(lines), { methods = { "scherrer" } }):get "lattice.a"
    assert.is_near(0.543114, a.value, 30e-6 * 0.543114)
    assert.error_matches(function() calibrate("lab6_after_service"):for_specimen { attenuation = 1 } end, "optical")
    assert.error_matches(function() optical:for_specimen { attenuation = -1 } end, "attenuation")
    assert.error_matches(function() optical:for_specimen { atenuation = 1 } end, "attenuation")
  end)

  it("lets silicon's lines tell its transparency where nobody did", function()
    local scan = lw.read_scan(helper.root .. "/tests/data/raytraced/si.xy", { radiation = "Cu Ka" })
    for _, profile in ipairs { "empirical", "optical" } do
      local instrument = calibrate("lab6_after_service", { profile = profile })
      local lines = lw.fit_lines(scan, lw.standard("si-640f"):reflections(scan), { instrument = instrument })
      local results = lw.separate(lw.deconvolve(lines), { methods = { "scherrer" } })
      local lattice = results.lattice
      -- as traced (tests/data/raytraced/si.truth.json): a 0.543114 nm, displacement -0.012 mm, 7.5 mm^-1
      assert.is_near(0.543114, lattice.a.value, 30e-6 * 0.543114, profile)
      assert.is_true(math.abs(lattice.a:pull(0.543114)) < 3, profile)
      assert.is_true(math.abs(lattice.displacement:pull(-0.012)) < 3, profile)
      assert.is_true(lattice.transparency.value < -5 * lattice.transparency.u, profile)
      assert.are.equal("displacement, transparency", lattice.tried[#lattice.tried].refined)
      assert.are.equal(0, lattice.tried[#lattice.tried].aicc_above_best)
      -- what the specimen adds is part of the uncertainty of the cell
      assert.is_true(lattice.transparency_correlation > 0.5 and lattice.displacement_with_transparency < 0, profile)
    end
  end)

  it("is chosen where the header gives the slits and the evidence is for it, and the record says so", function()
    local chosen = calibrate("lab6_before_service", { profile = "auto" })
    assert.is_truthy(chosen.record.profile.optical)
    assert.matches("^optical: Akaike", chosen.record.profile_chosen)
    -- the same counts without the header
    local scan = lw.read_scan(helper.demo .. "/lab6_before_service.xy", { radiation = "Cu Ka" })
    local bare = lw.scan { two_theta = scan.two_theta, intensity = scan.intensity, radiation = "Cu Ka" }
    local reflections = lw.standard("lab6-660c"):reflections(bare)
    local lines = lw.fit_lines(bare, reflections, { widths = "smooth", axial = "soller" })
    local other = lw.calibrate(lines, "lab6-660c", { profile = "auto", goniometer_radius = 217.5 })
    assert.is_nil(other.record:get "profile.optical")
    assert.matches("^empirical: neither", other.record.profile_chosen)
    assert.matches("not flat", lw.calibrate(lines, "lab6-660c",
      { profile = "auto", geometry = "capillary" }).record.profile_chosen)
    -- slits that are far too wide describe the lines worse than width functions do
    local wrong = lw.calibrate(lines, "lab6-660c",
      { profile = "auto", goniometer_radius = 217.5, slit_width = 0.6, divergence = 0.75 })
    assert.is_nil(wrong.record:get "profile.optical")
    assert.matches("^empirical: ", wrong.record.profile_chosen)
    assert.error_matches(function()
      lw.calibrate(lines, "lab6-660c", { profile = "auto", slit_width = -1, divergence = 1 })
    end, "slit_width")
  end)

  it("refuses an impossible geometry", function()
    local function with(options)
      options.profile = "optical"
      return function() calibrate("lab6_after_service", options) end
    end
    assert.error_matches(with { slit_width = -0.1 }, "slit_width")
    assert.error_matches(with { soller = math.pi / 2 }, "soller")
    assert.error_matches(with { goniometer_radius = 0.5 }, "radius")
    assert.error_matches(with { refine = { "slit_with" } }, "slit_with")
  end)
end)

describe("spectral purity", function()
  local scan, lines
  local function fit(of)
    return lw.fit_lines(of, lw.standard("lab6-660c"):reflections(of), { widths = "smooth", axial = "soller" })
  end
  setup(function()
    scan = lw.read_scan(helper.demo .. "/lab6_after_service.xy", { radiation = "Cu Ka" })
    lines = fit(scan)
  end)

  -- Lorentz-polarisation factor of a powder
  local function factor(two_theta)
    local theta = math.rad(two_theta / 2)
    return (1 + math.cos(2 * theta) ^ 2) / (math.sin(theta) ^ 2 * math.cos(theta))
  end

  -- The scan with K-beta lines of a share of each line's area, pseudo-Voigt in shape.
  local function with_beta(share)
    local ratio = scan.radiation.k_beta_nm / scan.radiation.wavelength_nm
    local extra = {}
    for i = 1, scan.n do extra[i] = 0 end
    local step = (scan.two_theta[scan.n] - scan.two_theta[1]) / (scan.n - 1)
    for _, line in ipairs(lines) do
      local place = 2 * math.deg(math.asin(ratio * math.sin(math.rad(line.two_theta.value / 2))))
      local width = line.fwhm.value + 0.6 * math.deg(2 * math.tan(math.rad(place / 2)) * 4e-4)
      local area = share * line.area.value * factor(place) / factor(line.two_theta.value)
      local middle = math.floor((place - scan.two_theta[1]) / step + 1.5)
      for i = math.max(1, middle - 200), math.min(scan.n, middle + 200) do
        local x = (scan.two_theta[i] - place) / width
        local gauss, lorentz = 0.9394 * math.exp(-4 * math.log(2) * x * x), 0.6366 / (1 + 4 * x * x)
        extra[i] = extra[i] + area / width * (0.7 * gauss + 0.3 * lorentz)
      end
    end
    local intensity = scan.intensity:map(function(counts, i) return math.floor(counts + extra[i] + 0.5) end)
    local made = lw.scan { two_theta = scan.two_theta, intensity = intensity, radiation = "Cu Ka" }
    return lw.calibrate(fit(made), "lab6-660c", { goniometer_radius = 217.5 }).record.purity
  end

  it("is a limit where nothing is seen, and a share where something is", function()
    local pure = with_beta(0)
    assert.are.equal("K-beta", pure[1].line)
    for i = 1, #pure do
      assert.are.equal("upper limit", pure[i].relative_intensity.kind, pure[i].line)
      assert.is_true(pure[i].relative_intensity.value < 0.001, pure[i].line)
    end
    local beta = with_beta(0.01)[1].relative_intensity
    assert.are.equal("value", beta.kind)
    assert.is_near(0.01, beta.value, 0.0015) -- the shapes differ
  end)
end)
