-- SPDX-License-Identifier: GPL-3.0-or-later
-- Silicon, certified reference material SRM 640c.
return {
  name = "si-640c",
  title = "Si SRM 640c",
  aliases = { "SRM 640c", "640c" },
  formula = "Si",
  space_group = "Fd-3m",
  unit = "nm",
  cell = { a = 0.54311946 }, -- certificate, quoted in a letter of a NIST author, 2000
  expanded_uncertainty = { a = 0.00000092 }, -- the same source
  coverage_factor = 2, -- from memory
  temperature_c = 22.5,
  certificate = "Standard Reference Material 640c, National Institute of Standards and Technology, \z
    Gaithersburg",
  source = "Certificate of SRM 640c, quoted by one of its authors in a letter of September 2000; coverage \z
    factor from memory. The uncrushed crystal had 0.54310185(4) nm; slight strain broadening is put down \z
    to the oxide skin",
  stiffness_gpa = { c11 = 165.7, c12 = 63.9, c44 = 79.6 },
  stiffness_source = "Simmons & Wang (1971) Single Crystal Elastic Constants, from memory",
  hazard = "fine powder can form a combustible dust: follow the safety data sheet and local rules",
}
