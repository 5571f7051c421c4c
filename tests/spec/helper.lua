-- SPDX-License-Identifier: GPL-3.0-or-later
-- What the specs share: the interpreter that runs them, run again as a person does.
local helper = {}

local function read(path)
  local file = assert(io.open(path, "rb"))
  local text = file:read "a"
  file:close()
  return text
end
helper.read = read

function helper.write(path, text)
  local file = assert(io.open(path, "wb"))
  file:write(text)
  file:close()
end

local function output_of(command)
  local pipe = assert(io.popen(command))
  local text = pipe:read "a"
  pipe:close()
  return (text:gsub("%s+$", ""))
end
helper.output_of = output_of

function helper.quote(text)
  return "'" .. tostring(text):gsub("'", "'\\''") .. "'"
end

-- the shell's parent is the interpreter that runs this file
helper.engine = output_of "readlink /proc/$PPID/exe"
helper.spec = debug.getinfo(1, "S").source:match "^@(.*)/[^/]*$"
helper.root = output_of("cd " .. helper.quote(helper.spec .. "/../..") .. " && pwd -P")
helper.demo = helper.root .. "/scripts/demo"

-- A fresh folder; before_each makes one, after_each removes it.
function helper.folder()
  local path = output_of "mktemp -d"
  assert(path:match "^/.+", "no folder could be made")
  return path
end

function helper.remove(path)
  assert(path:match "^/tmp/.+" or path:match "^/var/.+" or path:match "/tmp%.[^/]+$", path)
  os.execute("rm -rf " .. helper.quote(path))
end

-- Runs the interpreter in a folder. options: folder, input, signal_after (s), before (shell prefix).
-- Returns exit code, stdout, stderr.
function helper.run(folder, arguments, options)
  options = options or {}
  local words = {}
  for i, word in ipairs(arguments) do
    words[i] = helper.quote(word)
  end
  local guard = "timeout -k 5 60"
  if options.signal_after then
    guard = "timeout --foreground --preserve-status -s INT -k 10 " .. options.signal_after
  end
  local input = "/dev/null"
  if options.input then
    input = folder .. "/.input"
    helper.write(input, options.input)
  end
  local command = ("cd %s && %s%s %s %s <%s >%s 2>%s"):format(helper.quote(folder), options.before or "", guard,
    helper.quote(helper.engine), table.concat(words, " "), helper.quote(input), helper.quote(folder .. "/.out"),
    helper.quote(folder .. "/.err"))
  local _, kind, code = os.execute(command)
  assert(kind == "exit", "the shell was killed")
  return code, read(folder .. "/.out"), read(folder .. "/.err")
end

-- Writes a recipe and runs it.
function helper.recipe(folder, text, arguments, options)
  helper.write(folder .. "/recipe.lua", text)
  local all = {}
  for _, word in ipairs(options and options.flags or {}) do
    all[#all + 1] = word
  end
  all[#all + 1] = "recipe.lua"
  for _, word in ipairs(arguments or {}) do
    all[#all + 1] = word
  end
  return helper.run(folder, all, options)
end

function helper.exists(path)
  return os.execute("test -e " .. helper.quote(path) .. " || test -L " .. helper.quote(path)) == true
end

return helper
