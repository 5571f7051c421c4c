-- SPDX-License-Identifier: GPL-3.0-or-later
-- The same input gives the same output: byte for byte on one set of instructions, and within far less than any
-- uncertainty on another.
local here = debug.getinfo(1, "S").source:match "^@(.*/)" or "./"
local helper = dofile(here .. "helper.lua")
local record = dofile(here .. "record.lua")

describe("the same input", function()
  local folder
  setup(function() folder = helper.folder() end)
  teardown(function() helper.remove(folder) end)

  -- Runs a recipe with its inputs in a folder; what it writes goes to `o` there.
  local function run(name, flag, recipe, ...)
    local place = folder .. "/" .. name
    os.execute("mkdir -p " .. helper.quote(place))
    local words = { recipe, "out=o", ... }
    if flag then table.insert(words, 1, flag) end
    local code, _, err = helper.run(place, words)
    assert.are.same({ 0, "" }, { code, err })
    return place .. "/o"
  end
  local standard = "standard=" .. helper.demo .. "/lab6_after_service.xy"
  local powder = "powder=" .. helper.demo .. "/nickel_milled_04h.xy"

  -- The road from the scans to sizes and strains, without a report.
  local road = [[
    local lw = require "linewright"
    local job = lw.recipe { title = "Road", inputs = { standard = { kind = "file" }, powder = { kind = "file" } } }
    local standard = lw.standard "lab6-660c"
    local reference = lw.read_scan(job.standard, { radiation = "Cu Ka" })
    local lines = lw.fit_lines(reference, standard.material:reflections(reference), {})
    local calibration = lw.calibrate(lines, standard, {})
    local nickel = lw.material "nickel"
    local scan = lw.read_scan(job.powder, { radiation = "Cu Ka" })
    local own = lw.fit_lines(scan, nickel:reflections(scan), { instrument = calibration })
    job:write(lw.separate(lw.deconvolve(own, { method = "convolution" })), calibration)
  ]]
  local done = {}
  local function travel(rung)
    helper.write(folder .. "/road.lua", road)
    done[rung] = done[rung] or run(rung, "--cpu=" .. rung, folder .. "/road.lua", standard, powder)
    return done[rung]
  end

  -- Without the time, and in calibration.json there is nothing else that changes.
  local function bytes(path)
    return (helper.read(path):gsub('\n%s*"date": "[^"\n]*"', ""))
  end

  it("gives the same bytes in every run", function()
    local calibration = "calibration=" .. travel "plain" .. "/calibration.json"
    local function analyse(name)
      return run(name, nil, helper.root .. "/scripts/size_strain.lua", "scan=" .. powder:match "=(.*)",
        "material=nickel", calibration)
    end
    local one, two = analyse "one", analyse "two"
    assert.is_true(#bytes(one .. "/results.json") > 10000)
    assert.are.equal(bytes(one .. "/results.json"), bytes(two .. "/results.json"))
    local tables = 0
    for name in helper.output_of("cd " .. helper.quote(one) .. " && find . -name '*.csv' -o -name '*.svg'")
        :gmatch "[^\n]+" do
      assert.are.equal(helper.read(one .. "/" .. name), helper.read(two .. "/" .. name), name)
      tables = tables + 1
    end
    assert.is_true(tables > 0)
  end)

  --[[ A vector rung sums in another order and fuses products, so its kernel values differ by some 1e-15 of the
  profile's top. Solving the normal equations lifts that by their condition, at most about 1e8 for a fit that is
  accepted, to 1e-7 of an uncertainty. 1e-6 is allowed; 2e-10 is what is seen. ]]
  local function compare(a, b, path, largest, u)
    if type(a) == "table" then
      assert.are.equal("table", type(b), path)
      local own = type(a.u) == "number" and a.u > 0 and a.u or nil
      for key, value in pairs(a) do
        if key ~= "provenance" then
          compare(value, b[key], path .. "." .. tostring(key), largest, (key == "value" or key == "u") and own or nil)
        end
      end
      for key in pairs(b) do assert.is_truthy(a[key] ~= nil, path .. "." .. tostring(key)) end
    elseif type(a) == "number" then
      local off = math.abs(a - b)
      local part = u and off / u or off / (math.abs(a) + 1e-9)
      if part > largest[1] then largest[1], largest[2] = part, path end
    else
      assert.are.equal(a, b, path)
    end
  end

  for _, rung in ipairs { "avx2", "avx512" } do
    it("gives the same results with plain C and " .. rung, function()
      local flag = rung == "avx512" and "avx512f" or rung
      if not helper.read "/proc/cpuinfo":find(" " .. flag .. " ", 1, true) then
        return pending("this processor has no " .. rung)
      end
      local plain, other = travel "plain", travel(rung)
      for _, file in ipairs { "calibration.json", "results.json" } do
        local largest = { 0, "" }
        local a, b = record.read(plain .. "/" .. file), record.read(other .. "/" .. file)
        assert.are.equal("plain", a.provenance.cpu)
        assert.are.equal(rung, b.provenance.cpu)
        compare(a, b, file, largest)
        assert.is_true(largest[1] < 1e-6, ("%s differs by %g"):format(largest[2], largest[1]))
      end
    end)
  end
end)
