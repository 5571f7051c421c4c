-- SPDX-License-Identifier: GPL-3.0-or-later
-- job:each: one process or several give the same, in the same order, and none of them outlives the job.
local helper = dofile((debug.getinfo(1, "S").source:match "^@(.*/)" or "./") .. "helper.lua")

describe("job:each", function()
  local folder
  before_each(function() folder = helper.folder() end)
  after_each(function() helper.remove(folder) end)

  local start = [[
    local lw = require "linewright"
    local job = lw.recipe { title = "Spec", inputs = { workers = { kind = "text", default = "1", help = "how many" } } }
    local function key(item) return "item " .. item end
    local options = { workers = job.workers }
  ]]
  local function run(text, arguments, options)
    return helper.recipe(folder, start .. text, arguments, options)
  end
  -- Processes whose command line names this spec's folder; the brackets keep the shell that looks from finding itself.
  local function processes()
    return tonumber(helper.output_of(("pgrep -cf -- 'out=[/]%s/o'"):format(folder:sub(2))))
  end

  it("gives the same results in the same order with any number of workers", function()
    -- the first items take longest, so that several workers end in another order than they began
    local text = [[
      local items = {}
      for i = 1, 9 do items[i] = i end
      for place, item, result, message in job:each(items, key, function(i)
        local sum = 0
        for k = 1, (10 - i) * 200000 do sum = sum + 1 / k end
        if i == 4 then error "four is refused" end
        return { sum = sum, size = lw.quantity { i / 3, 0.1, "nm" }, text = 'a "quoted"\nline' }
      end, options) do
        print(place, item, result and ("%.17g"):format(result.sum), result and result.size, message)
      end
      job:write { fine = true }
    ]]
    local outputs = {}
    for i, workers in ipairs { "1", "2", "5", "64", "auto" } do
      local code, out, err = run(text, { "out=o" .. i, "workers=" .. workers })
      assert.are.equal(0, code, err)
      outputs[i] = out
      assert.are.equal(outputs[1], out)
    end
    assert.matches("^1\t1\t14%.[%d]+\t0%.33%(10%) nm\tnil\n2\t2", outputs[1])
    assert.matches("4\t4\tnil\tnil\trecipe%.lua:%d+: four is refused\n5", outputs[1])
  end)

  it("keeps what was finished, whoever did it", function()
    local text = [[
      for _, item, result, message in job:each({ "a", "b", "c" }, key, function(item)
        if job.workers == "3" then error "done again" end
        return { name = item }
      end, options) do
        print(item, result and result.name, message)
      end
    ]]
    local code, first, err = run(text, { "out=o", "workers=2" })
    assert.are.equal(0, code, err)
    local _, second = run(text, { "out=o", "workers=3" })
    assert.are.equal("a\ta\tnil\nb\tb\tnil\nc\tc\tnil\n", first)
    assert.are.equal(first, second)
  end)

  it("refuses what can't be done by a process of its own, with one worker too", function()
    for body, message in pairs {
      ["job:write { a = 1 }"] = "job:write: a function given to job:each can't write; let it return",
      ["job:once('k', function() return {} end)"] = "job:once: a function given to job:each can't write",
      ["return job:path 'x'"] = "job:path: a function given to job:each can't write",
      ["return job:each({}, key, key)"] = "job:each: a function given to it can't use it",
      ["return { f = print }"] = "function",
    } do
      for _, workers in ipairs { "1", "2" } do
        local code, out = run(([[
          for _, _, result, message in job:each({ 1, 2 }, key, function() %s end, options) do print(result, message) end
        ]]):format(body), { "workers=" .. workers })
        if code == 0 then
          assert.is_truthy(out:find(message, 1, true), body .. "\n" .. out)
        else
          assert.are.equal("return { f = print }", body)
        end
      end
    end
    for value, message in pairs { ["0"] = "'0' workers", ["65"] = "'65' workers", ["1.5"] = "'1.5' workers",
                                  many = "'many' workers" } do
      local code, _, err = run("for _ in job:each({ 1 }, key, key, options) do end", { "workers=" .. value })
      assert.are.equal(1, code)
      assert.is_truthy(err:find(message, 1, true), err)
      assert.is_truthy(err:find("give a whole number from 1 to 64", 1, true), err)
    end
    local _, _, err = run("job:each({}, key, key, { worker = 2 })", {})
    assert.is_truthy(err:find("did you mean 'workers'", 1, true), err)
    local _, out = run([[
      for _, _, _, message in job:each({ 1 }, function() return {} end, key) do print(message) end
    ]], {})
    assert.is_truthy(out:find("what the function of the key gives", 1, true), out)
    _, out = run([[for _, _, _, message in job:each({ "a\nb" }, key, key) do print(message) end]], {})
    assert.is_truthy(out:find("the key can't be used", 1, true), out)
  end)

  it("names the item whose worker died, and keeps what the others finished", function()
    local text = [[
      for _, item, result in job:each({ "a", "b", "c" }, key, function(item)
        if item == "b" and job.workers == "2" then os.%s end
        return { name = item }
      end, options) do
        print(item, result.name)
      end
    ]]
    for how, words in pairs {
      ["exit(7)"] = "ended with status 7", ["execute 'kill -9 $PPID'"] = "was killed by signal 9",
    } do
      local body = text:format(how)
      local code, _, err = run(body, { "out=o", "workers=2" }, { flags = { "--trusted" } })
      assert.are.equal(1, code)
      words = "the worker for item 2 (b) " .. words .. " before it was done; what was finished is kept"
      assert.is_truthy(err:find(words, 1, true), err)
      assert.matches('"key": "[^"]*item a"', helper.read(folder .. "/o/journal.jsonl"))
      local out
      code, out = run(body, { "out=o", "workers=1" }, { flags = { "--trusted" } })
      assert.are.equal(0, code)
      assert.are.equal("a\ta\nb\tb\nc\tc\n", out)
      helper.remove(folder .. "/o")
    end
  end)

  it("leaves no process behind, however the loop ends", function()
    local endless = [[
      local function forever(i) if i > 1 then while true do end end return { i = i } end
      for _, item in job:each({ 1, 2, 3, 4 }, key, forever, options) do %s end
      print "after"
    ]]
    local arguments = { "out=" .. folder .. "/o", "workers=3" }
    assert.are.equal(0, processes())
    local code, out = run(endless:format "break", arguments)
    assert.are.equal(0, code)
    assert.are.equal("after\n", out)
    assert.are.equal(0, processes())
    local err
    code, out, err = run(endless:format "error 'enough'", arguments)
    assert.are.equal("", out)
    assert.are.equal(1, code)
    assert.matches("enough", err)
    assert.are.equal(0, processes())
    code, out, err = run(endless:format "", arguments, { signal_after = 1 })
    assert.are.equal("", out)
    assert.are.equal(130, code)
    assert.matches("interrupted", err)
    assert.are.equal(0, processes())
    code, out, err = run(endless:format "", arguments, { flags = { "--time-limit=1" } })
    assert.are.equal("", out)
    assert.are.equal(1, code)
    assert.matches("time limit", err)
    assert.are.equal(0, processes())
  end)

  it("shares the memory limit among the workers", function()
    -- 30 MB fit into 64, but not twice
    local text = [[
      for _, item, result, message in job:each({ 1, 2 }, key, function(i)
        local t = ("x"):rep(30 << 20)
        return { n = #t }
      end, options) do
        print(result and result.n, message)
      end
    ]]
    local flags = { flags = { "--memory-limit=64" } }
    local _, out = run(text, { "out=a", "workers=1" }, flags)
    assert.are.equal("31457280\tnil\n31457280\tnil\n", out)
    _, out = run(text, { "out=b", "workers=2" }, flags)
    assert.are.equal("nil\tnot enough memory\nnil\tnot enough memory\n", out)
  end)

  it("works in the module for a stock Lua", function()
    local module = helper.engine:match "^(.*)/" .. "/linewright.so"
    if not helper.exists(module) or helper.output_of "command -v lua5.4" == "" then
      pending "needs lua5.4 and the module"
      return
    end
    helper.write(folder .. "/recipe.lua", start .. [[
      for _, item, result in job:each({ 3, 2, 1 }, key, function(i) return { half = i / 2 } end, options) do
        print(item, result.half)
      end
    ]])
    assert.are.equal("3\t1.5\n2\t1\n1\t0.5", helper.output_of(
      ("cd %s && LUA_CPATH=%s lua5.4 recipe.lua workers=2 out=o 2>&1"):format(folder, helper.quote(module))))
  end)
end)
