-- SPDX-License-Identifier: GPL-3.0-or-later
return { functions = {}, methods = {}, nouns = {} }
