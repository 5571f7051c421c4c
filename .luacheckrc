-- SPDX-License-Identifier: GPL-3.0-or-later
std = "lua54"
max_line_length = 120

-- What the sandbox opens (engine/app/sandbox.c): the linter flags just what a recipe would be refused.
stds.recipe = {
  read_globals = {
    "_VERSION", "arg", "assert", "collectgarbage", "coroutine", "error", "getmetatable", "help", "ipairs", "load",
    "math", "next", "pairs", "pcall", "print", "rawequal", "rawget", "rawlen", "rawset", "require", "select",
    "setmetatable", "string", "table", "tonumber", "tostring", "type", "utf8", "xpcall",
    os = { fields = { "clock", "date", "difftime", "time" } },
  },
  globals = { "_G" },
}

files["scripts"] = { std = "recipe" }
files["standards"] = { std = "none", max_line_length = false }
files["tests/spec"] = { std = "lua54+busted" }
files["tests/truth"] = { std = "lua54+busted" }
