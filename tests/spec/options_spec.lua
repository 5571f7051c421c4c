-- SPDX-License-Identifier: GPL-3.0-or-later
-- Options of every kind: what is wrong is refused with the verb, the key and what would be right.
local lw = require "linewright"
local helper = dofile((debug.getinfo(1, "S").source:match "^@(.*/)" or "./") .. "helper.lua")
local standard = helper.demo .. "/lab6_after_service.xy"

describe("an option", function()
  local function refused(words, f, ...)
    local ok, raised = pcall(f, ...)
    assert.is_false(ok)
    for _, word in ipairs(words) do
      assert.is_truthy(tostring(raised):find(word, 1, true), ("'%s' is not in: %s"):format(word, tostring(raised)))
    end
  end
  local function read(options) return lw.read_scan(standard, options) end

  it("that is a pair takes two numbers in order", function()
    local scan = read { range = { 28, 30 } }
    assert.is_true(scan.two_theta[1] >= 28 and scan.two_theta[#scan.two_theta] <= 30)
    refused({ "read_scan", "range", "{low, high}" }, read, { range = { 28 } })
    refused({ "read_scan", "range", "{low, high}" }, read, { range = { 1, 2, 3 } })
    refused({ "read_scan", "range", "number" }, read, { range = { "a", 30 } })
    refused({ "read_scan", "range" }, read, { range = { 30, 28 } })
    refused({ "read_scan", "range" }, read, { range = 28 })
    refused({ "read_scan", "range" }, read, { range = "28" })
    refused({ "read_scan", "range" }, read, { range = true })
    refused({ "read_scan", "range" }, read, { range = print })
    refused({ "read_scan", "range" }, read, { range = { 0 / 0, 30 } })
  end)

  it("that is a word takes one of its words", function()
    refused({ "read_scan", "noise", "counts" }, read, { noise = "count" })
    refused({ "read_scan", "noise" }, read, { noise = 3 })
    refused({ "read_scan", "noise" }, read, { noise = {} })
    refused({ "read_scan", "noise" }, read, { noise = false })
  end)

  it("that is a text takes a text", function()
    refused({ "read_scan", "block", "a text" }, read, { block = 1 })
    refused({ "read_scan", "block" }, read, { block = true })
  end)

  it("that is an object takes it, or its name", function()
    local radiation = lw.radiation "Cu Ka"
    assert.are.equal(tostring(radiation), tostring(read({ radiation = radiation }).radiation))
    assert.are.equal(tostring(radiation), tostring(read({ radiation = "Cu Ka" }).radiation))
    refused({ "Cu Kz" }, read, { radiation = "Cu Kz" })
    refused({ "read_scan", "radiation", "not vector" }, read, { radiation = lw.vector { 1 } })
    refused({ "read_scan", "radiation" }, read, { radiation = 1.5 })
    refused({ "read_scan", "radiation" }, read, { radiation = { 1 } })
  end)

  it("has a name that is known", function()
    refused({ "read_scan", "rnge", "range" }, read, { rnge = { 1, 2 } })
    refused({ "read_scan", "named" }, read, { { 1, 2 } })
    refused({ "read_scan", "options", "table" }, read, "range")
  end)
end)

describe("a job", function()
  local folder
  before_each(function() folder = helper.folder() end)
  after_each(function() helper.remove(folder) end)
  local start = "local lw = require 'linewright' local job = lw.recipe { title = 't' }\n"

  it("writes a figure twice, as a drawing and as a picture", function()
    if os.execute "command -v gnuplot >/dev/null" ~= true then return pending "gnuplot is not installed" end
    local code, _, err = helper.recipe(folder, start
      .. "job:write(lw.figure { name = 'f', title = 't', series = { { x = { 1, 2 }, y = { 1, 2 } } } })", { "out=o" })
    assert.are.same({ 0, "" }, { code, err })
    assert.matches("</svg>%s*$", helper.read(folder .. "/o/figures/f.svg"))
    assert.are.equal("\137PNG", helper.read(folder .. "/o/figures/f.png"):sub(1, 4))
  end)

  it("tells how far it is, and says nothing where nobody looks", function()
    local code, out, err = helper.recipe(folder, start
      .. "for i = 1, 4 do job:progress('steps', i / 4) end job:progress('more', 0.5) print 'done'", { "out=o" })
    assert.are.same({ 0, "done\n", "" }, { code, out, err })
    code, out, err = helper.recipe(folder, start .. "job:progress('steps', 'half')", { "out=o" })
    assert.are.same({ 1, "" }, { code, out })
    assert.matches("job:progress: the fraction must be a number", err)
  end)

  it("wants something to write", function()
    local code, _, err = helper.recipe(folder, start .. "job:write()", { "out=o" })
    assert.are.equal(1, code)
    assert.matches("nothing was given to write", err)
  end)

  it("refuses an input that changed since it began", function()
    local code, _, err = helper.recipe(folder, [[
      local lw = require "linewright"
      local job = lw.recipe { title = "t", inputs = { scan = { kind = "file" } } }
      job:write_csv("a.csv", { { x = 10, y = 1 }, { x = 11, y = 2 }, { x = 12, y = 3 } }, { "x", "y" })
      lw.read_scan(job.scan, { radiation = "Cu Ka" })
    ]], { "out=.", "scan=a.csv" }, { before = "printf '10 4\\n11 5\\n12 6\\n' >a.csv; " })
    assert.are.equal(1, code)
    assert.matches("a.csv has changed since the job began", err)
  end)
end)
