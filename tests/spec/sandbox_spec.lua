-- SPDX-License-Identifier: GPL-3.0-or-later
-- What a recipe from somebody else can't do.
local helper = dofile((debug.getinfo(1, "S").source:match "^@(.*/)" or "./") .. "helper.lua")

describe("the sandbox", function()
  local folder
  before_each(function() folder = helper.folder() end)
  after_each(function() helper.remove(folder) end)

  it("has these globals and no others", function()
    local code, out = helper.recipe(folder, [[
      local names = {}
      for name in pairs(_G) do names[#names + 1] = name end
      table.sort(names)
      print(table.concat(names, " "))
      names = {}
      for name in pairs(os) do names[#names + 1] = name end
      table.sort(names)
      print(table.concat(names, " "))
    ]])
    assert.are.equal(0, code)
    assert.are.equal("_G _VERSION arg assert collectgarbage coroutine error getmetatable help ipairs load math next os "
      .. "pairs pcall print rawequal rawget rawlen rawset require select setmetatable string table tonumber tostring "
      .. "type utf8 xpcall\nclock date difftime time\n", out)
  end)

  -- one line a trick; each must raise, and say so with its line
  local tricks = {
    { "os.execute 'touch mark'", "recipe.lua:1:" },
    { "os.remove 'recipe.lua'", "recipe.lua:1:" },
    { "os.rename('recipe.lua', 'mark')", "recipe.lua:1:" },
    { "os.exit(0)", "recipe.lua:1:" },
    { "os.getenv 'HOME'", "recipe.lua:1:" },
    { "os.tmpname()", "recipe.lua:1:" },
    { "io.popen 'touch mark'", "'io' is not open" },
    { "io.open('mark', 'w')", "'io' is not open" },
    { "dofile 'recipe.lua'", "'dofile' is not open" },
    { "loadfile 'recipe.lua'", "'loadfile' is not open" },
    { "debug.getregistry()", "'debug' is not open" },
    { "package.loadlib('x', 'y')", "'package' is not open" },
    { "require 'io'", "module 'io' is not open" },
    { "require 'os'", "module 'os' is not open" },
    { "require '_G'", "module '_G' is not open" },
    { "string.dump(print)", "recipe.lua:1:" },
    { "(''):dump()", "recipe.lua:1:" },
    { "assert(load('\\27Lua'))", "binary chunk" },
    { "assert(load('\\27Lua', 'x', 'b'))", "binary chunk" },
    { "assert(load('\\27Lua', 'x', 'bt', {}))", "binary chunk" },
    { "assert(load(function() return nil end, 'x', 'b'))()() ", "recipe.lua:1:" },
    { "getmetatable('').__index = nil", "recipe.lua:1:" },
    { "setmetatable(_G, nil)", "protected" },
    { "setmetatable(_G, {})", "protected" },
    { "setmetatable({}, { __gc = print })", "__gc is not open" },
    { "collectgarbage 'stop'", "invalid option" },
    { "collectgarbage 'generational'", "invalid option" },
    { "pritn 'x'", "unknown name 'pritn'; did you mean 'print'" },
    { "getmetatable(require 'linewright'.quantity { 1 }).__index = nil", "recipe.lua:1:" },
  }
  for _, trick in ipairs(tricks) do
    it("stops " .. trick[1], function()
      local code, out, err = helper.recipe(folder, trick[1])
      assert.are.equal(1, code)
      assert.are.equal("", out)
      assert.matches(trick[2], err)
      assert.is_false(helper.exists(folder .. "/mark"))
      assert.is_true(helper.exists(folder .. "/recipe.lua"))
    end)
  end

  it("gives no metatable of its objects", function()
    local _, out = helper.recipe(folder, [[
      local lw = require "linewright"
      print(getmetatable "", getmetatable(lw.vector {}), getmetatable(_G))
    ]])
    assert.are.equal("string\tlinewright.vector\tglobals of a recipe\n", out)
  end)

  it("draws the same random numbers in every run", function()
    local text = "print(math.random(1 << 30), math.random())"
    local _, first = helper.recipe(folder, text)
    local _, second = helper.recipe(folder, text)
    assert.are.equal(first, second)
  end)

  it("doesn't heed the environment", function()
    helper.write(folder .. "/linewright.lua", "return 'not ours'")
    local code, out, err = helper.recipe(folder, "print(require 'linewright'.version)", {},
      { before = "LUA_INIT='print(1)' LUA_PATH='./?.lua' " })
    assert.are.same({ 0, "" }, { code, err })
    assert.matches("^%d", out)
  end)

  it("opens on request, and the record says so", function()
    local code, out = helper.recipe(folder, "print(type(io), type(debug.getregistry))", {}, { flags = { "--trusted" } })
    assert.are.same({ 0, "table\tfunction\n" }, { code, out })
    for flag, word in pairs { ["--trusted"] = "true", ["--cpu=plain"] = "false" } do
      code = helper.recipe(folder, [[
        local lw = require "linewright"
        lw.recipe { title = "t" }:write { a = 1 }
      ]], { "out=o" }, { flags = { flag } })
      assert.are.equal(0, code)
      assert.matches('"trusted": ' .. word, helper.read(folder .. "/o/results.json"))
    end
  end)

  describe("lets write", function()
    local start = [[
      local lw = require "linewright"
      local job = lw.recipe { title = "t" }
    ]]

    it("below out, making folders", function()
      local code, _, err = helper.recipe(folder, start .. [[
        print(job:path "a.json", job:path "deep/er/b.csv")
        job:write_csv("deep/er/b.csv", { { a = 1 } })
      ]], { "out=o" })
      assert.are.same({ 0, "" }, { code, err })
      assert.are.equal("a\n1\n", helper.read(folder .. "/o/deep/er/b.csv"))
    end)

    for _, name in ipairs { "../x", "a/../../x", "/tmp/x", "..", "a/..", ".", "", "a//b", "a/" } do
      it("nothing to '" .. name .. "'", function()
        local code, _, err = helper.recipe(folder,
          start .. ("job:write_csv(%q, { { a = 1 } })"):format(name), { "out=o/o" })
        assert.are.equal(1, code)
        assert.matches("recipe.lua:3: job:write_csv", err)
        assert.is_false(helper.exists(folder .. "/x"))
        assert.is_false(helper.exists(folder .. "/o/x"))
      end)
    end

    it("nothing through links", function()
      os.execute(("cd %s && mkdir -p o outside && ln -s ../outside o/link && ln -s ../outside/f.csv o/f.csv")
        :format(folder))
      for _, name in ipairs { "link/x.csv", "f.csv", "link" } do
        local code, _, err = helper.recipe(folder,
          start .. ("job:write_csv(%q, { { a = 1 } })"):format(name), { "out=o" })
        assert.are.equal(1, code)
        assert.matches("link", err)
      end
      assert.are.equal("", helper.output_of("ls " .. folder .. "/outside"))
    end)

    it("nothing where out was not chosen and is a link", function()
      os.execute(("cd %s && mkdir outside && ln -s outside out"):format(folder))
      local code, _, err = helper.recipe(folder, start .. "job:write { a = 1 }")
      assert.are.equal(1, code)
      assert.matches("is a link", err)
      assert.are.equal(0, (helper.recipe(folder, start .. "job:write { a = 1 }", { "out=out" })))
    end)

    it("nothing where the script would like out to be", function()
      for _, trick in ipairs {
        "arg = { 'out=outside' }", "arg[1] = 'out=outside'", "rawset(arg, 1, 'out=outside')",
      } do
        local code, out = helper.recipe(folder,
          trick .. "\n" .. start .. "print(job.out) job:write { a = 1 }", { "out=o" })
        assert.are.same({ 0, "o\n" }, { code, out })
      end
      local code, _, err = helper.recipe(folder, [[
        local lw = require "linewright"
        lw.recipe { title = "t", inputs = { out = { kind = "text", default = "outside" } } }:write { a = 1 }
      ]])
      assert.are.same({ 0, "" }, { code, err })
      assert.is_false(helper.exists(folder .. "/outside"))
      helper.write(folder .. "/inner.lua", start .. "job:write { a = 1 }")
      for _, out in ipairs { "../outside", "/tmp/outside", "x/../../outside" } do
        code, _, err = helper.recipe(folder, start .. ("job:run('inner.lua', { out = %q })"):format(out), { "out=o" })
        assert.are.equal(1, code)
        assert.matches("run: ", err)
      end
      assert.is_false(helper.exists(folder .. "/outside"))
      assert.is_false(helper.exists "/tmp/outside")
      code = helper.recipe(folder, start .. "job:run('inner.lua', { out = 'x' }) job:write { b = 1 }", { "out=o" })
      assert.are.equal(0, code)
      assert.is_true(helper.exists(folder .. "/o/x/results.json"))
      assert.is_true(helper.exists(folder .. "/o/results.json"))
    end)

    it("nothing by a figure or calibration elsewhere", function()
      local code, _, err = helper.recipe(folder, start .. [[
        lw.figure { title = "t", series = { { x = { 1, 2 }, y = { 1, 2 } } } }:save "x.svg"
      ]], { "out=o" })
      assert.are.equal(1, code)
      assert.matches("is not under o; use job:path", err)
      code, _, err = helper.recipe(folder, [[
        require "linewright".figure { title = "t", series = { { x = { 1, 2 }, y = { 1, 2 } } } }:save "x.svg"
      ]])
      assert.are.equal(1, code)
      assert.matches("only a recipe may write", err)
    end)
  end)
end)
