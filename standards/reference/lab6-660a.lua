-- SPDX-License-Identifier: GPL-3.0-or-later
-- Lanthanum hexaboride, certified reference material SRM 660a.
return {
  name = "lab6-660a",
  title = "LaB6 SRM 660a",
  aliases = { "SRM 660a", "660a" },
  formula = "LaB6",
  space_group = "Pm-3m",
  unit = "nm",
  cell = { a = 0.41569162 }, -- certificate, from memory; check against the certificate of your own jar
  expanded_uncertainty = { a = 0.00000097 }, -- the same source
  coverage_factor = 2, -- assumed
  temperature_c = 22.5,
  unverified = true, -- from memory; check against the certificate of your own jar
  certificate = "Standard Reference Material 660a, National Institute of Standards and Technology, \z
    Gaithersburg (2000)",
  source = "Certificate of SRM 660a (2000), from memory; check against the certificate of your own jar",
  stiffness_gpa = { c11 = 453.3, c12 = 18.2, c44 = 90.1 },
  stiffness_source = "Tanaka et al. (1977) Solid State Commun. 22, 203, from memory",
  hazard = "fine powder: avoid dust, follow the safety data sheet and local rules",
}
