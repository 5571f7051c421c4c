-- SPDX-License-Identifier: GPL-3.0-or-later
local lw = require "linewright"

describe("a result", function()
  local r = lw.result {
    name = "one",
    size = lw.quantity { 18.42, 0.63, "nm" },
    n = 3,
    good = true,
    curve = lw.vector { 1, 2, 3 },
    inner = { deep = { x = 1.5 } },
    rows = { { hkl = "111", width = lw.quantity { 0.1, 0.01, "deg" } },
      { hkl = "200", width = lw.quantity { 0.12, 0.02, "deg" } } },
  }

  it("gives its fields as what they are", function()
    assert.are.equal("one", r.name)
    assert.are.equal(18.42, r.size.value)
    assert.are.equal("integer", math.type(r.n))
    assert.is_true(r.good)
    assert.are.same({ 1, 2, 3 }, r.curve:table())
    assert.are.equal(1.5, r.inner.deep.x)
    assert.are.equal("200", r.rows[2].hkl)
    assert.are.equal(2, #r.rows)
    assert.is_nil(r.rows[3])
  end)

  it("is walked by ipairs and pairs", function()
    local seen = {}
    for i, row in ipairs(r.rows) do
      seen[i] = row.hkl
    end
    assert.are.same({ "111", "200" }, seen)
    local names = {}
    for name, value in pairs(r) do
      names[#names + 1] = name
      assert.is_not_nil(value)
    end
    assert.are.same(r:names(), names)
    assert.are.same({ "curve", "good", "inner", "n", "name", "rows", "size" }, names)
  end)

  it("says what is there when a name is wrong", function()
    assert.error_matches(function() return r.siez end, "did you mean 'size'")
    assert.error_matches(function() return r.inner.deep.y end, "it has: x")
    assert.is_nil(r:get "siez")
    assert.are.equal(1.5, r:get "inner.deep.x")
    assert.is_nil(r:get "inner.none.x")
    assert.error_matches(function() r.size = 1 end, "can't be changed")
  end)

  it("gives a plain table", function()
    local t = r:table()
    assert.are.equal("111", t.rows[1].hkl)
    assert.are.same({ 1, 2, 3 }, t.curve)
    assert.are.equal("18.42(63) nm", tostring(t.size))
  end)

  it("keeps what its parts need", function()
    local part = lw.result { a = { b = { c = "still here" } } }.a.b
    collectgarbage()
    collectgarbage()
    assert.are.equal("still here", part.c)
  end)

  it("prints aligned, lists of rows as tables", function()
    local text = tostring(r)
    assert.matches("size   18%.42%(63%) nm", text)
    assert.matches("hkl  width %(deg%)", text)
    assert.matches("111    0%.100%(10%)", text)
    assert.matches("200    0%.120%(20%)", text)
  end)

  it("refuses what a record can't hold", function()
    assert.error_matches(function() lw.result { f = print } end, "a function can't be written")
    assert.error_matches(function() lw.result { [1.5] = 2 } end, "needs names or a plain list")
  end)
end)
