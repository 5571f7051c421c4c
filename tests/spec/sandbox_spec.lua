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

  -- a table whose length Lua gives as the largest integer, filled up to `most`
  local huge = [[
    local function huge(value, most)
      local parts = {}
      for i = 1, most do parts[i] = ("[%d]=v"):format(i) end
      for i = 0, 62 do if 1 << i > most then parts[#parts + 1] = ("[%d]=v"):format(1 << i) end end
      parts[#parts + 1] = ("[%d]=v"):format(math.maxinteger)
      return load("local v = ... return {" .. table.concat(parts, ",") .. "}")(value)
    end ]]
  local job = "local lw = require 'linewright' local job = lw.recipe { title = 't' } "

  -- { what, recipe, message, flags }; each ends with status 1, a message, and nothing outside out
  local attacks = {
    { "a nested table", job .. "local t = {} for _ = 1, 200000 do t = { t } end job:write { a = t }",
      "nested more than" },
    { "a nested result", job .. "local t = lw.result { a = 1 } for _ = 1, 1000 do t = lw.result { a = t } end",
      "nested more than" },
    { "a table that holds itself", job .. "local t = {} t.t = t job:write { a = t }", "holds itself" },
    { "rows that hold themselves", job .. "local t = {} t[1] = t job:write_csv('a.csv', t)", "holds itself" },
    { "a report of a table in itself", job .. "local t = {} t[1] = t lw.report { { table = t } }", "holds itself" },
    { "few tables for very many values",
      job .. "local t = { 1 } for _ = 1, 40 do t = { t, t } end job:write { a = t }", "time limit",
        { "--time-limit=0.5" } },
    { "few tables for much memory",
      job .. "local t = { 1 } for _ = 1, 40 do t = { t, t } end job:write { a = t }", "memory",
        { "--memory-limit=64" } },
    { "endless columns of a report", huge .. job
      .. "lw.report { { table = { { a = 1 } }, columns = huge('a', 20000) } }",
      "too many" },
    { "endless columns of a file", huge .. job .. "job:write_csv('x.csv', { { a = 1 } }, huge('a', 2000))", "column" },
    { "endless rows", huge .. job .. "job:write_csv('x.csv', huge({ a = 1 }, 2000))", "recipe.lua:" },
    { "an endless vector", huge .. job .. "lw.vector(huge(1.5, 2000))", "too many" },
    { "an endless history", huge .. job .. "lw.history(huge({}, 2000))", "memory" },
    { "an endless report", huge .. job .. "lw.report(huge('a', 2000))", "report" },
    { "an endless list of choices",
      huge .. "require 'linewright'.recipe { inputs = { b = { default = 'a', choices = huge('b', 2000) } } }",
        "choose" },
    { "a name with out= in it", job .. "job:run('inner.lua', { out = 'x', ['out=../mark'] = 'y' })", "twice" },
    { "a name without out", job .. "job:run('inner.lua', { ['out=../mark'] = 'y' })", "folder to write" },
    { "an out that changes its words",
      job .. "local n = 0 job:run('inner.lua', { out = setmetatable({}, { __tostring = function() n = n + 1 "
        .. "return n == 1 and 'x' or '../mark' end }), z = 1 })", "input" },
    { "an out of a text that says ..",
      job .. "job:run('inner.lua', { out = setmetatable({}, { __tostring = function() return '../mark' end }) })",
      "leads out" },
    { "a recipe that runs itself", job .. "job:run('recipe.lua', { out = 'x' })", "overflow" },
    { "bytecode in a recipe that is run", job .. "job:run('bytecode.lua', { out = 'x' })", "binary" },
    { "a device as a recipe", job .. "job:run('/dev/zero', { out = 'x' })", "plain file" },
    { "a device as a scan", job .. "lw.read_scan('/dev/zero', { radiation = 'Cu Ka' })", "/dev/zero" },
    { "a figure with a name that leads out",
      job .. "lw.figure { title = 't', series = { { x = { 1 }, y = { 1 } } } }:save(job:path '../mark.svg')",
        "leads out" },
    { "bytecode in pieces",
      "local n = 0 assert(load(function() n = n + 1 return ({ '\\27', 'Lua' })[n] end, 'x', 'b'))",
      "binary chunk" },
    { "an environment that is a number", "local _ENV <const> = 1 print(x)", "index a number" },
    { "a finalizer that is added later",
      "local m = {} local t = setmetatable({}, m) m.__gc = function() print 'ran' end t = nil "
        .. "collectgarbage() error 'end'", "end" },
    { "an error that claims to be a call for help",
      "error(setmetatable({ kind = 'help' }, { __name = 'linewright.error' }))", "an error that is a table" },
    { "an error whose text is an error", "error(setmetatable({}, { __tostring = function() error 'x' end }))",
      "recipe.lua" },
    { "recursion", "local function f() return 1 + f() end f()", "stack overflow" },
    { "recursion in the error handler", "local function f() return 1 + f() end assert(xpcall(f, f))", "error" },
    { "recursion through metatables",
      "local t = setmetatable({}, {}) getmetatable(t).__index = function(_, k) return t[k .. 'x'] end print(t.a)",
      "overflow" },
    { "deep brackets", "assert(load(('('):rep(1e6)))", "overflow" },
    { "deep tables", "assert(load('return ' .. ('{'):rep(1e5)))", "overflow" },
    { "a deep pattern", "print((('a'):rep(300)):match(('(a'):rep(300) .. (')'):rep(300)))", "too" },
    { "a large text at once", "return ('x'):rep(1 << 30)", "memory", { "--memory-limit=64" } },
    { "a text too large for any memory", "return ('x'):rep(1 << 62, 'yyyy')", "too large" },
    { "a text made by concatenation", "local s = 'x' for _ = 1, 60 do s = s .. s end", "memory",
      { "--memory-limit=64" } },
    { "a buffer that grows",
      "table.concat(setmetatable({}, { __len = function() return 1 << 40 end, "
        .. "__index = function() return 'abcdefgh' end }))",
      "memory", { "--memory-limit=64" } },
    { "memory in a loop of pcall",
      "while true do pcall(function() local t = {} for i = 1, 1e9 do t[i] = ('x'):rep(1e5) .. i end end) end",
      "time limit", { "--memory-limit=64", "--time-limit=1" } },
    { "memory inside the engine", job .. "local v = lw.vector { 1, 2 } local t = {} for i = 1, 1e7 do t[i] = lw.result "
        .. "{ a = v, b = { c = v, d = 'text' } } end", "memory", { "--memory-limit=48" } },
    { "a loop of pcall", "while true do pcall(function() while true do end end) end", "time limit",
      { "--time-limit=0.3" } },
    { "coroutines in coroutines",
      "local function f() pcall(coroutine.wrap(f)) while true do end end while true do pcall(f) end",
      "time limit", { "--time-limit=0.3" } },
    { "fresh coroutines in a loop",
      "while true do pcall(coroutine.wrap(function() while true do "
        .. "pcall(function() while true do end end) end end)) end",
      "time limit", { "--time-limit=0.3" } },
    { "a coroutine that closes itself without end",
      "local c = coroutine.create(function() local x <close> = setmetatable({}, { __close = function() "
        .. "while true do end end }) coroutine.yield() end) coroutine.resume(c) coroutine.close(c)", "time limit",
          { "--time-limit=0.3" } },
    { "__close without end",
      "local x <close> = setmetatable({}, { __close = function() while true do pcall(error) end end })",
      "time limit", { "--time-limit=0.3" } },
    { "__tostring of an error without end",
      "error(setmetatable({}, { __tostring = function() while true do end end }))", "time limit",
        { "--time-limit=0.3" } },
    { "__index without end", "print(setmetatable({}, { __index = function() while true do end end }).x)", "time limit",
      { "--time-limit=0.3" } },
    { "an order that is none, for sort",
      "local t = {} for i = 1, 2e5 do t[i] = i end table.sort(t, function() while true do end end)", "time limit",
      { "--time-limit=0.3" } },
    -- inside one C function no hook fires: the process is ended after three seconds more
    { "a pattern that backtracks", "print(('a'):rep(40):find(('a?'):rep(40) .. ('a'):rep(40)))", "time limit",
      { "--time-limit=0.3" } },
    { "a pattern under pcall", "while true do pcall(string.gsub, ('a'):rep(1e5), ('.-'):rep(30) .. 'b', '') end",
      "time limit", { "--time-limit=0.3" } },
    { "an error handler without end",
      "xpcall(function() while true do end end, function() while true do end end)", "time limit",
        { "--time-limit=0.3" } },
  }
  for _, attack in ipairs(attacks) do
    it("ends " .. attack[1], function()
      helper.write(folder .. "/inner.lua", "require 'linewright'.recipe { title = 'i' }:write { a = 1 }")
      helper.write(folder .. "/bytecode.lua", string.dump(function() end))
      local code, out, err = helper.recipe(folder, attack[2], { "out=o" }, { flags = attack[4] })
      assert.are.same({ 1, "" }, { code, out })
      assert.matches(attack[3], err)
      assert.is_true(#err < 4000)
      assert.are.equal("bytecode.lua inner.lua recipe.lua",
        helper.output_of(("cd %s && ls | grep -v '^o$' | tr '\\n' ' '"):format(folder)))
    end)
  end

  it("gives no metatable of any object", function()
    local code, out, err = helper.recipe(folder, [[
      local lw = require "linewright"
      local job = lw.recipe { title = "t", inputs = { scan = { kind = "file" } } }
      local material, standard = lw.material "nickel", lw.standard "lab6-660c"
      local scan = lw.read_scan(job.scan, { radiation = "Cu Ka" })
      local powder = standard.material
      local reflections = powder:reflections(scan)
      local lines = lw.fit_lines(scan, reflections, {})
      local _, raised = pcall(lw.vector, 1)
      for _, object in ipairs { material, standard, scan, reflections, lines, raised, job, lw.result { a = 1 },
                                lw.radiation "Cu Ka", lw.vector { 1 }, lw.report { title = "t" },
                                lw.figure { title = "t", series = { { x = { 1 }, y = { 1 } } } } } do
        local metatable = getmetatable(object)
        assert(type(metatable) == "string", tostring(metatable))
        assert(not pcall(setmetatable, object, {}))
        assert(not pcall(rawset, object, "x", 1) or type(object) == "table")
      end
    ]], { "scan=" .. helper.demo .. "/lab6_after_service.xy" })
    assert.are.same({ 0, "", "" }, { code, out, err })
  end)

  it("follows no link that is swapped in between look and use", function()
    os.execute(("cd %s && mkdir -p outside o/d"):format(folder))
    helper.write(folder .. "/recipe.lua", job .. [[
      local done, refused = 0, 0
      for i = 1, 4000 do
        if pcall(job.write_csv, job, "d/x.csv", { { a = i } }) then done = done + 1 else refused = refused + 1 end
      end
      print(done, refused)
    ]])
    local code = os.execute(([[cd %s || exit 9
      (while :; do mv o/d o/e; ln -s ../outside o/d; rm o/d; mv o/e o/d; done) 2>/dev/null &
      swapper=$!
      timeout 60 %s recipe.lua out=o >told
      status=$?
      kill $swapper
      wait $swapper 2>/dev/null
      exit $status]]):format(folder, helper.quote(helper.engine)))
    assert.is_true(code)
    local done, refused = helper.read(folder .. "/told"):match "(%d+)%s+(%d+)"
    assert.are.equal(4000, tonumber(done) + tonumber(refused))
    assert.is_true(tonumber(refused) > 0)
    assert.are.equal("", helper.output_of("ls -A " .. folder .. "/outside"))
  end)

  it("draws words, not commands", function()
    if os.execute "command -v gnuplot >/dev/null" ~= true then return pending "gnuplot is not installed" end
    local code, _, err = helper.recipe(folder, job .. [[
      local evil = { "`touch mark`", "'; system 'touch mark'; #", '"; system "touch mark"; #', "$(touch mark)",
                     "a\nsystem('touch mark')\n", "@touch", "%%{touch mark}" }
      for i, words in ipairs(evil) do
        lw.figure { name = words, title = words, caption = words, x = { label = words, unit = words },
          y = { label = words, unit = words }, notes = { { x = 1, y = 1, text = words } },
          series = { { label = words, x = { 1, 2 }, y = { 1, 2 } } } }:save(job:path("f" .. i .. ".svg"))
      end
    ]], { "out=o" })
    assert.are.same({ 0, "" }, { code, err })
    assert.is_false(helper.exists(folder .. "/mark"))
  end)

  it("puts words, not markup, into a report", function()
    local code, _, err = helper.recipe(folder, job .. [[
      local evil = "</p></table><script>alert(1)</script><img src=x onerror=alert(1)>"
      job:write({ [evil] = evil }, lw.report { title = evil, subtitle = evil, evil, { text = evil },
        { heading = evil, prefix = "../../mark" }, { caution = evil, title = evil }, { verdict = "fail", text = evil },
        { table = { { [evil] = evil } }, caption = evil } })
    ]], { "out=o" })
    assert.are.same({ 0, "" }, { code, err })
    local page = helper.read(folder .. "/o/report.html")
    assert.is_nil(page:find("<script>alert", 1, true))
    assert.is_nil(page:find("<img src=x", 1, true))
    assert.is_not_nil(page:find("&lt;script", 1, true))
  end)
end)
