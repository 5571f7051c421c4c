-- SPDX-License-Identifier: GPL-3.0-or-later
-- The command line: exit codes, what goes to stdout and what to stderr.
local helper = dofile((debug.getinfo(1, "S").source:match "^@(.*/)" or "./") .. "helper.lua")

describe("the interpreter", function()
  local folder
  before_each(function() folder = helper.folder() end)
  after_each(function() helper.remove(folder) end)
  local function run(...) return helper.run(folder, { ... }) end

  it("tells its usage and version on stdout", function()
    local code, out, err = run "--help"
    assert.are.same({ 0, "" }, { code, err })
    assert.matches("^usage: linewright", out)
    code, out = run "--version"
    assert.are.equal(0, code)
    assert.matches("^linewright %d+%.%d+%.%d+\n$", out)
  end)

  it("ends in 2 on wrong usage, with the nearest option, on stderr", function()
    for _, case in ipairs {
      { "--hlep", "did you mean %-%-help" }, { "-x", "unknown option" }, { "--cpu=fast", "plain, avx2, avx512" },
      { "--cpu", "needs a value" }, { "--time-limit=-1", "above 0" }, { "--memory-limit=x", "above 0" },
      { "-e", "needs a chunk" }, { "missing.lua", "can't open missing.lua" }, { "/", "folder" },
    } do
      local code, out, err = run(case[1])
      assert.are.equal(2, code, case[1])
      assert.are.equal("", out, case[1])
      assert.matches(case[2], err)
    end
  end)

  it("runs chunks, a file and standard input", function()
    assert.are.same({ 0, "1\n2\n", "" }, { run("-e", "print(1)", "-eprint(2)") })
    local code, out = helper.recipe(folder, "print(arg[0], arg[1], ...)", { "a=1" })
    assert.are.same({ 0, "recipe.lua\ta=1\ta=1\n" }, { code, out })
    code, out = helper.run(folder, { "-" }, { input = "print 'in'" })
    assert.are.same({ 0, "in\n" }, { code, out })
    code, out = helper.run(folder, {}, { input = "#!/usr/bin/env linewright\nprint 'in'" })
    assert.are.same({ 0, "in\n" }, { code, out })
  end)

  it("names file and line of an error, and the lines that led there", function()
    local code, out, err, _ = helper.recipe(folder, "local function f()\n  error 'wrong'\nend\nprint 'before'\nf()\n")
    assert.are.same({ 1, "before\n" }, { code, out })
    assert.matches("^recipe.lua:2: wrong\n  called from recipe.lua:5 in the main chunk\n$", err)
    code, _, err = helper.recipe(folder, "print(\n")
    assert.are.equal(1, code)
    assert.matches("^recipe.lua:2:", err)
    code, _, err = helper.recipe(folder, "\nrequire 'linewright'.read_scan 'nothing.xy'")
    assert.are.equal(1, code)
    assert.matches("^recipe.lua:2: nothing.xy", err)
    code, _, err = helper.recipe(folder, "error { 1 }")
    assert.are.equal(1, code)
    assert.matches("an error that is a table", err)
  end)

  it("raises errors that scripts can read", function()
    local _, out = helper.recipe(folder, [[
      local lw = require "linewright"
      local fine, err = pcall(lw.read_scan, "nothing.xy")
      print(fine, err.kind, err.where, type(err.message), type(err.hint))
      fine, err = pcall(function() return lw.standard "lab6-660x" end)
      print(err.kind, err.where)
    ]])
    assert.are.equal("false\tfile system\trecipe.lua:2\tstring\tstring\nbad argument\trecipe.lua:4\n", out)
  end)

  it("gives every option error with the nearest spelling", function()
    local code, _, err = helper.recipe(folder, "require 'linewright'.read_scan('x', { radiaton = 'Cu Ka' })")
    assert.are.equal(1, code)
    assert.matches("^recipe.lua:1: read_scan: unknown option 'radiaton'; did you mean 'radiation'", err)
    code, _, err = helper.recipe(folder, "require 'linewright'.read_scan('x', { noise = 'count' })")
    assert.are.equal(1, code)
    assert.matches("does not know 'count'; did you mean 'counts'", err)
  end)

  it("ends in 130 on Ctrl-C, in loops, pcall loops, coroutines and repeated tries", function()
    for _, text in ipairs {
      "while true do end",
      "while true do pcall(function() while true do end end) end",
      "local function f() while true do end end while true do pcall(coroutine.wrap(f)) end",
      "local function again() return xpcall(again, again) end while true do again() end",
      "local t = setmetatable({}, { __close = function() while true do end end })"
        .. " local x <close> = t while true do end",
    } do
      local code, _, err = helper.recipe(folder, text, {}, { signal_after = 0.4 })
      assert.are.equal(130, code, text)
      assert.matches("interrupted", err)
    end
  end)

  it("ends in 130 on Ctrl-C within a call of the engine", function()
    local code = helper.recipe(folder, ([[
      local lw = require "linewright"
      local scan = lw.read_scan(%q, { radiation = "Cu Ka" })
      while true do lw.fit_lines(scan, lw.standard "lab6-660c", {}) end
    ]]):format(helper.demo .. "/lab6_before_service.xy"), {}, { signal_after = 0.6 })
    assert.are.equal(130, code)
  end)

  it("keeps limits of time and memory", function()
    local code, _, err = run("--time-limit=0.3", "-e", "while true do pcall(function() while true do end end) end")
    assert.are.equal(1, code)
    assert.matches("^%-e:1: the time limit is reached", err)
    code, _, err = run("--memory-limit=30", "-e", "local t = {} for i = 1, 1e9 do t[i] = {} end")
    assert.are.equal(1, code)
    assert.matches("limit of 30 MB is reached", err)
    code = run("--memory-limit=30", "-e", "return ('x'):rep(1 << 33)")
    assert.are.equal(1, code)
    code, _, err = run("--memory-limit=30", "-e", "require 'linewright'.vector(setmetatable({}, {}))"
      .. " local v = {} for i = 1, 1e7 do v[i] = i end")
    assert.are.equal(1, code)
    assert.matches("30 MB", err)
  end)

  it("ends even where nothing gives way", function()
    -- matching with this pattern takes longer than the universe has been; no hook runs within it
    local code, _, err = run("--time-limit=0.2", "-e", "return ('a'):rep(100000):find(('.-'):rep(50) .. 'b')")
    assert.are.equal(1, code)
    assert.matches("did not give way", err)
  end)

  it("says so when stdout is full", function()
    if not helper.exists "/dev/full" then
      pending "no /dev/full here"
      return
    end
    local command = ("%s -e 'for i = 1, 1e5 do print(i) end' >/dev/full 2>%s/err"):format(helper.engine, folder)
    local _, _, code = os.execute(command)
    assert.are.equal(1, code)
    assert.matches("standard output", helper.read(folder .. "/err"))
  end)

  it("gives the same on every rung", function()
    local first
    for _, rung in ipairs { "plain", "avx2", "avx512" } do
      local code, out = run("--cpu=" .. rung, "-e", "print(require 'linewright'.version)")
      assert.are.equal(0, code)
      first = first or out
      assert.are.equal(first, out)
    end
  end)

  it("is a module for a stock Lua too", function()
    local module = helper.engine:gsub("[^/]*$", "")
    if not helper.exists(module .. "linewright.so") or os.execute "command -v lua5.4 >/dev/null" ~= true then
      pending "the module or lua5.4 is not here"
      return
    end
    local out = helper.output_of(("cd %s && LUA_CPATH=%s lua5.4 -e %s"):format(helper.quote(folder),
      helper.quote(module .. "?.so"),
      helper.quote [[local lw = require "linewright" print(lw.quantity { 1.5, 0.1, "nm" }, lw.standard("lab6").name)]]))
    assert.are.equal("1.50(10) nm\tlab6-660c", out)
  end)
end)
