-- SPDX-License-Identifier: GPL-3.0-or-later
local lw = require "linewright"

describe("a vector", function()
  local v = lw.vector { 1, 2, 3, 4 }

  it("is read like a list", function()
    assert.are.equal(4, #v)
    assert.are.equal(2, v[2])
    assert.is_nil(v[0])
    assert.is_nil(v[5])
    local n = 0
    for i, x in ipairs(v) do
      n = n + 1
      assert.are.equal(i, x)
    end
    assert.are.equal(4, n)
    assert.are.same({ 1, 2, 3, 4 }, v:table())
  end)

  it("computes element by element", function()
    assert.are.same({ 2, 4, 6, 8 }, (v + v):table())
    assert.are.same({ 0, 1, 2, 3 }, (v - 1):table())
    assert.are.same({ 9, 8, 7, 6 }, (10 - v):table())
    assert.are.same({ 1, 4, 9, 16 }, (v * v):table())
    assert.are.same({ 1, 4, 9, 16 }, (v ^ 2):table())
    assert.are.same({ -1, -2, -3, -4 }, (-v):table())
    assert.are.same({ 12, 6, 4, 3 }, (12 / v):table())
    assert.is_true(v + 0 == v)
  end)

  it("sums without losing small terms", function()
    assert.are.equal(2, lw.vector({ 1, 1e100, 1, -1e100 }):sum()) -- Neumaier's own example
    assert.are.equal(10, v:sum())
    assert.are.equal(2.5, v:mean())
    assert.are.equal(30, v:dot(v))
    assert.are.same({ 4, 4 }, { v:max() })
    assert.are.same({ 1, 1 }, { v:min() })
  end)

  it("slices without copying, and keeps the owner alive", function()
    local part = (v * 2):slice(2, -2)
    collectgarbage()
    collectgarbage()
    assert.are.same({ 4, 6 }, part:table())
    assert.are.equal(0, #v:slice(3, 2))
    assert.error_matches(function() v:slice(0, 9) end, "outside 1 to 4")
  end)

  it("maps", function()
    assert.are.same({ 1, 4, 9, 16 }, v:map(function(x, i) return x * i end):table())
    assert.error_matches(function() v:map(function() return "x" end) end, "must be a number, not string")
  end)

  it("refuses what can't be", function()
    assert.error_matches(function() return v + lw.vector { 1 } end, "lengths differ, 4 and 1")
    assert.error_matches(function() lw.vector { 1, "a" } end, "must be a number")
    assert.error_matches(function() v[1] = 2 end, "can't be changed")
    assert.error_matches(function() return v.nothing end, "no method 'nothing'")
    assert.error_matches(function() lw.vector({}):mean() end, "empty")
  end)

  it("prints short", function()
    assert.are.equal("vector of 4: 1, 2, 3, 4", tostring(v))
    local long = {}
    for i = 1, 100 do
      long[i] = i
    end
    assert.are.equal("vector of 100: 1, 2, 3, 4, 5, ..., 100", tostring(lw.vector(long)))
  end)
end)
