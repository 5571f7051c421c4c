-- SPDX-License-Identifier: GPL-3.0-or-later
-- The recipes through the command line: exit codes, files and records as the contract has them.
local helper = dofile((debug.getinfo(1, "S").source:match "^@(.*/)" or "./") .. "helper.lua")
local record = dofile(helper.spec .. "/record.lua")

local scripts, demo = helper.root .. "/scripts/", helper.demo
local before, after = demo .. "/lab6_before_service.xy", demo .. "/lab6_after_service.xy"
local nickel = demo .. "/nickel_milled_04h.xy"

-- What jsonschema, an implementation from outside, says against a record: "" if nothing; nil without it.
local python = helper.exists "/usr/bin/python3" and "/usr/bin/python3" or "python3"
local has_jsonschema = os.execute(python .. " -c 'import jsonschema' 2>/dev/null") == true
local function schema_errors(name, path)
  return helper.output_of(table.concat({ python, "-c", helper.quote [[
import json, sys, jsonschema
schema = json.load(open(sys.argv[1])); record = json.load(open(sys.argv[2]))
kind = jsonschema.validators.validator_for(schema)
for e in list(kind(schema).iter_errors(record))[:5]:
    print("/".join(map(str, e.absolute_path)), e.message[:200])
]], helper.quote(helper.root .. "/standards/schema/" .. name), helper.quote(path), "2>&1" }, " "))
end

-- All of a record but what may differ from run to run.
local function without_provenance(path)
  local value = record.read(path)
  value.provenance = nil
  return value
end

describe("the recipe", function()
  local made -- a folder with calibrations of the scans before and after service
  local folder
  local codes = {}
  local function recipe(name, ...)
    return helper.run(folder, { scripts .. name .. ".lua", ... })
  end
  setup(function()
    made = helper.folder()
    for name, scan in pairs { before = before, after = after } do
      local arguments = { scripts .. "calibrate.lua", "scan=" .. scan, "standard=lab6-660c", "radiation=Cu Ka",
                          "out=" .. name }
      if name == "after" then arguments[#arguments + 1] = "geometry=reflection" end
      codes[name] = { helper.run(made, arguments) }
    end
  end)
  teardown(function() helper.remove(made) end)
  before_each(function() folder = helper.folder() end)
  after_each(function() helper.remove(folder) end)

  describe("calibrate", function()
    it("writes calibration.json, report.html and figures", function()
      assert.are.same({ 0, "" }, { codes.before[1], codes.before[3] })
      assert.matches("verdict +pass", codes.before[2])
      for _, name in ipairs { "calibration.json", "report.html", "figures/instrument_width.svg",
                              "figures/lines.svg" } do
        assert.is_true(helper.exists(made .. "/before/" .. name), name)
      end
      assert.is_false(helper.exists(made .. "/before/results.json"))
      local left = helper.output_of("find " .. helper.quote(made) .. " -name '*.tmp*' -o -name '.?*' -type f")
      assert.are.equal("", (left:gsub("[^\n]*/%.out\n?", ""):gsub("[^\n]*/%.err\n?", "")))
    end)

    it("writes a record that its schema holds", function()
      if not has_jsonschema then
        pending "python3-jsonschema is not here"
        return
      end
      assert.are.equal("", schema_errors("calibration-1.json", made .. "/before/calibration.json"))
      assert.are.equal("", schema_errors("calibration-1.json", made .. "/after/calibration.json"))
    end)

    it("gives the fields of the contract, quantities with value, u and unit", function()
      local r = record.read(made .. "/before/calibration.json")
      assert.are.equal("linewright/calibration/1", r.schema)
      for _, name in ipairs { "radiation", "standard", "valid_two_theta", "aberrations", "goniometer_radius", "profile",
                              "instrument_profile", "covariance", "lines", "verdict", "provenance" } do
        assert.is_not_nil(r[name], name)
      end
      assert.are.equal("deg", r.aberrations.zero_shift.unit)
      assert.are.equal("mm", r.aberrations.displacement.unit)
      -- the scan's own header states the radius
      assert.are.same({ 217.5, "mm" }, { r.goniometer_radius.value, r.goniometer_radius.unit })
      local low, high = r.valid_two_theta[1], r.valid_two_theta[2]
      assert.is_true(low < high and low > 20 and high < 151)
      -- every 5 degrees of the valid range
      assert.are.equal(math.floor(high / 5) - math.ceil(low / 5) + 1, #r.instrument_profile)
      for i, row in ipairs(r.instrument_profile) do
        assert.are.equal(5 * math.ceil(low / 5) + 5 * (i - 1), row.two_theta)
        for _, name in ipairs { "fwhm", "breadth", "shift" } do
          assert.are.equal("deg", row[name].unit)
          assert.is_true(row[name].u > 0)
        end
        assert.is_true(row.breadth.value > row.fwhm.value and row.fwhm.value > 0)
      end
      local n = #r.covariance.parameters
      assert.are.equal(n, #r.covariance.matrix)
      for i = 1, n do
        assert.are.equal(n, #r.covariance.matrix[i])
        assert.is_true(r.covariance.matrix[i][i] > 0, r.covariance.parameters[i])
        for j = 1, i do
          local one, other = r.covariance.matrix[i][j], r.covariance.matrix[j][i]
          assert.is_true(math.abs(one - other) <= 1e-12 * math.abs(one)) -- symmetric, but for rounding
          assert.is_true(one * one <= r.covariance.matrix[i][i] * r.covariance.matrix[j][j] * (1 + 1e-9))
        end
      end
    end)

    it("says which files it was made from", function()
      local r = record.read(made .. "/before/calibration.json").provenance
      local hash = helper.output_of("sha256sum " .. helper.quote(before)):match "^%x+"
      assert.are.equal(hash, r.files[1].sha256)
      assert.are.equal(helper.output_of("sha256sum " .. helper.quote(scripts .. "calibrate.lua")):match "^%x+",
        r.recipe.sha256)
      assert.are.same({ false, "Cu Ka" }, { r.trusted, r.recipe.inputs.radiation })
    end)

    it("compares with the time before", function()
      local code, out, err = recipe("calibrate", "scan=" .. after, "standard=lab6-660c", "radiation=Cu Ka",
        "previous=" .. made .. "/before/calibration.json", "out=again")
      assert.are.same({ 0, "" }, { code, err })
      assert.matches("changes_since_the_time_before", out)
      for _, quantity in ipairs { "zero_shift", "displacement", "FWHM at %d+ deg" } do
        assert.matches(quantity, out)
      end
      assert.matches("Since the time before", helper.read(folder .. "/again/report.html"))
      -- comparing changes nothing of the calibration
      assert.are.same(without_provenance(made .. "/after/calibration.json").profile,
        without_provenance(folder .. "/again/calibration.json").profile)
    end)
  end)

  describe("calibrate, of a goniometer whose angles go wrong by 0.06 deg to and fro,", function()
    local function wavy(...)
      local rows = {}
      for line in io.lines(before) do
        local angle, rest = line:match "^([%d.]+)( .*)$"
        rows[#rows + 1] = angle and ("%.4f%s"):format(angle + 0.06 * math.sin(angle / 5), rest) or line
      end
      helper.write(folder .. "/wavy.xy", table.concat(rows, "\n") .. "\n")
      return recipe("calibrate", "scan=wavy.xy", "standard=lab6-660c", "radiation=Cu Ka", "out=o", ...)
    end
    it("ends in 3 under strict=true, and writes all the same", function()
      local code, out, err = wavy "strict=true"
      assert.are.equal(3, code)
      assert.matches("verdict failed: [^\n]*calibration", err)
      assert.matches("verdict +fail", out)
      assert.are.equal("fail", record.read(folder .. "/o/calibration.json").verdict)
      assert.is_true(helper.exists(folder .. "/o/report.html"))
    end)
    it("ends in 0 without", function()
      local code, _, err = wavy()
      assert.are.equal(0, code, err)
      assert.matches("verdict failed", err) -- told all the same
      assert.are.equal("fail", record.read(folder .. "/o/calibration.json").verdict)
    end)
  end)

  describe("size_strain", function()
    it("writes results.json, report.html and figures, the same twice", function()
      for _, out in ipairs { "one", "two" } do
        local code, _, err = recipe("size_strain", "scan=" .. nickel, "material=nickel",
          "calibration=" .. made .. "/before/calibration.json", "out=" .. out)
        assert.are.same({ 0, "" }, { code, err })
      end
      assert.is_true(helper.exists(folder .. "/one/report.html"))
      assert.is_true(helper.exists(folder .. "/one/figures/lines.svg"))
      assert.is_false(helper.exists(folder .. "/one/calibration.json"))
      assert.are.same(without_provenance(folder .. "/one/results.json"),
        without_provenance(folder .. "/two/results.json"))
      local r = record.read(folder .. "/one/results.json")
      assert.are.equal("linewright/results/1", r.schema)
      for _, name in ipairs { "hkl", "two_theta", "fwhm", "breadth_observed", "breadth_instrument", "breadth_sample",
                              "size_scherrer" } do
        assert.is_not_nil(r.lines[1][name], name)
      end
      -- the scan from 35 to 150 deg holds seven lines of nickel
      local names = {}
      for i, line in ipairs(r.lines) do
        names[i] = line.hkl
      end
      assert.are.same({ "111", "200", "220", "311", "222", "400", "331" }, names)
      assert.is_not_nil(r.methods.williamson_hall.size_volume)
      assert.is_not_nil(r.lattice.a.value)
      assert.is_not_nil(r.agreement)
      assert.are.equal(helper.output_of("sha256sum " .. helper.quote(made .. "/before/calibration.json")):match "^%x+",
        r.provenance.calibration_sha256)
      assert.matches("\nSHA%-256 of the calibration: " .. r.provenance.calibration_sha256,
        helper.read(folder .. "/one/fit.cif"))
      if has_jsonschema then
        assert.are.equal("", schema_errors("results-1.json", folder .. "/one/results.json"))
      end
    end)

    it("takes the instrument from the standard's own lines, but not into a fitted shape", function()
      local function with(...)
        return recipe("size_strain", "scan=" .. nickel, "material=nickel", "standard=" .. after,
          "calibration=" .. made .. "/after/calibration.json", ...)
      end
      local code, _, err = with("deconvolve=stokes", "out=measured")
      assert.are.same({ 0, "" }, { code, err })
      assert.are.equal(0, (recipe("size_strain", "scan=" .. nickel, "material=nickel", "deconvolve=stokes",
        "calibration=" .. made .. "/after/calibration.json", "out=smooth")))
      local of = {}
      for _, out in ipairs { "measured", "smooth" } do
        of[out] = record.read(folder .. "/" .. out .. "/results.json").methods.williamson_hall
      end
      -- another instrument, so another number, though none that is far away
      local one, other = of.measured.size_volume, of.smooth.size_volume
      assert.are_not.equal(one.value, other.value)
      assert.is_true(math.abs(one.value - other.value) < 3 * math.sqrt(one.u ^ 2 + other.u ^ 2))
      local refused, _, why = with "out=shape"
      assert.are.equal(1, refused)
      assert.matches("method convolution folds the calibration's own function into a fit", why)
      assert.is_false(helper.exists(folder .. "/shape/results.json"))
    end)

    it("has a schema to be held against", function()
      if not has_jsonschema then pending "python3-jsonschema is not here" end
    end)

    it("gives the same from a calibration that was just made and from its record", function()
      local code, out, err = helper.recipe(folder, ([[
        local lw = require "linewright"
        local scan = lw.read_scan(%q, { radiation = "Cu Ka" })
        local lab6 = lw.standard "lab6-660c"
        local fresh = lw.calibrate(lw.fit_lines(scan, lab6:reflections(scan), { widths = "smooth", axial = "soller" }),
          lab6, { geometry = "reflection" })
        local job = lw.recipe { title = "Reload", inputs = {} }
        fresh:save(job:path "own.json")
        local loaded = lw.load_calibration(job:path "own.json")
        local function analyse(instrument)
          local powder = lw.material "nickel"
          local sample = lw.read_scan(%q, { radiation = instrument.radiation })
          sample = sample:crop(35, 150)
          local lines = lw.fit_lines(sample, powder:reflections(sample), { instrument = instrument })
          return lw.separate(lw.deconvolve(lines, {}))
        end
        local function flat(value, name, into)
          if type(value) == "table" then
            for key, one in pairs(value) do flat(one, name .. "." .. key, into) end
          elseif type(value) == "userdata" then
            into[#into + 1] = ("%%s %%a %%a"):format(name, value.value, value.u)
          else
            into[#into + 1] = name .. " " .. (math.type(value) == "float" and ("%%a"):format(value) or tostring(value))
          end
          return into
        end
        local first, second = flat(analyse(fresh):table(), "", {}), flat(analyse(loaded):table(), "", {})
        table.sort(first) table.sort(second)
        local differ = 0
        for i = 1, math.max(#first, #second) do
          if first[i] ~= second[i] then
            differ = differ + 1
            if differ < 6 then print(first[i], second[i]) end
          end
        end
        print(#first > 100, differ)
      ]]):format(before, nickel))
      assert.are.same({ 0, "" }, { code, err })
      assert.are.equal("true\t0\n", out)
    end)
  end)

  describe("milling_series", function()
    it("goes on where a scan is broken, and says which and why", function()
      os.execute(("cp %s %s/powder_02h.xy"):format(helper.quote(nickel), helper.quote(folder)))
      helper.write(folder .. "/powder_05h.xy", "35 100\n35.02 word\n35.04 100\n")
      local code, out, err = recipe("milling_series", "scans=powder_*.xy", "material=nickel",
        "calibration=" .. made .. "/before/calibration.json", "out=o")
      assert.are.same({ 0, "" }, { code, err })
      assert.matches("powder_05h.xy[^\n]*:2: ", out)
      local r = record.read(folder .. "/o/results.json")
      assert.are.equal(2, #r.scans)
      assert.are.equal("powder_02h.xy", r.scans[1].scan)
      assert.are.equal(7, #r.scans[1].lines)
      assert.are.equal(2, r.scans[1].milling_time_h)
      assert.is_true(r.scans[1].methods.williamson_hall.size_volume ~= nil)
      assert.are.equal("powder_05h.xy", r.scans[2].scan)
      assert.matches("powder_05h.xy:2: ", r.scans[2].error)
      local names, row, more = helper.read(folder .. "/o/series.csv"):match "^([^\n]*)\n([^\n]*)\n(.*)$"
      assert.are.equal("", more) -- one scan, one row
      for _, name in ipairs { "scan", "milling_time_h", "size_volume_nm", "u_size_volume_nm", "strain_rms" } do
        assert.is_truthy(("," .. names .. ","):find("," .. name .. ",", 1, true), names)
      end
      assert.is_truthy(row:find("powder_02h.xy", 1, true))
      assert.matches("Not analysed, and why", helper.read(folder .. "/o/report.html"))
      if has_jsonschema then
        assert.are.equal("", schema_errors("results-1.json", folder .. "/o/results.json"))
      end
    end)

    it("is an error where no scan can be analysed", function()
      helper.write(folder .. "/a.xy", "35 word\n")
      local code, _, err = recipe("milling_series", "scans=*.xy", "material=nickel",
        "calibration=" .. made .. "/before/calibration.json", "out=o")
      assert.are.equal(1, code)
      assert.matches("no scan of the series could be analysed: .*a.xy:1: ", err)
      assert.is_false(helper.exists(folder .. "/o/results.json"))
    end)
  end)

  -- what each must be given, in a sound form
  local sound = {
    calibrate = { scan = before, standard = "lab6-660c", radiation = "Cu Ka" },
    size_strain = { scan = nickel, material = "nickel", calibration = "cal.json" },
    milling_series = { scans = demo .. "/nickel_*.xy", material = "nickel", calibration = "cal.json" },
  }
  local function arguments_of(name, change)
    local words = {}
    for key, value in pairs(sound[name]) do
      local given = change[key] == nil and value or change[key]
      if given then words[#words + 1] = key .. "=" .. given end
    end
    for key, value in pairs(change) do
      if value and sound[name][key] == nil then words[#words + 1] = key .. "=" .. value end
    end
    return words
  end

  for name, inputs in pairs(sound) do
    it(name .. " lists its inputs on --help and does nothing", function()
      local code, out, err = recipe(name, "--help")
      assert.are.same({ 0, "" }, { code, err })
      assert.matches("usage: linewright ", out)
      for input in pairs(inputs) do
        assert.matches("\n +" .. input .. " +%S[^\n]+%(must be given%)", out)
      end
      assert.matches("\n +out +%S", out)
      assert.matches("\n +strict +%S", out)
      assert.are.equal("", helper.output_of("ls " .. helper.quote(folder)))
    end)

    for input in pairs(inputs) do
      it(name .. " asks for " .. input, function()
        helper.write(folder .. "/cal.json", "{}")
        local code, out, err = recipe(name, table.unpack(arguments_of(name, { [input] = false })))
        assert.are.same({ 1, "" }, { code, out })
        assert.matches(name .. "%.lua:%d+: ", err)
        assert.is_truthy(err:find(("the input '%s' is missing; give %s="):format(input, input), 1, true), err)
      end)
      it(name .. " gives the nearest name for a slip in " .. input, function()
        helper.write(folder .. "/cal.json", "{}")
        local slip = input .. "x"
        local code, _, err = recipe(name, table.unpack(arguments_of(name, { [input] = false, [slip] = "a" })))
        assert.are.equal(1, code)
        assert.is_truthy(err:find(("no input '%s'; did you mean '%s'"):format(slip, input), 1, true), err)
      end)
    end
  end

  for name, cases in pairs {
    calibrate = {
      { { radius = "wide" }, "input 'radius': 'wide' is not a number" },
      { { radius = "5" }, "5 is outside 10 to 2000 mm" },
      { { geometry = "reflexion" }, "did you mean 'reflection'" },
      { { noise = "scaling" }, "did you mean 'scaled'" },
      { { standard = "lab6-660x" }, "did you mean 'lab6-660" },
      { { radiation = "Cu Kx" }, "did you mean 'cu_ka'" },
      { { radiation = "1.5406" }, "no radiation is called '1.5406'" },
      { { radiation = "-1nm" }, "outside 0.001 to 1 nm" },
      { { scan = "nothing.xy" }, "can't open nothing.xy" },
      { { previous = "nothing.json" }, "can't open nothing.json" },
      { { strict = "maybe" }, "neither true nor false" },
    },
    size_strain = {
      { { material = "nickle" }, "did you mean 'nickel'" },
      { { deconvolve = "stoks" }, "did you mean 'stokes'" },
      { { low = "-5" }, "-5 is outside 0 to 180 deg" },
      { { high = "abc" }, "is not a number" },
      { { calibration = "nothing.json" }, "can't open nothing.json" },
      { { background = "nothing.xy" }, "can't open nothing.xy" },
    },
    milling_series = {
      { { scans = "nothing_*.xy" }, "no file fits 'nothing_*.xy'" },
    },
  } do
    for _, case in ipairs(cases) do
      local key, value = next(case[1])
      it(("%s refuses %s=%s"):format(name, key, value), function()
        if key ~= "calibration" then
          os.execute(("cp %s %s/cal.json"):format(helper.quote(made .. "/before/calibration.json"),
            helper.quote(folder)))
        end
        local code, out, err = recipe(name, table.unpack(arguments_of(name, case[1])))
        assert.are.same({ 1, "" }, { code, out })
        assert.matches(name .. "%.lua:%d+: ", err)
        assert.is_truthy(err:find(case[2], 1, true), err)
        assert.is_false(helper.exists(folder .. "/out"))
      end)
    end
  end

  it("size_strain gives the nearest name of a method", function()
    local code, _, err = recipe("size_strain", "scan=" .. nickel, "material=nickel", "methods=scherer",
      "calibration=" .. made .. "/before/calibration.json", "out=o")
    assert.are.equal(1, code)
    assert.matches("did you mean 'scherrer'", err)
    assert.is_false(helper.exists(folder .. "/o/results.json"))
  end)
end)
