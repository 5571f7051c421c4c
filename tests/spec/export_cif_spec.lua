-- SPDX-License-Identifier: GPL-3.0-or-later
-- job:write_cif: what is written is read back by the reader for powder CIF from others, and by a plain splitter here
-- that shares nothing with it.
local lw = require "linewright"
local helper = dofile((debug.getinfo(1, "S").source:match "^@(.*/)" or "./") .. "helper.lua")

--[[ Names of the powder dictionary (cif_pow 2.5.0, 2025) and the core dictionary of COMCIFS, in their spelling with
underscores only; audit, space group and pd_refln_peak_id from memory. ]]
local dictionary = {}
for name in ([[
  audit_creation_date audit_creation_method pd_meas_special_details pd_proc_info_data_reduction pd_calc_method
  pd_proc_info_excluded_regions pd_proc_ls_prof_wR_factor pd_proc_ls_prof_wR_expected pd_phase_name
  cell_length_a cell_length_b cell_length_c cell_angle_alpha cell_angle_beta cell_angle_gamma space_group_IT_number
  diffrn_radiation_wavelength_id diffrn_radiation_wavelength diffrn_radiation_wavelength_wt
  pd_peak_special_details pd_peak_id pd_peak_2theta_maximum pd_peak_d_spacing pd_peak_intensity pd_peak_pk_height
  pd_peak_width_2theta pd_peak_wavelength_id refln_index_h refln_index_k refln_index_l pd_refln_peak_id
  pd_meas_number_of_points pd_data_point_id pd_meas_2theta_scan pd_meas_counts_total pd_meas_intensity_total
  pd_meas_intensity_total_su pd_calc_intensity_total pd_proc_intensity_bkg_calc pd_proc_ls_weight
]]):gmatch "%S+" do
  dictionary[name] = true
end

-- Items and columns of a file with one block: text fields first, then words; no quote stands within quotes here.
local function split(text)
  local fields, words = {}, {}
  text = text:gsub("^#[^\n]*\n", ""):gsub("\n;(.-)\n;", function(field)
    fields[#fields + 1] = field
    return (" <field%d>"):format(#fields)
  end)
  for word in text:gsub("'([^'\n]*)'", function(inner) return "<" .. inner:gsub(" ", "\1") .. ">" end):gmatch "%S+" do
    words[#words + 1] = word
  end
  local function value(word)
    local field = word:match "^<field(%d+)>$"
    return field and fields[tonumber(field)] or (word:gsub("^<(.*)>$", "%1"):gsub("\1", " "))
  end
  local found, i = {}, 2
  while i <= #words do
    if words[i] == "loop_" then
      local names, row = {}, 0
      for k = i + 1, #words do
        if not words[k]:match "^_" then break end
        names[#names + 1] = words[k]:sub(2)
        found[names[#names]] = {}
      end
      i = i + 1 + #names
      while i <= #words and words[i] ~= "loop_" and not words[i]:match "^_" do
        row = row + 1
        for k, name in ipairs(names) do
          found[name][row] = value(words[i + k - 1])
        end
        i = i + #names
      end
    else
      found[words[i]:sub(2)] = value(words[i + 1])
      i = i + 2
    end
  end
  return found, words[1]
end

-- 1.234(56) is 1.234 with u = 0.056; also in powers of ten.
local function number(text)
  local sign, whole, part, power, su = text:match "^(%-?)(%d+)%.?(%d*)e?(%-?%d*)%(?(%d*)%)?$"
  assert(whole, text)
  local scale = 10 ^ (tonumber(power) or 0)
  local size = tonumber(whole .. "." .. (part == "" and "0" or part)) * scale
  return sign == "-" and -size or size, su ~= "" and tonumber(su) * 10.0 ^ -#part * scale or nil
end

describe("powder CIF of a fit", function()
  local folder, printed
  local head = [[
    local lw = require "linewright"
    local job = lw.recipe { title = "Spec", inputs = { scan = { kind = "file" } } }
    local scan = lw.read_scan(job.scan, { radiation = "Cu Ka", range = { 28, 70 } })
    local standard = lw.standard "lab6-660c"
  ]]
  local function run(text)
    return helper.recipe(folder, head .. text, { "scan=" .. helper.demo .. "/lab6_before_service.xy", "out=o" })
  end

  setup(function()
    folder = helper.folder()
    local code, out, err = run [[
      local lines = lw.fit_lines(scan, standard:reflections(scan))
      print(job:write_cif("sub/fit.cif", lines))
      for _, line in ipairs(lines) do
        print(("%s %.12g %.12g %.12g %.12g"):format(line.hkl, line.two_theta.value, line.two_theta.u, line.fwhm.value,
          line.area.value))
      end
      local sigma = {}
      for i = 1, scan.n do sigma[i] = math.sqrt(scan.intensity[i]) / 3 end
      local rates = lw.scan { two_theta = scan.two_theta, intensity = scan.intensity / 3, sigma = sigma,
                              radiation = "Cu Ka", name = "rates" }
      job:write_cif("rates.cif", lw.fit_lines(rates, standard:reflections(rates)))
      local plain = lw.scan { two_theta = scan.two_theta, intensity = scan.intensity / 3, noise = "scaled",
                              radiation = "Cu Ka", name = "" }
      job:write_cif("plain.cif", lw.fit_lines(plain, standard:reflections(plain)))
    ]]
    assert.are.same({ 0, "" }, { code, err })
    printed = out
  end)
  teardown(function() helper.remove(folder) end)

  local function original()
    return lw.read_scan(helper.demo .. "/lab6_before_service.xy", { radiation = "Cu Ka", range = { 28, 70 } })
  end

  it("is read back with the same angles, counts and wavelengths", function()
    assert.are.equal("o/sub/fit.cif", printed:match "^%S+")
    local scan, back = original(), lw.read_scan(folder .. "/o/sub/fit.cif")
    assert.are.equal(scan.n, back.n)
    assert.are.equal(scan.two_theta, back.two_theta)
    assert.are.equal(scan.intensity, back.intensity)
    assert.are.equal("counts", back.noise)
    -- the strongest component of copper's K-alpha, 8047.837 eV (Hoelzer et al. 1997, Phys. Rev. A 56, 4554, table II,
    -- from memory), with h c = 1239.841984 eV nm of the SI
    assert.is_near(1239.841984 / 8047.837, back.radiation.wavelength_nm, 1e-8)
    -- and it doesn't contradict the radiation that it was written with
    local _, notes = lw.read_scan(folder .. "/o/sub/fit.cif", { radiation = "Cu Ka" }).header:gsub("while the file", "")
    assert.are.equal(0, notes)
  end)

  it("keeps intensities that are no counts, and their uncertainties, to the last digit", function()
    local scan, back = original(), lw.read_scan(folder .. "/o/rates.cif")
    assert.are.equal("sigma", back.noise)
    local plain = lw.read_scan(folder .. "/o/plain.cif", { noise = "scaled" })
    for i = 1, scan.n do
      assert.are.equal(scan.intensity[i] / 3, back.intensity[i])
      assert.are.equal(math.sqrt(scan.intensity[i]) / 3, back.sigma[i])
      assert.are.equal(scan.intensity[i] / 3, plain.intensity[i])
    end
  end)

  it("uses names of the dictionaries only, and says where it comes from", function()
    for _, name in ipairs { "sub/fit", "rates", "plain" } do
      local text = helper.read(folder .. "/o/" .. name .. ".cif")
      assert.are.equal("#\\#CIF_1.1\n", text:sub(1, 11))
      for item in text:gsub("\n;.-\n;", ""):gmatch "%f[^%s]_(%S+)" do
        assert.is_true(dictionary[item], item)
      end
    end
    local found, block = split(helper.read(folder .. "/o/sub/fit.cif"))
    assert.are.equal("data_lab6_before_service", block)
    assert.are.equal("Linewright " .. lw.version, found.audit_creation_method)
    assert.matches("^%d%d%d%d%-%d%d%-%d%d$", found.audit_creation_date)
    assert.are.equal("Scan file: lab6_before_service.xy\nSHA-256: "
      .. helper.output_of("sha256sum " .. helper.quote(helper.demo .. "/lab6_before_service.xy")):match "^%x+",
      found.pd_meas_special_details)
    assert.matches("shape voigt", found.pd_proc_info_data_reduction)
    assert.matches("No instrument", found.pd_proc_info_data_reduction)
    assert.matches("not read from a file", split(helper.read(folder .. "/o/rates.cif")).pd_meas_special_details)
    assert.are.equal("data_rates", select(2, split(helper.read(folder .. "/o/rates.cif"))))
  end)

  it("has lines, cell and wavelengths in the units of CIF", function()
    local found = split(helper.read(folder .. "/o/sub/fit.cif"))
    -- certificate of SRM 660c: 0.415 682 6(80) nm, k = 2 (from memory)
    local a, u_a = number(found.cell_length_a)
    assert.is_near(4.156826, a, 1e-6)
    assert.is_near(0.00004, u_a, 0.000001)
    assert.are.equal("221", found.space_group_IT_number)
    assert.are.equal("90", found.cell_angle_gamma)
    local sum, strongest = 0, 1
    for i, weight in ipairs(found.diffrn_radiation_wavelength_wt) do
      sum = sum + number(weight)
      strongest = number(weight) > number(found.diffrn_radiation_wavelength_wt[strongest]) and i or strongest
    end
    assert.is_near(1, sum, 1e-12)
    local wavelength = number(found.diffrn_radiation_wavelength[strongest])
    local k = 0
    for hkl, place, u, fwhm, area in printed:gmatch "\n(%d+) (%S+) (%S+) (%S+) (%S+)" do
      k = k + 1
      place, u, fwhm, area = tonumber(place), tonumber(u), tonumber(fwhm), tonumber(area)
      -- u has two digits: rounding takes at most half of one of 10 units, 0.05 u
      local two_theta, u_two_theta = number(found.pd_peak_2theta_maximum[k])
      assert.is_near(place, two_theta, 0.06 * u)
      assert.is_near(u, u_two_theta, 0.06 * u)
      local width, u_width = number(found.pd_peak_width_2theta[k])
      assert.is_near(fwhm, width, 0.06 * u_width)
      local intensity, u_intensity = number(found.pd_peak_intensity[k])
      assert.is_near(area, intensity, 0.06 * u_intensity)
      assert.are.equal(tostring(strongest), found.pd_peak_wavelength_id[k])
      -- Bragg's law, and its derivative for u
      local theta = math.rad(place / 2)
      local d, u_d = number(found.pd_peak_d_spacing[k])
      assert.is_near(wavelength / (2 * math.sin(theta)), d, 0.06 * u_d)
      assert.is_near(d / math.tan(theta) * math.rad(u / 2), u_d, 0.06 * u_d)
      -- the link to the reflections; a cubic cell, aberrations of some 0.02 deg still in d
      local h, l = number(found.refln_index_h[k]), number(found.refln_index_l[k])
      local second = number(found.refln_index_k[k])
      assert.are.equal(hkl, ("%d%d%d"):format(h, second, l))
      assert.are.equal(found.pd_peak_id[k], found.pd_refln_peak_id[k])
      assert.is_near(a, d * math.sqrt(h * h + second * second + l * l), 2e-3 * a)
    end
    assert.is_true(k >= 6)
    assert.are.equal(k, #found.pd_peak_id)
    -- the background lies below the fit, the weight is that of counts, 1/expected, and the columns give the factor
    -- R_wp = sqrt(sum w (y - calculated)^2 / sum w y^2) by its definition (dictionary's text, cif_pow)
    local missed, all = 0, 0
    for i, calculated in ipairs(found.pd_calc_intensity_total) do
      local expected, weight = number(calculated), number(found.pd_proc_ls_weight[i])
      local counts = number(found.pd_meas_counts_total[i])
      assert.is_true(number(found.pd_proc_intensity_bkg_calc[i]) <= expected)
      assert.is_near(1, expected * weight, 1e-9)
      missed, all = missed + weight * (counts - expected) ^ 2, all + weight * counts ^ 2
    end
    assert.are.equal(tonumber(found.pd_meas_number_of_points), #found.pd_calc_intensity_total)
    assert.is_near(1, math.sqrt(missed / all) / number(found.pd_proc_ls_prof_wR_factor), 1e-9)
  end)

  it("is refused for what it can't be made of or where it can't go, and nothing is left", function()
    for _, case in ipairs {
      { "job:write_cif('x.cif', scan)", "wants a lines, not scan" },
      { "job:write_cif('x.cif')", "wants a lines, not nothing" },
      { "job:write_cif(7, 7)", "the name must be a text, not number" },
      { "job.write_cif('x.cif', scan)", "call it with a colon" },
      { "job:write_cif('../x.cif', lw.fit_lines(scan, standard:reflections(scan)))", "leads out of the folder" },
      { "job:write_cif('/tmp/x.cif', lw.fit_lines(scan, standard:reflections(scan)))", "absolute path" },
    } do
      local code, _, err = run(case[1])
      assert.are.equal(1, code)
      assert.is_truthy(err:find(case[2], 1, true), err)
      assert.is_false(helper.exists(folder .. "/o/x.cif") or helper.exists(folder .. "/x.cif"))
    end
  end)
end)
