-- SPDX-License-Identifier: GPL-3.0-or-later
-- The prompt, through a pipe and on a terminal of its own (made by `script` of util-linux).
local helper = dofile((debug.getinfo(1, "S").source:match "^@(.*/)" or "./") .. "helper.lua")

describe("the prompt", function()
  local folder
  before_each(function() folder = helper.folder() end)
  after_each(function() helper.remove(folder) end)
  local function type_in(text) return helper.run(folder, { "-i" }, { input = text }) end

  it("shows the values of expressions", function()
    assert.are.same({ 0, "2\n3\tx\n", "" }, { type_in "1 + 1\n3, 'x'\n" })
    local _, out = type_in "require 'linewright'.quantity { 18.42, 0.63, 'nm' }\n"
    assert.are.equal("18.42(63) nm\n", out)
  end)

  it("takes statements, and several lines", function()
    local _, out, err = type_in "x = 4\nx\nfor i = 1, 2 do\nprint(i)\nend\nfunction f()\n\nreturn 7\nend\nf()\n"
    assert.are.same({ "4\n1\n2\n7\n", "" }, { out, err })
  end)

  it("goes on after an error", function()
    local code, out, err = type_in "error 'wrong'\nx = \n)\n5\n"
    assert.are.same({ 0, "5\n" }, { code, out })
    assert.matches("prompt:1: wrong", err)
    assert.matches("unexpected symbol", err)
  end)

  it("is sandboxed like a recipe", function()
    local _, _, err = type_in "io.open 'x'\n"
    assert.matches("'io' is not open", err)
  end)

  it("helps", function()
    local _, out = type_in "help 'read_scan'\n"
    assert.matches("lw.read_scan%(path", out)
  end)

  describe("on a terminal", function()
    -- Types the keys line by line, waits for a text on the screen (at most 10 s), leaves with Ctrl-D.
    local function at_terminal(keys, awaited)
      helper.write(folder .. "/keys", keys)
      helper.write(folder .. "/typing", [[
        while IFS= read -r line; do printf '%s\n' "$line"; sleep 0.1; done <keys
        n=0
        until grep -q -- "$1" screen || [ $n -gt 100 ]; do sleep 0.1; n=$((n + 1)); done
        printf '\004'
        sleep 0.2
      ]])
      local command = ("cd %s && : >screen && sh typing %s | HOME=%s TERM=dumb timeout -k 5 20 "
        .. "script -qefc %s screen >script.out 2>&1"):format(folder, helper.quote(awaited), folder,
          helper.quote(helper.quote(helper.engine)))
      os.execute(command)
      return helper.read(folder .. "/screen")
    end
    if os.execute "command -v script >/dev/null 2>&1" ~= true then
      pending "the program `script` is not here"
      return
    end

    it("greets, remembers, and keeps its history to itself", function()
      local screen = at_terminal("x = 20 + 1\nx * 2\n", "^42")
      assert.matches("linewright %d", screen)
      assert.matches("42", screen)
      local path = folder .. "/.linewright_history"
      assert.are.equal("600", helper.output_of("stat -c %a " .. path))
      assert.matches("x %* 2", helper.read(path))
    end)

    it("completes globals, fields and methods", function()
      local screen = at_terminal("lw = require 'linewright'\nv = lw.vector { 1, 2 }\nprint('<' .. v:su\t) .. '>')\n"
        .. "q = lw.quantity { 5 }\nprint('[' .. q.va\t .. ']')\nw = collectg\t'count')\nprint(type(w))\n", "^number")
      assert.matches("<3%.0>", screen)
      assert.matches("%[5%.0%]", screen)
      assert.matches("number", screen)
    end)
  end)
end)
