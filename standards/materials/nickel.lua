-- SPDX-License-Identifier: GPL-3.0-or-later
-- Nickel.
-- Form of a material: a literal of constants, loaded in an empty environment.
--   name, title, aliases     how scripts and reports call it (case, blanks, "_" and "-" don't matter)
--   formula, space_group     the group by its short symbol or number; setting = "H", "R", "1", "2", "b1" ... if
--                            it isn't the standard one (hexagonal axes, origin choice 2, unique axis b)
--   unit, cell               "nm" or "angstrom"; a, b, c in it and alpha, beta, gamma in degrees; what the
--                            symmetry fixes is left out. standard_uncertainty of a, b, c, where stated
--   stiffness_gpa            elastic constants cij in GPa: c11, c12, c44 (cubic); c11, c12, c13, c33, c44
--                            (hexagonal) and c14 (trigonal) or c66 (tetragonal); nine (orthorhombic) and so on
--   stiffness_source         where they are from
--   burgers_nm               length of the usual Burgers vector
--   density_kg_m3            of the solid
--   hazard                   caution for handling the powder
--   source                   where the cell is from
-- The cell is a starting value for a pure, strain-free powder near 25 degrees C, not a certificate.
return {
  name = "nickel",
  title = "Nickel",
  aliases = { "Ni" },
  formula = "Ni",
  space_group = "Fm-3m",
  unit = "nm",
  cell = { a = 0.35238 }, -- Swanson & Tatge (1953) NBS Circular 539, vol. 1, from memory
  stiffness_gpa = { c11 = 246.5, c12 = 147.3, c44 = 124.7 },
  stiffness_source = "Simmons & Wang (1971); Every & McCurdy (1992) Landolt-Börnstein III/29a, from \z
    memory; other handbooks differ by up to 5 %",
  burgers_nm = 0.24917, -- a/sqrt(2), <110>/2
  density_kg_m3 = 8908, -- handbook, from memory; agrees with cell and formula
  hazard = "nickel dust is a skin and respiratory sensitiser and a suspected carcinogen, fine powder is \z
    flammable: closed mounting, follow the safety data sheet and local rules",
  source = "Swanson & Tatge (1953) NBS Circular 539, vol. 1, from memory",
}
