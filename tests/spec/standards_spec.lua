-- SPDX-License-Identifier: GPL-3.0-or-later
-- Radiations, materials and reference materials as scripts see them, and the safety of literals.
local lw = require "linewright"
local helper = dofile((debug.getinfo(1, "S").source:match "^@(.*/)" or "./") .. "helper.lua")

describe("a literal", function()
  local folder
  before_each(function() folder = helper.folder() end)
  after_each(function() helper.remove(folder) end)

  local function material(text)
    helper.write(folder .. "/own.lua", text)
    return pcall(lw.material, folder .. "/own.lua")
  end

  it("is found by name and alias, whatever the case and dashes", function()
    for _, name in ipairs { "lab6-660c", "LaB6 660C", "SRM 660c", "srm660c" } do
      assert.are.equal("lab6-660c", lw.standard(name).name)
    end
    assert.are.equal(lw.radiation "Cu Ka", lw.radiation "cu_ka")
  end)

  it("carries the certificate", function()
    local s = lw.standard "lab6-660c"
    -- SRM 660c certificate (2015): 0.415 682 6 nm, U = 0.000 008 nm, k = 2
    assert.are.equal(0.4156826, s.cell.a.value)
    assert.is_near(0.000004, s.cell.a.u, 1e-12)
    assert.are.equal("Pm-3m", s.space_group)
    assert.are.equal("LaB6", s.material.formula)
  end)

  it("may be a wavelength", function()
    assert.are.equal(0.05168, lw.radiation("0.05168nm").wavelength_nm)
    assert.is_near(0.05168, lw.radiation("0.5168 angstrom").wavelength_nm, 1e-15)
    assert.are.equal(0.05168, lw.radiation(0.05168).wavelength_nm)
    assert.is_true(lw.radiation("51.68 pm").is_plain)
  end)

  it("that is unknown gets the nearest name", function()
    assert.error_matches(function() lw.standard "lab6-660x" end, "did you mean 'lab6%-660")
    assert.error_matches(function() lw.material "nikel" end, "did you mean 'nickel'")
    assert.error_matches(function() lw.radiation "Cu Kb" end, "did you mean 'cu_ka")
  end)

  it("may be a file or table of one's own, in angstrom too", function()
    local fine, own = material [[return { name = "own", formula = "Ni", space_group = 225, unit = "angstrom",
      cell = { a = 3.5238 }, source = "spec" }]]
    assert.is_true(fine, tostring(own))
    assert.is_near(0.35238, own.cell.a.value, 1e-15)
    assert.are.equal("Fm-3m", own.space_group)
    assert.are.equal(own.cell.a, lw.material { name = "x", formula = "Ni", space_group = "Fm-3m",
      cell = { a = 0.35238 }, source = "spec" }.cell.a)
  end)

  it("with a slip is refused with the nearest field", function()
    local fine, err = material [[return { name = "own", formla = "Ni", space_group = 225, cell = { a = 1 } }]]
    assert.is_false(fine)
    assert.matches("did you mean 'formula'", tostring(err))
  end)

  it("can't do anything but hold constants", function()
    for text, message in pairs {
      ["return { name = function() end }"] = "must be a text",
      ["os.execute 'true'"] = "os",
      ["return { name = ('x'):rep(10) }"] = "string",
      ["while true do end"] = "computes too long",
      ["local s = 'x' while true do s = s .. s end"] = "needs too much memory",
      ["return 7"] = "not a table",
      ["return"] = "must return a table",
      ["\27Lua"] = "binary",
      ["return {"] = "expected",
    } do
      local fine, err = material(text)
      assert.is_false(fine, text)
      assert.matches(message, tostring(err), text)
    end
    assert.are.equal("xx", ("x"):rep(2)) -- strings have their methods back
  end)

  it("gives reflections that Bragg's law fits", function()
    local r = lw.material("nickel"):reflections { 20, 150, radiation = "Cu Ka" }
    local wavelength = lw.radiation("Cu Ka").wavelength_nm
    local names = {}
    for i = 1, #r do
      names[i] = r[i].hkl
      assert.is_near(wavelength / (2 * r[i].d_nm), math.sin(math.rad(r[i].two_theta_deg / 2)), 1e-12)
      assert.is_near(0.35238 / math.sqrt(r[i].h ^ 2 + r[i].k ^ 2 + r[i].l ^ 2), r[i].d_nm, 1e-12)
    end
    -- allowed lines of a face-centred cell: all even or all odd (International Tables A, Fm-3m)
    assert.are.same({ "111", "200", "220", "311", "222", "400", "331" }, names)
    assert.are.equal(8, r[1].multiplicity)
    assert.are.equal(3, #r:select(function(line) return line.d_nm > 0.12 end))
  end)
end)
