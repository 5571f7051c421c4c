-- SPDX-License-Identifier: GPL-3.0-or-later
-- Reads JSON (RFC 8259) into tables: objects and lists both; null becomes nil, \u escapes stay as they are.
local escapes = { b = "\b", f = "\f", n = "\n", r = "\r", t = "\t" }

local value

local function text_at(source, at)
  local parts = {}
  while true do
    local plain, stop = source:match('^([^"\\]*)(["\\])', at)
    assert(plain, "JSON: a text has no end")
    parts[#parts + 1] = plain
    at = at + #plain + 1
    if stop == '"' then
      return table.concat(parts), at
    end
    local letter = source:sub(at, at)
    parts[#parts + 1] = letter == "u" and "\\u" or escapes[letter] or letter
    at = at + 1
  end
end

-- Members of an object or list, from behind its bracket.
local function members(source, at, close, member)
  local into = {}
  at = source:match("^%s*()", at)
  if source:sub(at, at) == close then
    return into, at + 1
  end
  while true do
    at = member(into, at)
    local mark
    mark, at = source:match("^%s*([,}%]])%s*()", at)
    assert(mark, "JSON: comma or bracket missing")
    if mark == close then
      return into, at
    end
  end
end

function value(source, at)
  at = source:match("^%s*()", at)
  local first = source:sub(at, at)
  if first == "{" then
    return members(source, at + 1, "}", function(into, here)
      local key
      here = assert(source:match('^%s*"()', here), "JSON: a key is missing")
      key, here = text_at(source, here)
      into[key], here = value(source, assert(source:match("^%s*:()", here), "JSON: a colon is missing"))
      return here
    end)
  elseif first == "[" then
    return members(source, at + 1, "]", function(into, here)
      into[#into + 1], here = value(source, here)
      return here
    end)
  elseif first == '"' then
    return text_at(source, at + 1)
  end
  local word, behind = source:match("^([%w%.%+%-]+)()", at)
  if word == "true" then return true, behind end
  if word == "false" then return false, behind end
  if word == "null" then return nil, behind end
  return assert(tonumber(word), "JSON: neither number nor word"), behind
end

return function(source)
  return (value(source, 1))
end
