# SPDX-License-Identifier: GPL-3.0-or-later
# Turns the file IN into the C source OUT that defines lwb_api_source and lwb_api_size.
file(READ ${IN} bytes HEX)
string(LENGTH "${bytes}" digits)
math(EXPR size "${digits} / 2")
string(REGEX REPLACE "([0-9a-f][0-9a-f])" "0x\\1," bytes "${bytes}")
string(REPLACE "0x0a," "0x0a,\n" bytes "${bytes}") # a line of C for a line of Lua
file(WRITE ${OUT} "/* made from api.lua */\n#include \"bind/help.h\"\nconst char lwb_api_source[] = {${bytes}0x00};\nconst size_t lwb_api_size = ${size};\n")
