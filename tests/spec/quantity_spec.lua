-- SPDX-License-Identifier: GPL-3.0-or-later
-- Quantities: printing and first-order propagation (JCGM 100:2008, 5.1.2).
local lw = require "linewright"

describe("a quantity", function()
  local a, b = lw.quantity { 18.42, 0.63, "nm" }, lw.quantity { 2, 0.1, "nm" }

  it("has value, u and unit", function()
    assert.are.equal(18.42, a.value)
    assert.are.equal(0.63, a.u)
    assert.are.equal("nm", a.unit)
    assert.are.equal("value", a.kind)
    assert.are.equal(a, lw.quantity { value = 18.42, u = 0.63, unit = "nm" })
  end)

  it("prints value and uncertainty to the same place", function()
    assert.are.equal("18.42(63) nm", tostring(a))
    assert.are.equal("size 18.42(63) nm", "size " .. a)
    assert.are.equal("5", tostring(lw.quantity { 5 }))
  end)

  it("adds in quadrature", function()
    local sum, difference = a + b, a - b
    assert.is_near(20.42, sum.value, 1e-14)
    assert.is_near(math.sqrt(0.63 ^ 2 + 0.1 ^ 2), sum.u, 1e-15)
    assert.is_near(16.42, difference.value, 1e-14)
    assert.are.equal(sum.u, difference.u)
    assert.are.equal("nm", sum.unit)
  end)

  it("knows that it is fully correlated with itself", function()
    assert.are.equal(0, (a - a).u)
    assert.are.equal(2 * a.u, (a + a).u)
    assert.are.equal(0, (a / a).u)
    assert.is_near(2 * a.value * a.u, (a * a).u, 1e-12)
  end)

  it("carries units through products, quotients and powers", function()
    assert.are.equal("nm^2", (a * b).unit)
    assert.are.equal("", (a / b).unit)
    assert.are.equal("nm^-1", (1 / a).unit)
    assert.are.equal("nm", ((a * b) ^ 0.5).unit)
    assert.are.equal("deg nm^-1", (lw.quantity { 1, 0, "deg" } / a).unit)
    assert.is_near(0.63 / 18.42 ^ 2, (1 / a).u, 1e-16)
    assert.is_near(math.sqrt((0.63 / 18.42) ^ 2 + (0.1 / 2) ^ 2), (a / b).u / (a / b).value, 1e-14)
    assert.is_near(3 * 4 * 0.1, (b ^ 3).u, 1e-14)
  end)

  it("scales with plain numbers", function()
    assert.are.equal(36.84, (2 * a).value)
    assert.are.equal(1.26, (a * 2).u)
    assert.are.equal(-18.42, (-a).value)
    assert.are.equal("nm", (a / 2).unit)
  end)

  it("compares and pulls", function()
    assert.is_true(b < a)
    assert.is_false(a <= b)
    assert.is_near((18.42 - 2) / math.sqrt(0.63 ^ 2 + 0.1 ^ 2), a:pull(b), 1e-13)
    assert.is_near((18.42 - 18) / 0.63, a:pull(18), 1e-12)
  end)

  it("refuses what has no meaning", function()
    assert.error_matches(function() return a + lw.quantity { 1, 0, "deg" } end, "units differ, 'nm' and 'deg'")
    assert.error_matches(function() return a + 1 end, "units differ")
    assert.error_matches(function() return a ^ 0.5 end, "is not a unit")
    assert.error_matches(function() lw.quantity { 1, -1 } end, "uncertainty is %-1")
    assert.error_matches(function() lw.quantity { valu = 1 } end, "did you mean 'value'")
    assert.error_matches(function() return a.vlaue end, "did you mean 'value'")
    assert.error_matches(function() a.value = 3 end, "can't be changed")
    assert.error_matches(function() lw.quantity { 1, 0, ("x"):rep(60) } end, "longer than")
  end)

  it("hides its metatable", function()
    assert.are.equal("linewright.quantity", getmetatable(a))
  end)
end)
