-- SPDX-License-Identifier: GPL-3.0-or-later
-- Two standards in one calibration, against the ray-traced truth: lab6_after_service and si were traced through one
-- state of one diffractometer, each specimen mounted for itself (tests/data/raytraced/SOURCE.md).
local lw = require "linewright"
local here = debug.getinfo(1, "S").source:match "^@(.*/)" or "./"
local roads = dofile(here .. "roads.lua")
local helper, tell = roads.helper, roads.tell
local folder

local function fit(path, standard, options)
  standard = lw.standard(standard)
  local scan = lw.read_scan(path, { radiation = options and options.radiation or "Cu Ka" })
  local axial = options and options.axial or "soller"
  return lw.fit_lines(scan, standard:reflections(scan), { widths = "smooth", axial = axial })
end

-- Columns of a scan with its comments; f(two_theta, counts) gives what is written, or nil.
local function rewrite(name, to, f, keep_comments)
  local out = {}
  for line in helper.read(roads.path(name)):gmatch "[^\n]+" do
    local x, y = line:match "^([%d.]+) (%d+)$"
    if x then
      local new_x, new_y = f(tonumber(x), tonumber(y))
      if new_x then out[#out + 1] = ("%.3f %d"):format(new_x, new_y) end
    elseif keep_comments ~= false or line:find "radius" then
      out[#out + 1] = keep_comments == false and "# goniometer radius 217.5 mm" or line
    end
  end
  helper.write(folder .. "/" .. to, table.concat(out, "\n") .. "\n")
  return folder .. "/" .. to
end

local lab6, si
setup(function()
  folder = helper.folder()
  lab6, si = fit(roads.path "lab6_after_service", "lab6-660c"), fit(roads.path "si", "si-640f")
end)
teardown(function() helper.remove(folder) end)

-- How far zero and displacements are from the truth.
local function against_truth(calibration, order)
  local truth = { roads.truth "lab6_after_service".aberrations, roads.truth "si".aberrations }
  local zero = calibration.record.aberrations.zero_shift
  local off = { zero = zero.value - truth[1].zero_shift.value, zero_pull = zero:pull(truth[1].zero_shift.value) }
  for i, which in ipairs(order or { 1, 2 }) do
    local found = calibration.record.scans[i].aberrations.displacement
    off[which] = found.value - truth[which].displacement.value
    off[which + 2] = found:pull(truth[which].displacement.value)
  end
  return off
end

describe("LaB6 and silicon in one calibration", function()
  for _, profile in ipairs { "empirical", "optical" } do
    local joined
    it("find the instrument as it was set, " .. profile, function()
      joined = lw.calibrate({ { lab6, "lab6-660c" }, { si, "si-640f" } }, { profile = profile })
      local off = against_truth(joined)
      -- alone it would find its transparency from the places of its lines; scans that are joined are
      -- not transparent unless their shape or the analyst says so
      local single = lw.calibrate(lab6, "lab6-660c", { profile = profile, attenuation = 0 })
      tell("joined, %-9s zero off by %+.5f deg (%.5f LaB6 alone), displacement LaB6 %+.4f mm (%+.4f), Si %+.4f mm",
        profile, off.zero, single.record.aberrations.zero_shift.value + 0.008, off[1],
        single.record.aberrations.displacement.value + 0.030, off[2])
      assert.is_true(math.abs(off.zero) < 0.005 and math.abs(off[1]) < 0.008 and math.abs(off[2]) < 0.008)
      for _, pull in ipairs { off.zero_pull, off[3], off[4] } do
        assert.is_true(math.abs(pull) < 3)
      end
      -- not worse than the better scan alone, to a hundredth of its u, and surer
      local alone = single.record.aberrations
      assert.is_true(math.abs(off.zero) <= math.abs(alone.zero_shift.value + 0.008) + 0.01 * alone.zero_shift.u)
      assert.is_true(math.abs(off[1]) <= math.abs(alone.displacement.value + 0.030) + 0.01 * alone.displacement.u)
      assert.is_true(joined.record.aberrations.zero_shift.u < alone.zero_shift.u)
      assert.are.equal(1, joined.record.join.positions.birge_ratio)
      assert.are.equal("pass", joined.verdict)
      -- the profile is as good as that of LaB6 alone
      local function table_of(calibration)
        local rows = {}
        for _, row in ipairs(calibration.record.instrument_profile) do rows[row.two_theta] = row end
        return rows
      end
      local with, without, worst = table_of(joined), table_of(single), 0
      for _, row in ipairs(roads.truth "lab6_after_service".instrument_profile.rows) do
        for _, what in ipairs(row.two_theta >= 25 and row.two_theta <= 145 and { "fwhm", "breadth" } or {}) do
          local is = with[row.two_theta][what].value / row[what] - 1
          local was = without[row.two_theta][what].value / row[what] - 1
          worst = math.max(worst, math.abs(is))
          -- half a per cent is what the joined parameters' u leave
          assert.is_true(math.abs(is) <= math.abs(was) + 0.005,
            ("%s at %d deg: %.4f off, LaB6 alone %.4f"):format(what, row.two_theta, is, was))
        end
      end
      tell("joined, %-9s one-wavelength profile off by at most %.1f %%", profile, 100 * worst)
      if profile == "optical" then assert.is_true(worst < 0.02) end
    end)

    it("know whose width is whose, " .. profile, function()
      local scans = joined.record.scans
      assert.are.equal("profile and positions", scans[1].used_for)
      if profile == "empirical" then
        -- 1/(2 mu R) = 0.017 deg of transparency is as broad as the instrument
        assert.are.equal("positions", scans[2].used_for)
        assert.matches("broader than those of lab6%-660c", scans[2].why_not_profile)
      else
        assert.are.equal("profile and positions", scans[2].used_for)
        -- the traced specimen: 7.5/mm
        assert.is_true(math.abs(scans[2].attenuation:pull(7.5)) < 3, tostring(scans[2].attenuation))
        assert.is_true(joined.record.join.profile.p > 1e-3)
      end
    end)

    it("does not depend on their order, " .. profile, function()
      if profile == "optical" then return end -- the same code, for ten seconds
      local turned = lw.calibrate({ { si, "si-640f" }, { lab6, "lab6-660c" } }, { profile = profile })
      local one, other = joined.record.scans, turned.record.scans
      for i = 1, 2 do
        for name, is in pairs(one[i].aberrations) do
          assert.is_near(is.value, other[3 - i].aberrations[name].value, 1e-6 * is.u)
          assert.is_near(is.u, other[3 - i].aberrations[name].u, 1e-6 * is.u)
        end
      end
    end)
  end

  it("share no error of their certificates", function()
    -- two certificates are independent: what each adds to a variance adds up (JCGM 100:2008, 5.1.2), and were it one
    -- certificate, twice the product of both slopes would come in
    local function wider(name, factor)
      local literal = dofile(helper.root .. "/standards/reference/" .. name .. ".lua")
      literal.expanded_uncertainty.a = factor * literal.expanded_uncertainty.a
      return lw.standard(literal)
    end
    local function variances(of_lab6, of_si)
      local record = lw.calibrate({ { lab6, wider("lab6-660c", of_lab6) }, { si, wider("si-640f", of_si) } },
        { profile = "empirical" }).record
      return { record.aberrations.zero_shift.u ^ 2, record.scans[1].aberrations.displacement.u ^ 2 }
    end
    local none, one, other, both = variances(1, 1), variances(50, 1), variances(1, 50), variances(50, 50)
    for i = 1, 2 do
      local adds = { one[i] - none[i], other[i] - none[i], both[i] - none[i] }
      assert.is_true(2 * math.sqrt(adds[1] * adds[2]) > 0.1 * adds[3]) -- else one certificate would look the same
      assert.is_near(adds[1] + adds[2], adds[3], 1e-6 * adds[3])
    end
  end)

  it("can be told to use a scan for positions only", function()
    local joined = lw.calibrate({ { lab6, "lab6-660c" }, { si, "si-640f", positions_only = true } }, {})
    assert.matches("given for its positions only", joined.record.scans[2].why_not_profile)
  end)
end)

describe("two halves of one scan", function()
  -- Every count goes to one half or the other by a fair coin: the halves are independent Poisson scans of the same
  -- truth (thinning of a Poisson process), and joined they hold what the whole holds.
  local halves, whole = {}, nil
  setup(function()
    math.randomseed(20260, 1)
    local first = {}
    rewrite("lab6_after_service", "one.xy", function(x, y)
      local n = 0
      for _ = 1, y do n = n + math.random(0, 1) end
      first[x] = n
      return x, n
    end)
    rewrite("lab6_after_service", "other.xy", function(x, y) return x, y - first[x] end)
    halves = { fit(folder .. "/one.xy", "lab6-660c"), fit(folder .. "/other.xy", "lab6-660c") }
    whole = lw.calibrate(lab6, "lab6-660c", {})
  end)

  it("joined say what the whole says", function()
    local joined = lw.calibrate({ { halves[1], "lab6-660c" }, { halves[2], "lab6-660c" } }, {})
    assert.are.equal("profile and positions", joined.record.scans[2].used_for)
    assert.is_true(joined.record.join.profile.degrees_of_freedom >= 4)
    assert.is_true(joined.record.join.profile.p > 1e-3 and joined.record.join.positions.p > 1e-3)
    for angle = 25, 145, 20 do
      local is, was = joined:profile_at(angle), whole:profile_at(angle)
      -- the same data, to first order: apart by a part of u, and as sure (the bounds at zero widths differ)
      assert.is_near(was.fwhm.value, is.fwhm.value, 0.5 * was.fwhm.u)
      assert.is_near(1, is.fwhm.u / was.fwhm.u, 0.2)
    end
    local is, was = joined.record.aberrations, whole.record.aberrations
    -- a displacement of its own for each half costs certainty, never gives it
    assert.is_near(was.zero_shift.value, is.zero_shift.value, was.zero_shift.u)
    assert.is_near(1, is.zero_shift.u / was.zero_shift.u, 0.2)
  end)

  it("that are moved against each other are refused", function()
    rewrite("lab6_after_service", "moved.xy", function(x, y) return x + 0.02, y end)
    local moved = fit(folder .. "/moved.xy", "lab6-660c")
    -- its zero differs by 0.02 deg, which no displacement can imitate
    local function join() lw.calibrate({ { halves[1], "lab6-660c" }, { moved, "lab6-660c" } }, {}) end
    assert.error_matches(join, "contradict each other.*one state of the instrument")
  end)

  it("are refused with a scan from before the service, by its header and without one", function()
    local before = fit(roads.path "lab6_before_service", "lab6-660c")
    local function join(other)
      return function() lw.calibrate({ { lab6, "lab6-660c" }, { other, "lab6-660c" } }, {}) end
    end
    assert.error_matches(join(before), "divergence slit is 0.75, the first one's 0.5")
    local path = rewrite("lab6_before_service", "bare.xy", function(x, y) return x, y end, false)
    local bare = fit(path, "lab6-660c")
    assert.error_matches(join(bare), "widths contradict")
  end)
end)

describe("a joined calibration's record", function()
  local joined
  setup(function()
    joined = lw.calibrate({ { lab6, "lab6-660c" }, { si, "si-640f" } }, {})
    joined:save(folder .. "/joined.json")
  end)

  it("names all scans, and reads back as it was", function()
    local back = lw.load_calibration(folder .. "/joined.json")
    assert.are.equal("pass", back.verdict)
    for i, name in ipairs { "lab6_after_service", "si" } do
      assert.are.equal(helper.output_of("sha256sum " .. helper.quote(roads.path(name))):match "^%x+",
        back.record.scans[i].sha256)
    end
    for angle = 25, 145, 30 do
      assert.is_near(joined:profile_at(angle).fwhm.value, back:profile_at(angle).fwhm.value, 1e-12)
      assert.is_near(joined:profile_at(angle).shift.u, back:profile_at(angle).shift.u, 1e-9)
    end
    local c = back.record.covariance_joint
    assert.are.equal(#c.parameters, #c.matrix)
    -- the places follow the profile's axial divergence, and so do the aberrations
    local at = {}
    for i, name in ipairs(c.parameters) do at[name] = i end
    local r = c.matrix[at.second][at.zero_shift]
      / math.sqrt(c.matrix[at.second][at.second] * c.matrix[at.zero_shift][at.zero_shift])
    assert.is_true(math.abs(r) > 0.05 and math.abs(r) < 1, tostring(r))
    for i = 1, #c.parameters do
      for j = 1, i do
        assert.is_near(c.matrix[i][j], c.matrix[j][i], 1e-12 * math.sqrt(c.matrix[i][i] * c.matrix[j][j]))
      end
    end
  end)

  it("goes on: comparison, history, a powder", function()
    local before = lw.calibrate(fit(roads.path "lab6_before_service", "lab6-660c"), "lab6-660c", {})
    local change = joined:compare(before, { effects = false })
    for _, row in ipairs(change.quantities) do
      -- the traced diffractometer: zero shift 0.021 and -0.008 deg, displacement 0.085 and -0.030 mm
      if row.name == "zero_shift" then assert.is_near(-0.029, row.difference.value, 0.002) end
      if row.name == "displacement" then assert.is_near(-0.115, row.difference.value, 0.004) end
    end
    local control = lw.history({ { calibration = before, label = "before" },
                                { calibration = joined, label = "after", after_service = true } }, {})
    assert.are.equal("lab6-660c", control.calibrations[2].standard)
    local scan = lw.read_scan(roads.path "nickel_milled_04h", { radiation = joined.radiation })
    local lines = lw.fit_lines(scan, lw.material("nickel"):reflections(scan), { instrument = joined })
    assert.is_near(0.352, lw.separate(lw.deconvolve(lines, {})).lattice.a.value, 0.001)
  end)

  it("is refused when it contradicts itself", function()
    local text = helper.read(folder .. "/joined.json")
    local function load(pattern, change)
      local changed, n = text:gsub(pattern, change, 1)
      assert.are.equal(1, n)
      helper.write(folder .. "/spoilt.json", changed)
      return function() lw.load_calibration(folder .. "/spoilt.json") end
    end
    assert.error_matches(load('("instrument_profile".-"fwhm": {%s*"value": 0%.0)%d', "%19"),
      "instrument_profile's fwhm at 25 deg is")
    assert.error_matches(load('("W": {%s*"value": 0%.000)%d', "%19"), "follows from its parameters")
    assert.error_matches(load('("zero_shift": {%s*"value": %-0%.00)%d', "%11"), "instrument_profile's shift at 25 deg")
    assert.error_matches(load('("zero_shift": {[^}]-"u": 0%.00)%d', "%19"), "the u of zero_shift")
  end)
end)

describe("lines that do not stand where the certificate puts them", function()
  it("are named with their pull and what may be the reason", function()
    -- 310 at 71.75 deg moved by one step, as no aberration can
    local path = rewrite("lab6_after_service", "off.xy", function(x, y)
      if x > 70.45 and x < 73.05 then
        return x + 0.009, y
      elseif x >= 73.05 and x < 73.1 then
        return nil
      end
      return x, y
    end)
    local calibration = lw.calibrate(fit(path, "lab6-660c"), "lab6-660c", {})
    local named = {}
    for _, row in ipairs(calibration.record.off_certificate) do
      named[row.hkl] = row
    end
    assert.is_table(named["310"] and named["310"]:table())
    assert.is_near(0.009, named["310"].residual.value, 0.002)
    assert.is_true(named["310"].pull > 10)
    assert.is_true(#named["310"].why > 10)
    local told = false
    for _, warning in ipairs(calibration.record.warnings) do
      told = told or warning:find("line 310 lies 0.0", 1, true)
    end
    assert.is_truthy(told)
    assert.are.equal("attention", calibration.verdict)
    assert.are.equal(0, #lw.calibrate(lab6, "lab6-660c", {}).record.off_certificate)
  end)
end)

describe("a set of scans is refused", function()
  local function calibrate(...)
    local arguments = table.pack(...)
    return function() lw.calibrate(table.unpack(arguments, 1, arguments.n)) end
  end
  it("in words that say which and why", function()
    assert.error_matches(calibrate({}, {}), "0 scans")
    assert.error_matches(calibrate({ { lab6, "lab6-660c" }, { lab6, "lab6-660c" } }), "same scan was given twice")
    local again = fit(roads.path "lab6_after_service", "lab6-660c")
    assert.error_matches(calibrate({ { lab6, "lab6-660c" }, { again, "lab6-660c" } }), "same scan was given twice")
    assert.error_matches(calibrate({ { lab6, "lab6-660c" }, { si } }), "scan 2 has no standard")
    assert.error_matches(calibrate({ { lab6, "lab6-660c" }, si }), "lines")
    assert.error_matches(calibrate({ { lab6, "lab6-660c" }, { si, "si-640f", atenuation = 7 } }), "attenuation")
    assert.error_matches(calibrate({ { lab6, "lab6-660c" }, { si, "si-640f", attenuation = -7 } }),
      "negative")
    assert.error_matches(calibrate({ { lab6, "lab6-660c" }, { si, "si-640f" } }, "lab6-660c", {}),
      "options come second")
    assert.error_matches(calibrate({ { lab6, "lab6-660c", positions_only = true },
      { si, "si-640f", positions_only = true } }), "no scan is left")
    assert.error_matches(calibrate({ { lab6, "lab6-660c" }, { si, "si-640f" } }, { profil = "optical" }), "profile")
    -- the wrong certificate
    assert.error_matches(calibrate({ { lab6, "lab6-660c" }, { si, "lab6-660c" } }), "certificate")
  end)

  it("if they are of two radiations, two ways of fitting, or too few lines", function()
    local other = fit(roads.path "lab6_before_service", "lab6-660c", { axial = "finger_cox_jephcoat" })
    assert.error_matches(calibrate({ { lab6, "lab6-660c" }, { other, "lab6-660c" } }), 'axial = "finger')
    local cu = helper.read(helper.root .. "/standards/radiation/cu_ka.lua"):gsub("8047%.8372", "8047.0000", 1)
    helper.write(folder .. "/other.lua", cu)
    local mixed = fit(roads.path "si", "si-640f", { radiation = folder .. "/other.lua" })
    assert.error_matches(calibrate({ { lab6, "lab6-660c" }, { mixed, "si-640f" } }), "0.154075 nm")
    rewrite("si", "short.xy", function(x, y) if x < 50 then return x, y end end)
    local short = fit(folder .. "/short.xy", "si-640f")
    assert.error_matches(calibrate({ { lab6, "lab6-660c" }, { short, "si-640f" } },
      { aberrations = { "zero_shift", "displacement", "transparency", "flat_specimen" } }),
      "short.xy: . supported lines")
    -- a few lines still tell a displacement when the rest is shared
    rewrite("si", "range.xy", function(x, y) if x < 80 then return x, y end end)
    local range = lw.calibrate({ { lab6, "lab6-660c" }, { fit(folder .. "/range.xy", "si-640f"), "si-640f" } }, {})
    assert.is_true(math.abs(range.record.scans[2].aberrations.displacement:pull(-0.012)) < 3)
  end)
end)
