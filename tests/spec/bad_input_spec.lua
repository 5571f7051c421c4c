-- SPDX-License-Identifier: GPL-3.0-or-later
-- Input that is not as it should be, each through the interpreter: exit code 1, a message that names the
-- recipe's line and the file or value, nothing written, nothing lost. The last test counts the inputs.
local helper = dofile((debug.getinfo(1, "S").source:match "^@(.*/)" or "./") .. "helper.lua")

local scripts, demo = helper.root .. "/scripts/", helper.demo
local lab6, nickel = demo .. "/lab6_before_service.xy", demo .. "/nickel_milled_04h.xy"

-- distinct malformed inputs, by their names
local seen, count = {}, 0
local function note(name)
  assert(not seen[name], name .. " is there twice")
  seen[name], count = true, count + 1
end

local function shell(format, ...)
  return os.execute(format:format(...)) == true
end

-- Rows of a scan, as a text: from, to, step, and what stands at an angle (default: a line on a background).
local function rows(low, high, step, f)
  local out = {}
  for i = 0, math.floor((high - low) / step + 0.5) do
    local angle = low + i * step
    local counts = f and f(angle, i) or math.floor(100 + 5000 / (1 + ((angle - 30.38) / 0.05) ^ 2))
    out[#out + 1] = ("%.3f %s\n"):format(angle, tostring(counts))
  end
  return table.concat(out)
end

describe("malformed input", function()
  local made, folder, good
  setup(function()
    made = helper.folder()
    local code, _, err = helper.run(made, { scripts .. "calibrate.lua", "scan=" .. lab6, "standard=lab6-660c",
      "radiation=Cu Ka", "out=good" })
    assert(code == 0, err)
    good = helper.read(made .. "/good/calibration.json")
  end)
  teardown(function() helper.remove(made) end)
  before_each(function() folder = helper.folder() end)
  after_each(function() helper.remove(folder) end)

  -- The run must be refused, in words, by a line of the recipe, without a trace on the disk.
  local function refused(name, arguments, messages, options)
    local before_run = helper.output_of("ls -A " .. helper.quote(folder))
    local all = { scripts .. name .. ".lua", table.unpack(arguments) }
    all[#all + 1] = "out=out"
    local code, _, err = helper.run(folder, all, options)
    assert.are.equal(1, code, err)
    assert.matches(name .. "%.lua:%d+: ", err)
    for _, message in ipairs(messages) do
      assert.is_truthy(err:find(message, 1, true), ("'%s' is not in: %s"):format(message, err))
    end
    -- for a person: short, no addresses, no empty places
    for _, bad in ipairs { "0x%x%x%x%x", "%(null%)", "Sanitizer", "Assertion", "table: ", "userdata: " } do
      assert.not_matches(bad, err)
    end
    assert.is_true(#err < 1000, err)
    assert.is_false(helper.exists(folder .. "/out"), "something was written")
    local after_run = helper.output_of("ls -A " .. helper.quote(folder) .. " | grep -v '^\\.\\(out\\|err\\|input\\)$'")
    assert.are.equal(before_run, after_run)
  end

  -- name, text of the scan, messages
  local start = rows(20, 40, 0.02)
  for _, case in ipairs {
    { "empty file", "", "the file is empty" },
    { "blank lines only", "\n\n \n", "" },
    { "comments only", "# a\n# b\n", "" },
    { "one point", "10 1\n", "" },
    { "two points", "10 1\n10.1 2\n", "" },
    { "text for people", "Dear colleague,\nhere is the scan.\n", "scan.xy:2" },
    { "binary", ("\0\1\2\255\254RIFF"):rep(400), "scan.xy" },
    { "a NUL in the middle", start:sub(1, 3000) .. "\0" .. start:sub(3001), "scan.xy" },
    { "UTF-16", "\255\254" .. start:gsub(".", "%0\0"), "scan.xy" },
    { "a picture", "\137PNG\r\n\26\n" .. ("\0\0\0\13IHDR"):rep(50), "scan.xy" },
    { "gzip magic, nothing after", "\31\139", "scan.xy" },
    { "cut within the last number", start .. "40.02", "scan.xy:1002" },
    { "a row with one column more", "10 1\n10.1 2 3\n10.2 3\n10.3 3\n", "scan.xy:2" },
    { "a row with one column less", "10 1\n10.1\n10.2 3\n10.3 3\n", "scan.xy:2" },
    { "five columns", ("10 1 2 3 4\n"):rep(20), "scan.xy:1" },
    { "one column", ("10\n"):rep(20), "scan.xy:1" },
    { "angles descend", rows(20, 40, 0.02, function(a) return a end):gsub("^(%S+ %S+\n)(.*)$", "%2%1"), "scan.xy" },
    { "one angle goes back", "10 1\n10.2 2\n10.1 3\n10.3 4\n", "scan.xy:3" },
    { "an angle twice", "10 1\n10.1 2\n10.1 3\n10.2 4\n", "scan.xy:3" },
    { "NaN for a count", "10 1\n10.1 nan\n10.2 3\n10.3 4\n", "scan.xy:2" },
    { "infinite count", "10 1\n10.1 inf\n10.2 3\n10.3 4\n", "scan.xy:2" },
    { "overflowing count", "10 1\n10.1 1e400\n10.2 3\n10.3 4\n", "scan.xy:2" },
    { "huge counts", rows(20, 40, 0.02, function(_, i) return i == 500 and "1e300" or "100" end), "scan.xy" },
    { "negative counts", rows(20, 40, 0.02, function(_, i) return i == 500 and "-40" or "100" end), "scan.xy" },
    { "angle beyond 180", "170 1\n175 2\n185 3\n190 4\n", "scan.xy:3" },
    { "negative angle", "-10 1\n-5 2\n0 3\n5 4\n", "scan.xy:1" },
    { "energy in place of angle", rows(10000, 10200, 1), "scan.xy:1" },
    { "word in a row", "10 1\n10.1 two\n10.2 3\n", "scan.xy:2" },
    { "sigma of zero", "10 1 1\n10.1 2 0\n10.2 3 1\n10.3 3 1\n", "scan.xy:2" },
    { "separator changes", "10 1\n10.1,2\n10.2;3\n10.3 4\n", "scan.xy" },
    { "two scans in one file", start .. start, "scan.xy:1002" },
    { "one endless line", ("1"):rep(2000000), "scan.xy" },
    { "a million open brackets", ("["):rep(1000000), "scan.xy" },
    { "CIF without a scan", "data_a\n_cell_length_a 4.1\n", "scan.xy" },
    { "CIF cut within the loop", "data_a\nloop_\n_pd_meas_2theta_scan\n_pd_meas_counts_total\n10 1\n10.1", "scan.xy" },
    { "all counts zero", rows(20, 40, 0.02, function() return 0 end), "scan.xy" },
    { "flat, no line", rows(20, 40, 0.02, function() return 100 end), "scan.xy" },
    { "noise, no line", rows(20, 40, 0.02, function(_, i) return 90 + (i * 7919) % 21 end), "scan.xy" },
    { "step too coarse for a line", rows(20, 140, 1), "scan.xy" },
    { "range without a line of the standard", rows(23, 28, 0.02), "scan.xy" },
    { "ten points", rows(30.3, 30.5, 0.02), "scan.xy" },
    { "counts first, angles second", rows(20, 40, 0.02):gsub("(%S+) (%S+)\n", "%2 %1\n"), "scan.xy" },
  } do
    note("scan: " .. case[1])
    it("is refused: scan, " .. case[1], function()
      helper.write(folder .. "/scan.xy", case[2])
      refused("calibrate", { "scan=scan.xy", "standard=lab6-660c", "radiation=Cu Ka" }, { "scan.xy", case[3] })
    end)
  end

  -- name, how it comes to be (shell), message
  for _, case in ipairs {
    { "cut gzip", "gzip -c %s | head -c 3000 >scan.xy" },
    { "gzip with a wrong byte",
      "gzip -c %s >scan.xy; printf 'XXXX' | dd of=scan.xy bs=1 seek=9000 conv=notrunc 2>/dev/null" },
    { "a folder", "mkdir scan.xy; : %s" },
    { "a link to nowhere", "ln -s nowhere scan.xy; : %s" },
    { "a link to itself", "ln -s scan.xy scan.xy; : %s" },
    { "cut before the first line of the standard", "awk '/^#/ || $1 > 145' %s >scan.xy" },
  } do
    note("scan: " .. case[1])
    it("is refused: scan, " .. case[1], function()
      assert(shell("cd %s && { " .. case[2] .. "; }", helper.quote(folder), helper.quote(lab6)))
      refused("calibrate", { "scan=scan.xy", "standard=lab6-660c", "radiation=Cu Ka" }, { "scan.xy" })
    end)
  end

  describe("is refused: sound files that don't belong together,", function()
    for _, case in ipairs {
      { "the wrong standard", "calibrate", { "scan=" .. lab6, "standard=si-640c", "radiation=Cu Ka" },
        "not where the reflections are expected" },
      { "another radiation than the file states", "calibrate",
        { "scan=" .. lab6, "standard=lab6-660c", "radiation=Co Ka" }, "the file states Cu K radiation" },
      { "the wrong radiation", "calibrate", { "scan=bare.xy", "standard=lab6-660c", "radiation=Co Ka" },
        "not where the reflections are expected" },
      { "the wrong material", "size_strain", { "scan=" .. nickel, "material=silicon", "calibration=good.json" },
        "nickel_milled_04h.xy" },
      { "angles where the instrument isn't known", "size_strain",
        { "scan=" .. nickel, "material=nickel", "calibration=short.json", "high=140" },
        "the calibration holds from 21.33 to 70.00 deg" },
      { "no line where the instrument is known", "size_strain",
        { "scan=" .. nickel, "material=nickel", "calibration=between.json" }, "" },
      { "a range turned round", "size_strain",
        { "scan=" .. nickel, "material=nickel", "calibration=good.json", "low=120", "high=50" }, "" },
      { "a range outside the scan", "size_strain",
        { "scan=" .. nickel, "material=nickel", "calibration=good.json", "low=5", "high=20" }, "" },
      { "a holder's scan on another range", "size_strain",
        { "scan=" .. nickel, "material=nickel", "calibration=good.json", "background=holder.xy" }, "holder.xy" },
      { "results for a calibration", "size_strain",
        { "scan=" .. nickel, "material=nickel", "calibration=results.json" }, "results.json" },
      { "a scan for a calibration", "size_strain",
        { "scan=" .. nickel, "material=nickel", "calibration=" .. lab6 }, "lab6_before_service.xy" },
      { "a calibration for a scan", "calibrate", { "scan=good.json", "standard=lab6-660c", "radiation=Cu Ka" },
        "good.json" },
      { "a previous calibration of other radiation", "calibrate",
        { "scan=" .. lab6, "standard=lab6-660c", "radiation=Cu Ka", "previous=plain.json" }, "plain.json" },
    } do
      note("together: " .. case[1])
      it(case[1], function()
        helper.write(folder .. "/good.json", good)
        helper.write(folder .. "/short.json", (good:gsub('("valid_two_theta": %[%s*[%d.]+,%s*)[%d.]+', "%170")))
        helper.write(folder .. "/between.json", (good:gsub('("valid_two_theta": %[%s*)[%d.]+,%s*[%d.]+', "%155, 70")))
        helper.write(folder .. "/plain.json", (good:gsub('"wavelength_nm": 0%.154', '"wavelength_nm": 0.174')))
        helper.write(folder .. "/holder.xy", rows(5, 20, 0.02))
        helper.write(folder .. "/bare.xy", (helper.read(lab6):gsub("#[^\n]*\n", "")))
        helper.write(folder .. "/results.json", '{"schema": "linewright/results/1", "lines": [], "methods": {}}')
        refused(case[2], case[3], { case[4] })
      end)
    end
  end)

  describe("is refused: calibration,", function()
    local function swap(pattern, replacement)
      return function(text)
        local changed, n = text:gsub(pattern, replacement, 1)
        assert(n == 1, "nothing to spoil: " .. pattern)
        return changed
      end
    end
    for _, case in ipairs {
      { "empty", function() return "" end },
      { "not JSON", function() return "calibration = good\n" end },
      { "binary", function() return ("\0\255\17"):rep(500) end },
      { "a number only", function() return "17" end },
      { "an empty list", function() return "[]" end },
      { "cut in half", function(text) return text:sub(1, #text // 2) end },
      { "without its last byte", function(text) return (text:gsub("}%s*$", "")) end },
      { "something after it", function(text) return text .. "{}" end },
      { "one comma lost", swap('",\n', '"\n') },
      { "another schema", swap("linewright/calibration/1", "linewright/other/1") },
      { "a later schema", swap("linewright/calibration/1", "linewright/calibration/2") },
      { "no schema", swap('"schema": "[^"]*",', "") },
      { "no profile", swap('"profile":', '"profil":') },
      { "no aberrations", swap('"aberrations":', '"aberration":') },
      { "no valid range", swap('"valid_two_theta":', '"valid":') },
      { "no covariance", swap('"covariance":', '"covarianc":') },
      { "no radiation", swap('"radiation":', '"radiatio":') },
      { "valid range turned round", swap('("valid_two_theta": %[%s*)([%d.]+)(,%s*)([%d.]+)', "%1%4%3%2") },
      { "valid range of one number", swap('("valid_two_theta": %[%s*)([%d.]+),', "%1") },
      { "a variance below zero", swap('("matrix": %[%s*%[%s*)([%d.e+-]+)', "%1-1") },
      { "a covariance beyond what the variances allow",
        swap('("matrix": %[%s*%[%s*[%d.e+-]+,%s*)[%d.e+-]+', "%11e9") },
      { "a row of the covariance too short", swap('("matrix": %[%s*%[%s*)[%d.e+-]+,', "%1") },
      { "a parameter of the covariance lost", swap('("parameters": %[%s*)"[^"]*",', "%1") },
      { "NaN for a number", swap('("W": {%s*"value": )[%d.e+-]+', "%1NaN") },
      { "1e999 for a number", swap('("W": {%s*"value": )[%d.e+-]+', "%11e999") },
      { "a word for a number", swap('("W": {%s*"value": )[%d.e+-]+', '%1"wide"') },
      { "null for a number", swap('("W": {%s*"value": )[%d.e+-]+', "%1null") },
      { "a width below zero", swap('("W": {%s*"value": )[%d.e+-]+', "%1-4") },
      { "wavelength of zero", swap('("components": %[%s*{%s*"wavelength_nm": )[%d.e+-]+', "%10") },
      { "a negative wavelength", swap('("components": %[%s*{%s*"wavelength_nm": )', "%1-") },
      { "a weight of zero", swap('("weight": )[%d.e+-]+', "%10") },
      { "no goniometer radius", swap('"goniometer_radius":', '"radius":') },
      { "an unknown aberration", swap('"zero_shift":', '"zero_shft":') },
      { "an unknown axial model", swap('("axial": {%s*"model": )"[^"]*"', '%1"conical"') },
      { "a field twice", swap('"geometry":', '"verdict": "pass", "geometry":') },
      { "nested a million deep", function() return ("["):rep(1000000) end },
    } do
      note("calibration: " .. case[1])
      it(case[1], function()
        helper.write(folder .. "/cal.json", case[2](good))
        refused("size_strain", { "scan=" .. nickel, "material=nickel", "calibration=cal.json" }, { "cal.json" })
      end)
    end
  end)

  describe("is refused: material,", function()
    local body = 'name = "m", title = "M", formula = "Ni", space_group = "Fm-3m", unit = "nm", source = "own", '
    for _, case in ipairs {
      { "empty file", "", "" },
      { "a syntax error", "return {\n  name = = 3\n}", "m.lua:2" },
      { "no table", "return 3", "" },
      { "no cell", "return { " .. body .. " }", "cell" },
      { "a cell of nothing", "return { " .. body .. "cell = { a = 0 } }", "the cell of m lacks a", true },
      { "a negative cell", "return { " .. body .. "cell = { a = -0.35 } }", "the cell of m has a = -0.35 nm", true },
      { "a cell in words", "return { " .. body .. "cell = { a = 'wide' } }", "" },
      { "a cell of NaN", "return { " .. body .. "cell = { a = 0/0 } }", "the cell of m", true },
      { "a cell of metres", "return { " .. body .. "cell = { a = 3520 } }", "the cell of m has a = 3520 nm", true },
      { "no such group", "return { name = 'm', title = 'M', space_group = 'Fm-3q', unit = 'nm', cell = { a = 0.35 } }",
        "Fm-3q", true },
      { "a unit nobody knows", "return { name = 'm', space_group = 'Fm-3m', unit = 'furlong', cell = { a = 0.35 } }",
        "furlong" },
      { "a slip in a name", "return { " .. body .. "cel = { a = 0.352 } }", "cel" },
      { "an endless loop", "while true do end", "" },
      { "an endless text", "local s = 'x' while true do s = s .. s end", "" },
      { "a call to the system", "os.execute 'touch marked' return {}", "" },
      { "bytecode", string.dump(function() return {} end), "" },
    } do
      note("material: " .. case[1])
      it(case[1], function()
        helper.write(folder .. "/m.lua", case[2])
        helper.write(folder .. "/cal.json", good)
        -- the file by its path, or the material by the name that it gives itself
        refused("size_strain", { "scan=" .. nickel, "material=m.lua", "calibration=cal.json" },
          { case[4] and "" or "m.lua", case[3] })
        assert.is_false(helper.exists(folder .. "/marked"))
      end)
    end
  end)

  it("in numbers", function()
    print(("%d distinct malformed inputs"):format(count))
    assert.is_true(count > 90)
  end)
end)

describe("an output that can't be written", function()
  local folder
  local arguments = { scripts .. "calibrate.lua", "scan=" .. lab6, "standard=lab6-660c", "radiation=Cu Ka" }
  before_each(function() folder = helper.folder() end)
  after_each(function() helper.remove(folder) end)
  local function run(out, options)
    local all = { table.unpack(arguments) }
    all[#all + 1] = "out=" .. out
    return helper.run(folder, all, options)
  end

  it("below a file names the path", function()
    helper.write(folder .. "/plain", "mine")
    for _, out in ipairs { "plain", "plain/below" } do
      local code, _, err = run(out)
      assert.are.equal(1, code)
      assert.is_truthy(err:find("plain", 1, true), err)
      assert.matches("calibrate%.lua:%d+: ", err)
      assert.are.equal("mine", helper.read(folder .. "/plain"))
    end
  end)

  it("in a folder of someone else's names the path, and older results stay", function()
    if helper.output_of "id -u" ~= "0" then
      shell("mkdir %s/out && chmod 555 %s/out", folder, folder)
    elseif os.execute "command -v setpriv >/dev/null" ~= true then
      pending "setpriv is not here"
      return
    end
    shell("mkdir -p %s/out && echo old >%s/out/calibration.json && chmod 755 %s/out", folder, folder, folder)
    shell("touch %s/.out %s/.err && chmod 777 %s %s/.out %s/.err", folder, folder, folder, folder, folder)
    if helper.output_of "id -u" ~= "0" then shell("chmod 555 %s/out", folder) end
    local before = helper.output_of "id -u" == "0" and "setpriv --reuid=65534 --regid=65534 --clear-groups " or ""
    local code, _, err = run("out", { before = before })
    assert.are.equal(1, code, err)
    assert.matches("out/?[^\n]*[Pp]ermission denied", err)
    assert.are.equal("old\n", helper.read(folder .. "/out/calibration.json"))
    assert.are.equal("calibration.json", helper.output_of("ls -A " .. folder .. "/out"))
    shell("chmod 755 %s/out", folder)
  end)

  it("on a full disk names the path, leaves no half of a file, and older results stay", function()
    if helper.output_of "id -u" ~= "0"
      or not shell("mkdir %s/out && mount -t tmpfs -o size=24k none %s/out 2>/dev/null", folder, folder) then
      pending "no small disk can be mounted here"
      return
    end
    local fine, message = pcall(function()
      shell("echo old >%s/out/calibration.json", folder)
      local code, _, err = run "out"
      assert.are.equal(1, code, err)
      assert.matches("out/[^\n]*[Nn]o space left", err)
      assert.are.equal("old\n", helper.read(folder .. "/out/calibration.json"))
      assert.are.equal("", helper.output_of("find " .. folder .. "/out -name '*.tmp*' -o -type f -name '.*'"))
    end)
    shell("umount %s/out", folder)
    if not fine then error(message, 0) end
  end)
end)

describe("a recipe that is wrong or never ends", function()
  local folder
  before_each(function() folder = helper.folder() end)
  after_each(function() helper.remove(folder) end)

  it("gives the place of a syntax error", function()
    for _, case in ipairs {
      { "local a = 1\nlocal b = = 2\n", "recipe.lua:2: " }, { "print('open\n", "recipe.lua:1: " },
      { "for i = 1, 3 do\n\nprint(i)\n", "recipe.lua:[34]: " }, { "\27Lua", "recipe.lua" },
      { "if x then\nend end", "recipe.lua:2: " },
    } do
      local code, out, err = helper.recipe(folder, case[1])
      assert.are.same({ 1, "" }, { code, out })
      assert.matches("^" .. case[2], err)
    end
  end)

  it("is told the nearest name of an option", function()
    for call, near in pairs {
      ["lw.read_scan('s.xy', { radiaton = 'Cu Ka' })"] = "radiation",
      ["lw.fit_lines(s, m, { width = 'free' })"] = "widths",
      ["lw.fit_lines(s, m, { widths = 'smoth' })"] = "smooth",
      ["lw.fit_lines(s, m, { backgroundterms = 4 })"] = "background_terms",
      ["lw.material 'tungstn'"] = "tungsten",
    } do
      helper.write(folder .. "/s.xy", "10 1\n10.1 2\n10.2 3\n10.3 4\n10.4 3\n10.5 3\n")
      local code, _, err = helper.recipe(folder, "local lw = require 'linewright'\n"
        .. "local s, m = lw.read_scan('s.xy', { radiation = 'Cu Ka' }), lw.material 'nickel'\n" .. call)
      assert.are.equal(1, code)
      assert.matches("^recipe.lua:3: ", err)
      assert.is_truthy(err:find("did you mean '" .. near .. "'", 1, true), err)
    end
  end)

  -- Sends one SIGINT after some seconds; code, milliseconds from the signal to the end, stderr. (The program
  -- timeout would send a second one to its group, which ends any process that keeps the custom of a second Ctrl-C.)
  local function interrupt(seconds, words)
    local told = helper.output_of(([[cd %s && { env --default-signal=INT %s %s >/dev/null 2>.err & child=$!
      sleep %g; began=$(date +%%s%%N); kill -INT $child; wait $child; code=$?
      echo $code $((($(date +%%s%%N) - began) / 1000000)); }]]):format(folder, helper.engine, words, seconds))
    local code, milliseconds = told:match "^(%d+) (%d+)$"
    return tonumber(code), tonumber(milliseconds), helper.read(folder .. "/.err")
  end

  local fit = ([[
    local lw = require "linewright"
    local scan = lw.read_scan(%q, { radiation = "Cu Ka" })
    local all = lw.standard "lab6-660c"
    while true do
      pcall(lw.fit_lines, scan, all:reflections(scan), { widths = "free", background_terms = 20, weights = "model" })
    end
  ]]):format(lab6)

  it("is stopped by Ctrl-C and by the time limit, wherever it is", function()
    for _, text in ipairs { "while true do end", fit, "while true do pcall(require, 'linewright') end" } do
      helper.write(folder .. "/recipe.lua", text)
      local code, milliseconds, err = interrupt(0.7, "recipe.lua")
      assert.are.equal(130, code, err)
      assert.matches("^recipe.lua:%d+: interrupted", err)
      assert.is_true(milliseconds < 2000, milliseconds .. " ms")
      code, _, err = helper.recipe(folder, text, {}, { flags = { "--time-limit=0.7" } })
      assert.are.equal(1, code, err)
      assert.matches("recipe.lua:%d+: [^\n]*time limit", err)
    end
  end)

  it("ends soon after Ctrl-C at any stage of the recipes, and leaves no half of a file", function()
    local words = ("%s/calibrate.lua scan=%s standard=lab6-660c 'radiation=Cu Ka' out=out"):format(scripts, lab6)
    for _, seconds in ipairs { 0.1, 0.2, 0.3, 0.5, 0.8, 1.1 } do
      local code, milliseconds, err = interrupt(seconds, words)
      assert.is_true(code == 130 or code == 0, code .. ": " .. err)
      assert.is_true(milliseconds < 2000, milliseconds .. " ms") -- a recipe that is nearly done may end by itself
      if code == 130 then assert.is_truthy(err:find "interrupted" or err:find "stopped on request", err) end
      assert.are.equal("", helper.output_of("find " .. folder .. " -name '*.tmp*'"))
      if helper.exists(folder .. "/out/calibration.json") then
        assert.matches("}%s*$", helper.read(folder .. "/out/calibration.json"))
      end
    end
  end)
end)
