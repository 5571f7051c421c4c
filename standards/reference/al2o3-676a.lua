-- SPDX-License-Identifier: GPL-3.0-or-later
-- Alumina (corundum), certified reference material SRM 676a.
return {
  name = "al2o3-676a",
  title = "Al2O3 SRM 676a",
  aliases = { "SRM 676a", "676a" },
  formula = "Al2O3",
  space_group = "R-3c",
  unit = "nm",
  -- certificate, from memory; check against the certificate of your own jar
  cell = { a = 0.4759355, c = 1.2992317 },
  temperature_c = 22.5,
  unverified = true, -- from memory; check against the certificate of your own jar
  certificate = "Standard Reference Material 676a, National Institute of Standards and Technology, \z
    Gaithersburg",
  source = "Certificate of SRM 676a, cell from memory; check against the certificate of your own jar; no \z
    uncertainty is carried. Certified above all for its crystalline mass fraction, 99.02(1.11) %, k = 2",
  stiffness_gpa = { c11 = 497.3, c12 = 162.8, c13 = 116.0, c14 = -21.9, c33 = 500.9, c44 = 146.8 },
  stiffness_source = "Goto, Anderson, Ohno & Yamamoto (1989) J. Geophys. Res. 94, 7588, from memory",
  hazard = "fine powder: avoid dust, follow the safety data sheet and local rules",
}
