-- SPDX-License-Identifier: GPL-3.0-or-later
-- Silicon, certified reference material SRM 640e.
return {
  name = "si-640e",
  title = "Si SRM 640e",
  aliases = { "SRM 640e", "640e" },
  formula = "Si",
  space_group = "Fd-3m",
  unit = "nm",
  cell = { a = 0.5431179 }, -- certificate, from memory; check against the certificate of your own jar
  expanded_uncertainty = { a = 0.000008 }, -- the same source
  coverage_factor = 2, -- from memory
  temperature_c = 22.5,
  unverified = true, -- from memory; check against the certificate of your own jar
  certificate = "Standard Reference Material 640e, National Institute of Standards and Technology, \z
    Gaithersburg",
  source = "Certificate of SRM 640e, from memory; check against the certificate of your own jar",
  stiffness_gpa = { c11 = 165.7, c12 = 63.9, c44 = 79.6 },
  stiffness_source = "Simmons & Wang (1971) Single Crystal Elastic Constants, from memory",
  hazard = "fine powder can form a combustible dust: follow the safety data sheet and local rules",
}
