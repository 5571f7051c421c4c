-- SPDX-License-Identifier: GPL-3.0-or-later
-- The frame of a recipe: inputs from its declaration, help, outputs with their provenance.
local helper = dofile((debug.getinfo(1, "S").source:match "^@(.*/)" or "./") .. "helper.lua")

describe("a recipe", function()
  local folder
  before_each(function()
    folder = helper.folder()
    helper.write(folder .. "/a.xy", "10 1\n10.1 2\n10.2 3\n10.3 2\n")
    helper.write(folder .. "/b.xy", "10 1\n10.1 2\n10.2 3\n10.3 2\n")
  end)
  after_each(function() helper.remove(folder) end)

  local start = [[
    local lw = require "linewright"
    local job = lw.recipe {
      title = "Spec",
      inputs = {
        scan = { kind = "file", help = "a scan" },
        n = { kind = "number", default = 3, unit = "nm", least = 0, most = 10, help = "a number" },
        words = { kind = "list", default = "all", help = "a list" },
        flag = { kind = "flag", default = false, help = "a flag" },
        shape = { kind = "text", default = "round", choices = { "round", "flat" }, help = "a shape" },
        other = { kind = "file", default = "", help = "may be left out" },
        scans = { kind = "glob", default = "", help = "many" },
      },
    }
  ]]
  local function run(text, ...) return helper.recipe(folder, start .. text, { ... }) end

  it("lists its inputs on --help and does nothing else", function()
    local code, out, err = run("print 'not reached'", "--help")
    assert.are.same({ 0, "" }, { code, err })
    assert.matches("^Spec\n\nusage: linewright recipe.lua name=value", out)
    assert.matches("scan +file  a scan %(must be given%)", out)
    assert.matches("n +number, nm  a number %(3%)", out)
    assert.matches("shape +text  a shape: round, flat %(round%)", out)
    assert.matches("out +text .- %(out%)", out)
    assert.not_matches("not reached", out)
  end)

  it("reads values of every kind", function()
    local code, out, err = run([[
      print(job.scan, job.n, table.concat(job.words, "+"), job.flag, job.shape, job.other, job.out,
        #job.scans, job.scans[2])
    ]], "scan=a.xy", "n=4.5nm", "words=a, b,c", "flag=yes", "shape=flat", "out=o/", "scans=*.xy")
    assert.are.same({ 0, "" }, { code, err })
    assert.are.equal("a.xy\t4.5\ta+b+c\ttrue\tflat\tfalse\to\t2\tb.xy\n", out)
  end)

  it("fills in defaults", function()
    local _, out = run("print(job.n, job.words[1], job.flag, job.shape, job.strict, job.title)", "scan=a.xy")
    assert.are.equal("3\tall\tfalse\tround\tfalse\tSpec\n", out)
  end)

  for argument, message in pairs {
    ["scann=a.xy"] = "the recipe has no input 'scann'; did you mean 'scan'",
    ["n=3"] = "the input 'scan' is missing; give scan=FILE: a scan",
    ["scan=c.xy"] = "input 'scan': can't open c.xy",
    ["scan=."] = "input 'scan': . is not a file",
    ["scan"] = "write name=value",
    ["--hlep"] = "write name=value",
  } do
    it("refuses '" .. argument .. "' alone", function()
      local code, out, err = run("", argument)
      assert.are.same({ 1, "" }, { code, out })
      assert.matches("^recipe.lua:2: ", err)
      assert.is_truthy(err:find(message, 1, true), err)
    end)
  end
  for argument, message in pairs {
    ["n=x"] = "input 'n': 'x' is not a number (nm)",
    ["n=4mm"] = "input 'n': '4mm' is not a number (nm)",
    ["n=11"] = "11 is outside 0 to 10 nm",
    ["n=nan"] = "is not a number",
    ["flag=maybe"] = "neither true nor false",
    ["shape=rund"] = "did you mean 'round'",
    ["scan=b.xy"] = "input 'scan' is given twice",
    ["scans=*.dat"] = "no file fits '*.dat'",
    ["out="] = "input 'out' is empty",
  } do
    it("refuses '" .. argument .. "'", function()
      local code, _, err = run("", "scan=a.xy", argument)
      assert.are.equal(1, code)
      assert.is_truthy(err:find(message, 1, true), err)
    end)
  end

  it("refuses a declaration that can't be", function()
    for text, message in pairs {
      ["x = { kind = 'flie' }"] = "did you mean 'file'",
      ["x = { kind = 'file', defualt = '' }"] = "did you mean 'default'",
      ["path = { kind = 'file' }"] = "'path' is a method of the job",
      ["{ kind = 'file' }"] = "an input has no name",
    } do
      local code, _, err = helper.recipe(folder,
        "require 'linewright'.recipe { title = 't', inputs = { " .. text .. " } }")
      assert.are.equal(1, code)
      assert.is_truthy(err:find(message, 1, true), err)
    end
  end)

  it("gives an error for a field that isn't declared", function()
    local code, _, err = run("print(job.scna)", "scan=a.xy")
    assert.are.equal(1, code)
    assert.matches("did you mean 'scan'", err)
  end)

  it("writes records that say where they come from", function()
    local code, _, err = run([[
      job:write { size = lw.quantity { 18.42, 0.63, "nm" }, rows = { { hkl = "111", x = 1 } } }
      job:write_csv("rows.csv", { { hkl = "111", size = lw.quantity { 2.5, 0.5, "nm" } } })
    ]], "scan=a.xy", "out=o")
    assert.are.same({ 0, "" }, { code, err })
    local text = helper.read(folder .. "/o/results.json")
    assert.matches('"schema": "linewright/results/1"', text)
    assert.matches('"value": 18.42,%s*"u": 0.63,%s*"unit": "nm"', text)
    local hash = helper.output_of("sha256sum " .. folder .. "/a.xy"):match "^%x+"
    assert.matches('"file": "a.xy",%s*"sha256": "' .. hash .. '"', text)
    assert.matches(helper.output_of("sha256sum " .. folder .. "/recipe.lua"):match "^%x+", text)
    assert.matches('"engine": "linewright ', text)
    assert.matches('"date": "%d%d%d%d%-%d%d%-%d%dT', text)
    assert.matches('"cpu": "', text)
    assert.are.equal("hkl,size_nm,u_size_nm\n111,2.5,0.5\n", helper.read(folder .. "/o/rows.csv"))
  end)

  it("writes the columns that are wanted, in their order", function()
    local code, _, err = run([[
      local rows = { { a = 1, b = "x", c = 3 }, { a = 4, c = 5 } }
      job:write_csv("rows.csv", rows, { "c", "a" })
      job:write_csv("tree.csv", lw.result { rows = { { a = 1, b = 2 } } }.rows, { "b" })
    ]], "scan=a.xy", "out=o")
    assert.are.same({ 0, "" }, { code, err })
    assert.are.equal("b\n2\n", helper.read(folder .. "/o/tree.csv"))
    assert.are.equal("c,a\n3,1\n5,4\n", helper.read(folder .. "/o/rows.csv"))
    code, _, err = run("job:write_csv('rows.csv', { { a = 1 } }, { 7 })", "scan=a.xy", "out=o")
    assert.are.equal(1, code)
    assert.matches("a column's name must be a text", err)
  end)

  it("ends in 3 when a verdict fails under strict=true only", function()
    local text = "job:check(false, 'the width grew')"
    local code, _, err = run(text, "scan=a.xy", "strict=true")
    assert.are.equal(3, code)
    assert.matches("verdict failed: the width grew", err)
    assert.are.equal(0, (run(text, "scan=a.xy")))
    assert.are.equal(0, (run("job:check(true)", "scan=a.xy", "strict=true")))
    assert.are.equal(3, (run("job:write { verdict = 'fail' }", "scan=a.xy", "strict=true", "out=o")))
    assert.are.equal(1, (run(text .. " error 'x'", "scan=a.xy", "strict=true")))
  end)

  it("writes a report that needs nothing else", function()
    local code, _, err = run([[
      local figure = lw.figure { name = "own", title = "Own figure", x = { label = "angle", unit = "deg" }, y = "width",
        series = { { label = "points", x = { 1, 2, 3 }, y = { lw.quantity { 1, 0.1 }, lw.quantity { 2, 0.1 }, 3 } } } }
      job:write(lw.report { "A text with <markup>.", { heading = "Heading" }, { caution = "Take care" },
        { verdict = "pass", text = "It holds" }, figure, lw.result { size = lw.quantity { 1, 0.1, "nm" } },
        { table = { { a = 1 } }, caption = "Rows" } })
    ]], "scan=a.xy", "out=o")
    assert.are.same({ 0, "" }, { code, err })
    local page = helper.read(folder .. "/o/report.html")
    assert.matches("<title>Spec</title>", page)
    assert.matches("A text with &lt;markup&gt;", page)
    assert.matches("It holds", page)
    assert.not_matches("https?://[^w\"]-%.js", page)
    assert.is_true(helper.exists(folder .. "/o/figures/own.svg"))
    assert.is_true(helper.exists(folder .. "/o/figures/own.png"))
  end)

  it("shows a table's columns in the order asked for, and names figures' files by their section", function()
    local code, _, err = run([[
      local figure = lw.figure { name = "own", x = "a", y = "b", series = { { x = { 1, 2, 3 }, y = { 1, 2, 3 } } } }
      local rows = { { name = "first", time_h = 2, chance = 1e-9 },
        { name = "second", chi2 = 12.3456789, size = lw.quantity { 1, 0.1, "nm" } } }
      job:write(lw.report { { table = rows, columns = { "time_h", "size", "name", "chi2", "chance", "absent" } },
        { heading = "One", prefix = "one" }, figure, figure, { heading = "Two" }, figure,
        { details = lw.result { size = lw.quantity { 1, 0.1, "nm" }, chi2 = 3.14159265, form = "round" } } })
    ]], "scan=a.xy", "out=o")
    assert.are.same({ 0, "" }, { code, err })
    local page, heads = helper.read(folder .. "/o/report.html"), {}
    for head in page:gmatch '<th scope="col"[^>]*>(.-)</th>' do heads[#heads + 1] = head:gsub("<[^>]*>", "") end
    assert.are.same({ "time h", "size nm", "name", "chi2", "chance" }, heads)
    assert.is_truthy(page:find("<td class=\"n\">&lt; 0.0001</td>", 1, true))
    assert.is_truthy(page:find("<td class=\"n\">12.35</td>", 1, true))
    assert.is_truthy(page:find("chi2\xC2\xA03.142</span> · <span>form\xC2\xA0round", 1, true))
    for _, name in ipairs { "one_own", "one_own_2", "own" } do
      assert.is_true(helper.exists(folder .. "/o/figures/" .. name .. ".svg"), name)
    end
    assert.is_false(helper.exists(folder .. "/o/figures/own_2.svg"))
  end)

  it("refuses items that a report can't show", function()
    for item, message in pairs {
      ["print"] = "a function can't be shown", ["{ headng = 'x' }"] = "did you mean 'heading'",
      ["{ verdict = 'good' }"] = "pass, attention, fail", ["{ brief = {} }"] = "a table has no 'brief' part",
      ["{ table = {}, columns = { 1 } }"] = "a column's name",
    } do
      local code, _, err = run("lw.report { " .. item .. " }", "scan=a.xy")
      assert.are.equal(1, code)
      assert.is_truthy(err:find(message, 1, true), err)
    end
  end)

  it("does a step of a long job once, and goes on after a crash", function()
    local text = [[
      for i = 1, 3 do
        local r = job:once("step " .. i, function()
          print("does", i)
          if i == job.n then error "crash" end
          return { size = lw.quantity { i / 3, 0.1, "nm" } }
        end)
        print(i, r.size)
      end
    ]]
    local code, out = run(text, "scan=a.xy", "out=o", "n=3")
    assert.are.equal(1, code)
    assert.are.equal("does\t1\n1\t0.33(10) nm\ndoes\t2\n2\t0.67(10) nm\ndoes\t3\n", out)
    -- a line that a crash has cut
    os.execute(("printf '{\"key\": \"step' >>%s/o/journal.jsonl"):format(folder))
    code, out = run(text, "scan=a.xy", "out=o", "n=0")
    assert.are.equal(0, code)
    assert.are.equal("1\t0.33(10) nm\n2\t0.67(10) nm\ndoes\t3\n3\t1.00(10) nm\n", out)
    code, out = run(text, "scan=a.xy", "out=o", "n=0")
    assert.are.equal(0, code)
    assert.are.equal("1\t0.33(10) nm\n2\t0.67(10) nm\n3\t1.00(10) nm\n", out)
    -- another recipe has other keys
    code, out = run("\n" .. text, "scan=a.xy", "out=o", "n=0")
    assert.are.equal(0, code)
    assert.matches("does\t1", out)
  end)
end)
