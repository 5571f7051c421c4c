-- SPDX-License-Identifier: GPL-3.0-or-later
-- Lanthanum hexaboride.
return {
  name = "lanthanum_hexaboride",
  title = "Lanthanum hexaboride",
  aliases = { "LaB6", "lab6" },
  formula = "LaB6",
  space_group = "Pm-3m",
  unit = "nm",
  cell = { a = 0.415683 }, -- Certificate of SRM 660c (2015), rounded
  stiffness_gpa = { c11 = 453.3, c12 = 18.2, c44 = 90.1 },
  stiffness_source = "Tanaka et al. (1977) Solid State Commun. 22, 203, from memory",
  burgers_nm = 0.41568, -- a, <100>
  density_kg_m3 = 4710, -- handbook, from memory; agrees with cell and formula
  hazard = "fine powder: avoid dust, follow the safety data sheet and local rules",
  source = "Certificate of SRM 660c (2015), rounded; use standards/reference for calibrations",
}
