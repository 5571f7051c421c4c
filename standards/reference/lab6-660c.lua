-- SPDX-License-Identifier: GPL-3.0-or-later
-- Lanthanum hexaboride, certified reference material SRM 660c.
-- Form of a reference material: a literal of constants, loaded in an empty environment.
--   name, title, aliases     how scripts and reports call it (case, blanks, "_" and "-" don't matter)
--   formula, space_group     the group by its short symbol or number; setting = "H", "R", "1", "2", "b1" ... if
--                            it isn't the standard one (hexagonal axes, origin choice 2, unique axis b)
--   unit, cell               "nm" or "angstrom"; a, b, c in it and alpha, beta, gamma in degrees; what the
--                            symmetry fixes is left out
--   expanded_uncertainty     of a, b, c, in the unit, with coverage_factor (1: the figure is a standard
--                            uncertainty); left out where none is stated
--   temperature_c            at which the cell holds
--   certificate, source      which certificate, and where its numbers were read
--   unverified               true: check the numbers against the certificate of your own jar before use
--   intensities              certified relative intensities, { hkl = "104" or "1 0 10", value =, expanded_uncertainty = }
--                            a line; intensities_of = "areas" (the default) or "heights"
--   domain_size_nm           mean column length, where one is stated
--   stiffness_gpa, hazard    as in standards/materials
return {
  name = "lab6-660c",
  title = "LaB6 SRM 660c",
  aliases = { "SRM 660c", "660c", "lab6" },
  formula = "LaB6",
  space_group = "Pm-3m",
  unit = "nm",
  cell = { a = 0.4156826 }, -- certificate; Black et al. (2020) Powder Diffr. 35
  expanded_uncertainty = { a = 0.000008 }, -- the same source
  coverage_factor = 2,
  temperature_c = 22.5,
  certificate = "Standard Reference Material 660c, National Institute of Standards and Technology, \z
    Gaithersburg (2015)",
  source = "Certificate of SRM 660c (2015); also Black et al. (2020) Powder Diffr. 35. The expanded \z
    uncertainty is mostly of type B",
  stiffness_gpa = { c11 = 453.3, c12 = 18.2, c44 = 90.1 },
  stiffness_source = "Tanaka et al. (1977) Solid State Commun. 22, 203, from memory",
  hazard = "fine powder: avoid dust, follow the safety data sheet and local rules",
}
