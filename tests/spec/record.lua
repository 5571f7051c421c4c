-- SPDX-License-Identifier: GPL-3.0-or-later
-- Reads JSON (RFC 8259) for the specs, apart from the engine's own reader: what a colleague's tool sees.
local record = {}

local read

local function fail(text, at, what)
  error(("JSON, byte %d: %s, found %q"):format(at, what, text:sub(at, at + 10)), 0)
end

local function skip(text, at)
  return text:match("^[ \t\r\n]*()", at)
end

local escapes = { b = "\b", f = "\f", n = "\n", r = "\r", t = "\t", ['"'] = '"', ["\\"] = "\\", ["/"] = "/" }

local function read_text(text, at)
  local parts = {}
  at = at + 1
  while true do
    local plain, next_at = text:match('^([^"\\%c]*)()', at)
    parts[#parts + 1] = plain
    local c = text:sub(next_at, next_at)
    if c == '"' then return table.concat(parts), next_at + 1 end
    local escape, code = text:match("^\\(.)", next_at), text:match("^\\u(%x%x%x%x)", next_at)
    if code then
      parts[#parts + 1] = utf8.char(tonumber(code, 16))
      at = next_at + 6
    elseif escape and escapes[escape] then
      parts[#parts + 1] = escapes[escape]
      at = next_at + 2
    else
      fail(text, next_at, "a text that does not end")
    end
  end
end

local function read_members(text, at, close, one)
  at = skip(text, at + 1)
  if text:sub(at, at) == close then return at + 1 end
  while true do
    at = skip(text, one(at))
    local c = text:sub(at, at)
    if c == close then return at + 1 end
    if c ~= "," then fail(text, at, "a comma or " .. close .. " is missing") end
    at = skip(text, at + 1)
  end
end

local words = { ["true"] = true, ["false"] = false }

function read(text, at)
  at = skip(text, at)
  local c = text:sub(at, at)
  local value = {}
  if c == "{" then
    return value, read_members(text, at, "}", function(here)
      local name, after = read_text(text, here)
      after = skip(text, after)
      if text:sub(after, after) ~= ":" then fail(text, after, "a colon is missing") end
      if value[name] ~= nil then fail(text, here, "a name is given twice") end
      value[name], after = read(text, after + 1)
      return after
    end)
  elseif c == "[" then
    return value, read_members(text, at, "]", function(here)
      value[#value + 1], here = read(text, here)
      return here
    end)
  elseif c == '"' then
    return read_text(text, at)
  end
  local number, after = text:match("^(%-?%d+%.?%d*[eE]?[+-]?%d*)()", at)
  if number then return tonumber(number) or fail(text, at, "a number is wrong"), after end
  local word, word_end = text:match("^(%a+)()", at)
  if words[word] == nil then fail(text, at, "a value is missing") end
  return words[word], word_end
end

-- The record of a file as a plain table.
function record.read(path)
  local file = assert(io.open(path, "rb"))
  local text = file:read "a"
  file:close()
  local value, after = read(text, 1)
  if skip(text, after) <= #text then fail(text, after, "something follows the record") end
  return value
end

return record
