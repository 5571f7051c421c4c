-- SPDX-License-Identifier: GPL-3.0-or-later
-- Alumina (corundum), certified reference material SRM 1976.
return {
  name = "al2o3-1976",
  title = "Al2O3 SRM 1976",
  aliases = { "SRM 1976", "1976" },
  formula = "Al2O3",
  space_group = "R-3c",
  unit = "nm",
  -- certificate, from memory; check against the certificate of your own jar
  cell = { a = 0.4758846, c = 1.2993066 },
  temperature_c = 25, -- from memory
  unverified = true, -- from memory; check against the certificate of your own jar
  certificate = "Standard Reference Material 1976, National Institute of Standards and Technology, \z
    Gaithersburg",
  source = "Certificate of SRM 1976 (sintered plate, made for relative intensities), cell from memory; \z
    check against the certificate of your own jar; no uncertainty is carried. The later plates and discs \z
    of the series (1976a, b, c) have cells of their own",
  stiffness_gpa = { c11 = 497.3, c12 = 162.8, c13 = 116.0, c14 = -21.9, c33 = 500.9, c44 = 146.8 },
  stiffness_source = "Goto, Anderson, Ohno & Yamamoto (1989) J. Geophys. Res. 94, 7588, from memory",
  hazard = "fine powder: avoid dust, follow the safety data sheet and local rules",
}
