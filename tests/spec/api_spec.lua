-- SPDX-License-Identifier: GPL-3.0-or-later
-- The description of the api against the bindings, both ways, and against its own annotations.
local lw = require "linewright"
local helper = dofile((debug.getinfo(1, "S").source:match "^@(.*/)" or "./") .. "helper.lua")

local api = lw.api()
local registry = debug.getregistry()

local function noun_names()
  local names = {}
  for key in pairs(registry) do
    local name = type(key) == "string" and key:match "^linewright%.([a-z_]+)$"
    local inner = { error = true, help = true, api = true, job = true }
    if name and type(registry[key]) == "table" and not inner[name] then
      names[#names + 1] = name
    end
  end
  table.sort(names)
  return names
end

local function sorted_keys(t)
  local keys = {}
  for key in pairs(t) do
    keys[#keys + 1] = key
  end
  table.sort(keys)
  return keys
end

describe("the description of the api", function()
  it("has every function of the module, and no other", function()
    for name, value in pairs(lw) do
      if type(value) == "function" and not api.functions[name] then
        -- a method of the engine's list describes itself
        assert.matches("source: %S", lw.help(name), name)
        assert.matches("assumes: %S", lw.help(name), name)
      end
    end
    for name in pairs(api.functions) do
      assert.are.equal("function", type(lw[name]), name)
    end
  end)

  it("has every noun, its methods and fields, and no other", function()
    local nouns = noun_names()
    assert.are.same(nouns, sorted_keys(api.nouns))
    local seen = {}
    for _, noun in ipairs(nouns) do
      local meta = registry["linewright." .. noun]
      for method in pairs(meta.__methods) do
        assert.is_table(api.methods[noun .. ":" .. method], noun .. ":" .. method .. " is not described")
        seen[noun .. ":" .. method] = true
      end
      local fields = {}
      for _, field in ipairs(meta.__fields or {}) do
        fields[field] = true
      end
      assert.are.same(sorted_keys(fields), sorted_keys(api.nouns[noun].fields), noun)
    end
    for method in pairs(api.methods) do
      assert.is_true(seen[method], method .. " does not exist")
    end
  end)

  it("says what each is for, in one line, and with its parameters", function()
    for _, part in ipairs { "functions", "methods" } do
      for name, entry in pairs(api[part]) do
        assert.is_string(entry.call, name)
        assert.matches("^%u[^\n]+%.$", entry.purpose, name)
        for _, parameter in ipairs(entry.parameters) do
          assert.is_string(parameter.name, name)
          assert.is_string(parameter.type, name)
          assert.is_string(parameter.help, name)
        end
        assert.matches("%S", lw.help(name))
      end
    end
    for name, noun in pairs(api.nouns) do
      assert.matches("%.$", noun.purpose, name)
      for field, entry in pairs(noun.fields) do
        assert.is_string(entry.type, field)
        assert.is_string(entry.help, field)
      end
    end
  end)

  it("is annotated alike for editors", function()
    local classes, class = {}, nil
    for line in io.lines(helper.root .. "/engine/bind/api.lua") do
      class = line:match "^%-%-%-@class ([a-z_]+)" or class
      classes[class or ""] = classes[class or ""] or {}
      local field = line:match "^%-%-%-@field ([a-z_0-9]+)"
      if field then
        classes[class][field] = true
      end
    end
    classes[""] = nil
    local functions = { version = true }
    for name in pairs(api.functions) do
      functions[name] = true
    end
    assert.are.same(sorted_keys(functions), sorted_keys(classes.linewright))
    classes.linewright = nil
    assert.are.same(sorted_keys(api.nouns), sorted_keys(classes))
    for noun, described in pairs(api.nouns) do
      local all = {}
      for field in pairs(described.fields) do
        all[field] = true
      end
      for method in pairs(api.methods) do
        local of, name = method:match "^(.*):(.*)$"
        if of == noun then
          all[name] = true
        end
      end
      assert.are.same(sorted_keys(all), sorted_keys(classes[noun]), noun)
    end
  end)

  it("has the engine's option tables in its help", function()
    for _, name in ipairs { "read_scan", "fit_lines", "calibrate", "deconvolve", "separate", "scherrer" } do
      local options = lw.options(name)
      assert.is_true(#options > 0, name)
      local text = lw.help(name)
      for _, option in ipairs(options) do
        assert.is_truthy(text:find("\n  " .. option.key .. " ", 1, true), name .. ": " .. option.key)
        assert.matches("%S", option.help)
        if option.kind == "choice" then
          assert.is_true(#option.choices > 1)
        end
      end
    end
  end)

  it("answers a slip with the nearest name", function()
    assert.error_matches(function() lw.help "fit_line" end, "did you mean 'fit_lines'")
    assert.matches("^vector: ", lw.help(lw.vector {}))
    assert.matches("fit_lines", lw.help())
  end)
end)
